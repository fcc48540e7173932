"""The report as a user asks for it, and what stands in its files."""

import csv
import html
import json
import re
import shlex

import pytest
from sdebench.reports import numbers

import sdebench as sb
from tests.tolerance import round_off

QUICK = ("--looks", "1", "--threads", "1", "--steps", "4,8,16,32")


@pytest.fixture
def measured(typed, folder):
    """Return a function that measures Milstein and returns the evidence's file name."""

    def run(*words: str) -> str:
        outcome = typed("measure", "milstein", "--on", "gbm", *QUICK, "--save", "e.json", *words)
        assert outcome.code == 0
        return "e.json"

    return run


def test_a_report_is_written_of_an_evidence_file(typed, measured, folder):
    outcome = typed("report", measured(), "--out", "out")
    assert (outcome.code, outcome.out.strip()) == (0, "out/report.html")
    names = {p.relative_to(folder / "out").as_posix() for p in (folder / "out").rglob("*.*")}
    assert {"report.html", "summary.md", "tables/claims.csv"} <= names
    for ending in ("svg", "pdf", "png"):
        assert f"figures/milstein--gbm--convergence.{ending}" in names
        assert f"figures/milstein--gbm--local-order.{ending}" in names
    for ending in ("csv", "md", "tex"):
        assert f"tables/milstein--gbm--strong.{ending}" in names
        assert f"tables/milstein--gbm--weak.{ending}" in names
        assert f"tables/milstein--gbm--one-step-strong.{ending}" in names


def test_measure_writes_the_same_report(typed, measured, folder):
    evidence = measured("--report", "one")
    typed("report", evidence, "--out", "two")
    for name in ("report.html", "summary.md", "figures/milstein--gbm--convergence.png"):
        assert (folder / "one" / name).read_bytes() == (folder / "two" / name).read_bytes()


def test_a_folder_that_is_not_ours_is_refused_before_anything_is_measured(typed, folder, traced):
    (folder / "thesis").mkdir()
    (folder / "thesis" / "chapter.tex").write_text("all of it")
    outcome = typed("measure", traced, "--on", "gbm", "--report", "thesis")
    assert outcome.code == 2
    assert outcome.err.count("\n") == 1
    assert "holds other things than a report" in outcome.err
    assert not (folder / "called").exists()


BAD = {
    "missing": None,
    "empty": "",
    "not JSON": "once upon a time",
    "truncated": '{"format": "sdebench-evidence/1", "verdict"',
    "newer": '{"format": "sdebench-evidence/2"}',
    "a number": "42",
    "another's": '{"hello": "world"}',
}


@pytest.mark.parametrize("content", BAD.values(), ids=BAD)
def test_a_file_that_is_no_evidence_is_one_sentence_and_the_old_report_stays(
    typed, measured, folder, content
):
    typed("report", measured(), "--out", "out")
    before = (folder / "out" / "report.html").read_bytes()
    if content is not None:
        (folder / "bad.json").write_text(content)
    outcome = typed("report", "e.json", "bad.json", "--out", "out")
    assert outcome.code == 2
    assert outcome.out == ""
    assert outcome.err.count("\n") == 1
    assert "'bad.json' is not a readable evidence file" in outcome.err
    assert (folder / "out" / "report.html").read_bytes() == before


@pytest.mark.parametrize("wrong", ["NaN", '"much"', "null"])
def test_a_number_that_is_none_is_refused(typed, measured, folder, wrong):
    text = (folder / measured()).read_text()
    spoiled = re.sub(r'"h": [\d.e-]+', f'"h": {wrong}', text, count=1)
    assert spoiled != text
    (folder / "bad.json").write_text(spoiled)
    outcome = typed("report", "bad.json", "--out", "out")
    assert (outcome.code, outcome.err.count("\n")) == (2, 1)
    assert not (folder / "out").exists()


def test_text_of_a_users_is_shown_as_text(typed, measured, folder):
    """In names, sentences and parameters; it would catch a template that does not escape."""
    evil = "<img src=x onerror=alert(1)>&\\input{x}|*[a](b) $\\frac{ $x_\x07"
    found = json.loads((folder / measured()).read_text())
    for row in (*found["claims"], *found["results"]):
        row["scheme"] = row["sentence"] = evil
        row["functional"] = evil if row["kind"] == "weak" else None
    found["claims"][0]["verdict"] = "refuted"
    found["provenance"]["command"] = found["provenance"]["platform"] = evil
    (folder / "evil.json").write_text(json.dumps(found))
    assert typed("report", "evil.json", "--out", "out").code == 0
    page = (folder / "out" / "report.html").read_text()
    assert "<img" not in page
    assert page.count(html.escape(evil, quote=False)) + page.count(html.escape(evil)) > 5
    assert "<img" not in (folder / "out" / "summary.md").read_text().replace("\\<img", "")
    for table in (folder / "out" / "tables").glob("*.tex"):
        assert "\\input" not in table.read_text()
    for figure in (folder / "out" / "figures").glob("*.svg"):
        assert "<img" not in figure.read_text()


