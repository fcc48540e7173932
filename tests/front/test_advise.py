"""Step-size advice as a user types it and sees it."""

import re

import pytest

BROKEN = "@scheme(strong=0.5)\ndef still(sde, t, x, h, noise):\n    return x\n\n\n"
OWN = "@scheme(strong=0.5)\ndef own(sde, t, x, h, noise):\n    return euler(sde, t, x, h, noise)\n"


def rows_of(out: str) -> dict[str, list[str]]:
    """Return the cells of each scheme's row, by its name: those of the table's lines."""
    lines = [re.split(r"\s{2,}", line.strip()) for line in out.splitlines()[2:]]
    return {cells[0]: cells[1:] for cells in lines if len(cells) > 1}


@pytest.fixture
def advised(typed):
    """Return a function that asks for advice on geometric Brownian motion."""

    def ask(*words: str):
        return typed("advise", "--on", "gbm", "--threads", "1", *words)

    return ask


def test_the_cheapest_scheme_is_shown_first_with_its_steps(advised):
    """The exact errors are below 0.001 from 63 steps of Milstein and 1829 of Euler–Maruyama on.

    A step of Milstein would have to take as long as 29 of Euler–Maruyama to come second.
    """
    outcome = advised("--error", "0.001")
    title, headings, *_ = outcome.out.splitlines()
    assert (outcome.code, outcome.err) == (0, "")
    assert title == "strong error below 0.001 on gbm: the fewest steps"
    assert re.split(r"\s{2,}", headings.strip()) == [
        *("scheme", "steps", "h", "error", "of", "a path takes", "how known")
    ]
    rows = rows_of(outcome.out)
    assert list(rows) == ["milstein", "euler-maruyama"]
    assert rows["milstein"][0] == "63"
    assert rows["milstein"][-1] == "measured"


def test_a_functional_that_is_named_is_the_only_one_that_is_to_meet_the_target(advised):
    """The mean needs 2 steps for an error of 0.01, the second moment 5."""
    words = ("--kind", "weak", "--functional", "mean")
    outcome = advised("milstein", "--error", "0.01", *words)
    assert outcome.out.startswith("weak error below 0.01 on gbm")
    assert rows_of(outcome.out)["milstein"][0] == "2"
    assert "mean" in rows_of(outcome.out)["milstein"]


def test_a_target_beyond_the_finest_rung_says_so_and_that_it_is_extrapolated(advised):
    outcome = advised("milstein", "--error", "1e-5")
    assert outcome.code == 0
    assert rows_of(outcome.out)["milstein"][-1] == "beyond the rungs"
    (told,) = [line for line in outcome.out.splitlines() if line.startswith("milstein: ")]
    assert "extrapolated: the finest rung has 4096" in told


def test_advice_from_samples_says_that_it_is_between_rungs(typed):
    words = ("--error", "0.14", "--threads", "1")
    outcome = typed("advise", "euler-maruyama", "--on", "ramped-noise", *words)
    assert outcome.code == 0
    assert "between rungs" in outcome.out
    assert "found between sampled rungs." in outcome.out.splitlines()[-1]


def test_a_scheme_that_breaks_its_contract_is_a_row_that_says_so_and_ends_with_3(advised, write):
    write(BROKEN)
    outcome = advised("my.py:still", "--error", "0.01")
    assert outcome.code == 3
    assert rows_of(outcome.out)["my.py:still"] == ["none"]
    assert outcome.out.splitlines()[-1].startswith("my.py:still: The step breaks its contract: ")


def test_one_scheme_that_is_advised_among_others_ends_with_0(advised, write):
    """It is a scheme of a user's file; the exact error of Euler–Maruyama is 0.0398 with 2 steps."""
    write(BROKEN + OWN)
    outcome = advised("my.py:still", "exact-ou", "my.py:own", "--error", "0.05")
    assert outcome.code == 0
    name, cells = next(iter(rows_of(outcome.out).items()))
    assert (name, cells[0]) == ("my.py:own", "2")
    assert "exact-ou: gbm has no functional 'decayed', which exact-ou steps by." in outcome.out


def test_a_scheme_that_does_not_apply_ends_with_3(advised):
    outcome = advised("exact-ou", "--error", "0.01")
    assert outcome.code == 3
    assert rows_of(outcome.out)["exact-ou"] == ["none"]


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("--error", "0"), "error = 0.0 cannot be used: it is a positive number, such as 1e-3."),
        (("--error", "-1"), "error = -1.0 cannot be used: it is a positive number, such as 1e-3."),
        (("--error", "nan"), "error = nan cannot be used: it is a positive number, such as 1e-3."),
        (("--error", "inf"), "error = inf cannot be used: it is a positive number, such as 1e-3."),
        (
            ("--error", "1", "--kind", "weak", "--functional", "skew"),
            "No functional named 'skew'. Known: cos, mean, second-moment.",
        ),
        (("milstien", "--error", "1"), "No scheme named 'milstien'. Did you mean 'milstein'?"),
    ],
    ids=["zero", "negative", "nan", "infinite", "functional", "scheme"],
)
def test_what_cannot_be_used_is_told_in_one_line_and_ends_with_2(advised, words, told):
    outcome = advised(*words)
    assert (outcome.code, outcome.out) == (2, "")
    assert outcome.err.startswith(f"sdebench: {told}")
    assert outcome.err.count("\n") == 1


def test_a_problem_that_does_not_exist_is_told_in_one_line_and_ends_with_2(typed):
    outcome = typed("advise", "--on", "gmb", "--error", "0.1")
    assert (outcome.code, outcome.out, outcome.err.count("\n")) == (2, "", 1)
    assert "Did you mean 'gbm'?" in outcome.err


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("--on", "gbm", "--error", "small"), "'small' is not a valid float"),
        (("--on", "gbm", "--error", "1", "--kind", "both"), "'both' is not one of"),
        (("--on", "gbm"), "Missing option '--error'"),
        (("--error", "1"), "Missing option '--on'"),
    ],
    ids=["text", "kind", "no error", "no problem"],
)
def test_a_wrong_use_shows_how_the_command_is_used_and_ends_with_2(typed, words, told):
    outcome = typed("advise", *words)
    assert (outcome.code, outcome.out) == (2, "")
    assert told in outcome.err
    assert re.match("Usage: .*advise", outcome.err)


def test_help_says_how_advice_is_asked_for_and_ends_with_0(typed):
    outcome = typed("advise", "--help")
    assert outcome.code == 0
    for option in ("--on", "--error", "--kind", "--functional"):
        assert option in outcome.out
