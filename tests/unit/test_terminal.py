"""Evidence on a terminal."""

import io
import itertools

import msgspec
import pytest
from sdebench.reports import terminal
from sdebench.reports.tables import Table

ESCAPE = "\x1b"


class Tty(io.StringIO):
    """Text that is said to go to a terminal."""

    def isatty(self) -> bool:
        return True


@pytest.fixture(autouse=True)
def plain_environment(monkeypatch):
    """Leave nothing of the caller's terminal: colours follow the stream alone."""
    for name in ("NO_COLOR", "FORCE_COLOR", "TTY_COMPATIBLE", "TTY_INTERACTIVE", "COLORTERM"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setenv("TERM", "xterm-256color")


def shown(evidence, stream) -> str:
    terminal.show_evidence(evidence, terminal.console(stream))
    return stream.getvalue()


@pytest.mark.parametrize("name", ["supported_evidence", "refuted_evidence"])
def test_what_goes_to_no_terminal_is_plain_text(name, request):
    assert ESCAPE not in shown(request.getfixturevalue(name), io.StringIO())


def test_verdicts_on_a_terminal_are_coloured(refuted_evidence):
    assert f"{ESCAPE}[1;31mrefuted" in shown(refuted_evidence, Tty())


def test_no_color_leaves_colours_out(refuted_evidence, monkeypatch):
    monkeypatch.setenv("NO_COLOR", "1")
    text = shown(refuted_evidence, Tty())
    assert "31m" not in text
    assert "32m" not in text


@pytest.mark.parametrize("name", ["[red]", "[/]", "a[b]c", ":smile:", "[link=x]y[/link]"])
def test_markup_in_a_name_is_shown_as_it_is(supported_evidence, name):
    claims = [msgspec.structs.replace(c, scheme=name) for c in supported_evidence.claims]
    results = [msgspec.structs.replace(r, scheme=name) for r in supported_evidence.results]
    renamed = msgspec.structs.replace(supported_evidence, claims=claims, results=results)
    assert shown(renamed, io.StringIO()).count(name) >= len(claims) + 1


def test_markup_in_a_sentence_is_shown_as_it_is(refuted_evidence):
    (claim,) = refuted_evidence.claims
    claims = [msgspec.structs.replace(claim, sentence="see [bold]x[/bold] and [7]")]
    changed = msgspec.structs.replace(refuted_evidence, claims=claims)
    assert "refuted. see [bold]x[/bold] and [7]" in shown(changed, io.StringIO())


def test_a_refuted_claim_is_told_with_its_sentence_on_one_line(refuted_evidence):
    (claim,) = refuted_evidence.claims
    wanted = f"{claim.scheme} on gbm, strong: refuted. {claim.sentence}"
    assert wanted in shown(refuted_evidence, io.StringIO()).splitlines()


def test_a_claim_that_one_step_refutes_is_shown_with_its_terms(refuted_evidence):
    assert "limits as h → 0" in shown(refuted_evidence, io.StringIO())


def test_a_supported_row_is_shown_with_its_detection_limit(supported_evidence):
    assert "Detection limit" in shown(supported_evidence, io.StringIO())


def test_many_pairs_that_are_supported_are_shown_as_claims_only(supported_evidence):
    other = msgspec.structs.replace(supported_evidence.claims[0], problem="another")
    both = msgspec.structs.replace(supported_evidence, claims=[*supported_evidence.claims, other])
    assert "local order  " not in shown(both, io.StringIO())


def test_the_last_line_is_the_verdict_with_the_counts(supported_evidence):
    last = shown(supported_evidence, io.StringIO()).splitlines()[-1]
    assert last.startswith("Verdict: supported (2 supported). 95% confidence")
    assert "seed 1" in last


def test_evidence_without_claims_is_shown(supported_evidence):
    empty = msgspec.structs.replace(supported_evidence, claims=[], results=[])
    assert "(no claims)" in shown(empty, io.StringIO())


def test_columns_of_numbers_are_set_to_the_right():
    stream = io.StringIO()
    table = Table("a title", ("name", "number"), [("x", "1"), ("y", "1000")], frozenset({1}))
    terminal.show_table(table, terminal.console(stream))
    lines = [line.rstrip() for line in stream.getvalue().splitlines()]
    assert lines == ["a title", "name  number", "x          1", "y       1000"]


def test_a_table_without_a_title_begins_with_its_headings():
    stream = io.StringIO()
    terminal.show_table(Table("", ("one",), [("x",)], frozenset()), terminal.console(stream))
    assert stream.getvalue().startswith("one")


def test_a_row_with_a_long_path_is_not_folded_where_the_output_is_no_terminal(supported_evidence):
    long = "/".join(["folder"] * 30) + "/mine.py:step"
    claims = [msgspec.structs.replace(c, scheme=long) for c in supported_evidence.claims]
    renamed = msgspec.structs.replace(supported_evidence, claims=claims)
    lines = shown(renamed, io.StringIO()).splitlines()
    assert sum(long in line and "supported" in line for line in lines) == 2


@pytest.mark.parametrize(
    ("stream", "quiet"), [(io.StringIO, False), (Tty, True)], ids=["no terminal", "quiet"]
)
def test_there_is_no_progress_where_nobody_looks(stream, quiet):
    out = stream()
    with terminal.progress_bar(terminal.console(out), quiet) as report:
        assert report is None
    assert out.getvalue() == ""


def test_short_work_shows_no_bar():
    out = Tty()
    with terminal.progress_bar(terminal.console(out), False) as report:
        report("work", 1, 2)
    assert "work" not in out.getvalue()


@pytest.fixture
def slow_clock(monkeypatch):
    """A clock on which a second passes between any two readings."""
    clock = itertools.count(0.0, 2.0)
    monkeypatch.setattr(terminal, "monotonic", lambda: next(clock))


def bar_of(name: str) -> str:
    out = Tty()
    with terminal.progress_bar(terminal.console(out), False) as report:
        report(name, 1, 2)
    return out.getvalue()


@pytest.mark.usefixtures("slow_clock")
def test_long_work_shows_a_bar_with_its_name():
    assert "milstein on gbm" in bar_of("milstein on gbm")


@pytest.mark.usefixtures("slow_clock")
@pytest.mark.parametrize("name", ["milstein on [gbm]", "a[/]b.py:step on gbm"])
def test_markup_in_the_name_of_the_work_is_shown_as_it_is(name):
    assert name in bar_of(name)