def cells(page: str, caption: str) -> list[list[str]]:
    """Return the cells of the first table on a page whose caption begins so."""
    start = page.index(f"<caption>{caption}")
    body = page[page.index("<tbody>", start) : page.index("</tbody>", start)]
    return [
        [html.unescape(cell) for cell in re.findall(r"<td[^>]*>(.*?)</td>", line)]
        for line in body.split("</tr>")
        if "<td" in line
    ]


def as_number(text: str) -> float:
    digits = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹−", "-0123456789-")
    value, _, power = text.translate(digits).partition(" × 10")
    return float(value) * 10.0 ** float(power or 0)


def unit_of(text: str) -> float:
    """Return one of the last digit that is shown."""
    mantissa, _, power = text.partition(" × 10")
    return 10.0 ** -len(mantissa.partition(".")[2]) * as_number(f"1 × 10{power or '⁰'}")


def rounded_once(text: str, value: float) -> bool:
    """Whether a text is a number to half of its last digit, and an ulp for reading it back."""
    return abs(as_number(text) - value) <= unit_of(text) / 2 + round_off(value, 4)


def test_every_error_on_the_page_is_that_of_the_evidence_rounded_once(typed, measured, folder):
    evidence = sb.load(measured())
    typed("report", "e.json", "--out", "out")
    page = (folder / "out" / "report.html").read_text()
    rows = [r for r in evidence.results if r.kind in ("strong", "weak") and not r.check]
    shown = [c for kind in ("Strong", "Weak") for c in cells(page, f"{kind} error")]
    rungs = [rung for row in rows for rung in row.rungs]
    assert len(shown) == len(rungs) == 16
    for line, rung in zip(shown, rungs, strict=True):
        steps, h, error, uncertainty, order = line[-7:-2]
        assert (int(steps), float(h)) == (rung.steps, rung.h)
        assert rounded_once(error, rung.error)
        assert rounded_once(uncertainty, rung.uncertainty)
        assert unit_of(error) <= rung.uncertainty, "digits end where the uncertainty begins"
        assert order == ("" if rung.local_order is None else numbers.order(rung.local_order))


def test_the_csv_beside_a_table_has_every_digit(typed, measured, folder):
    evidence = sb.load(measured())
    typed("report", "e.json", "--out", "out")
    with (folder / "out" / "tables" / "milstein--gbm--strong.csv").open() as file:
        read = [float(line["error"]) for line in csv.DictReader(file)]
    (strong,) = [r for r in evidence.results if r.kind == "strong" and not r.check]
    assert read == [rung.error for rung in strong.rungs]


def test_the_command_on_the_page_gives_the_same_bits(typed, measured, folder):
    """By someone who has the page alone."""
    measured()
    typed("report", "e.json", "--out", "out")
    page = (folder / "out" / "report.html").read_text()
    (command,) = re.findall(r"<pre[^>]*><code>(.*?)</code></pre>", page, re.S)
    program, *words = shlex.split(html.unescape(command))
    assert program == "sdebench"
    assert typed(*words, "--save", "again.json").code == 0
    first, again = sb.load("e.json"), sb.load("again.json")
    assert [row.rungs for row in again.results] == [row.rungs for row in first.results]
    assert again.claims == first.claims


def test_what_was_sampled_says_on_how_many_paths(typed, folder):
    words = ("--on", "gbm", "--route", "sampled", *QUICK)
    assert typed("measure", "milstein", *words, "--save", "e.json", "--report", "out").code == 0
    (paths,) = {r.cost.paths for r in sb.load("e.json").results if r.route == "sampled"}
    page = (folder / "out" / "report.html").read_text()
    for kind in ("Strong", "Weak"):
        assert f"<caption>{kind} error, sampled on {paths} paths " in page


def test_a_scheme_without_errors_to_draw_is_named_beside_those_drawn(typed, folder):
    typed("measure", "exact-ou", "milstein", "--on", "ou", *QUICK, "--report", "out")
    page = (folder / "out" / "report.html").read_text()
    assert page.count("Without errors to draw: exact-ou.") == 2


KINDS = {
    "a broken contract": ("my.py:step", "gbm"),
    "nothing that applies": ("exact-ou", "gbm"),
    "errors that are exact": ("exact-ou", "ou"),
    "errors of no number": ("euler-maruyama", "ou:theta=10000000"),
}


@pytest.mark.parametrize(("own", "on"), KINDS.values(), ids=KINDS)
def test_every_outcome_has_its_report(typed, write, folder, own, on):
    write("@scheme(strong=0.5)\ndef step(sde, t, x, h, noise):\n    return x[::-1] + h\n")
    typed("measure", own, "--on", on, *QUICK, "--save", "e.json", "--report", "out")
    claims = sb.load("e.json").claims
    page = html.unescape((folder / "out" / "report.html").read_text())
    assert claims
    assert all(f"{claim.scheme} on {claim.problem}" in page for claim in claims)
    assert all(numbers.typeset(claim.sentence) in page for claim in claims)
