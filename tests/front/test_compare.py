"""Two integrators held against one another, as a user types it and sees it."""

import re

import pytest

FEW = ("--steps", "4,8,16", "--threads", "1")
BROKEN = "@scheme(strong=0.5)\ndef still(sde, t, x, h, noise):\n    return x\n"
LOUD = (
    "@scheme(strong=0.5)\ndef loud(sde, t, x, h, noise):\n"
    "    return x + sde.drift(t, x) * h + 1.01 * sde.diffusion(t, x) * noise.dw\n"
)


def blocks_of(out: str) -> list[list[str]]:
    """Return the lines of each comparison: title, headings, rungs and the sentence."""
    return [block.splitlines() for block in out.strip().split("\n\n")]


@pytest.fixture
def backwards(typed):
    """Return the outcome of a comparison in which the old scheme is the better one."""
    return typed("compare", "milstein", "euler-maruyama", "--on", "gbm", *FEW)


def test_a_comparison_shows_a_table_and_a_sentence_for_each_error(backwards):
    assert (backwards.code, backwards.err) == (0, "")
    blocks = blocks_of(backwards.out)
    assert [block[0] for block in blocks] == [
        "gbm, strong, propagated",
        "gbm, weak, mean, propagated",
        "gbm, weak, second-moment, propagated",
        "gbm, weak, cos, propagated",
    ]
    for block in blocks:
        assert [line.split()[0] for line in block[1:-1]] == ["steps", "4", "8", "16"]
        assert re.search(r"A step costs \S+ times as much \(\S+ to \S+\)\.$", block[-1])


def test_the_sentence_names_the_better_one(backwards):
    strong, mean, *_ = blocks_of(backwards.out)
    assert strong[-1].startswith("milstein has the smaller error on every rung: euler-maruyama's")
    assert mean[-1].startswith("The errors of milstein and euler-maruyama do not differ beyond")


def test_what_depends_on_time_is_sampled_on_the_same_paths(typed):
    outcome = typed("compare", "euler-maruyama", "milstein", "--on", "ramped-noise", *FEW)
    assert outcome.code == 0
    for block in blocks_of(outcome.out):
        assert block[0].endswith(", sampled")
        assert [line.split()[-1] for line in block[2:-1]] == ["1.000"] * 3


def test_a_users_scheme_and_functional_are_compared_on_every_problem_that_is_named(typed, write):
    write(LOUD + "\n\ndef cube(x):\n    return x**3\n")
    words = ("--on", "gbm", "--on", "ramped-noise", "--functional", "my.py:cube", *FEW)
    outcome = typed("compare", "euler-maruyama", "my.py:loud", *words)
    assert outcome.code == 0
    assert [block[0] for block in blocks_of(outcome.out)][::4] == [
        "gbm, strong, propagated",
        "gbm, weak, my.py:cube, propagated",
        "ramped-noise, weak, cos, sampled",
    ]
    assert "my.py:loud" in outcome.out


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("milstein", "milstein"), "new = milstein cannot be used: it is the old integrator"),
        (("exact-ou", "milstein"), "on = gbm cannot be used: exact-ou and milstein share no"),
        (("milstein", "milstien"), "No scheme named 'milstien'. Did you mean 'milstein'?"),
        (("milstein", "euler-maruyama", "--on", "gmb"), "No problem named 'gmb'."),
        (("milstein", "euler-maruyama", "--steps", "4,6,8"), "steps = 4,6,8 cannot be used"),
        (("milstein", "euler-maruyama", "--functional", "skew"), "No functional named 'skew'."),
        (("milstein", "euler-maruyama", "--confidence", "2"), "confidence = 2.0 cannot be used"),
    ],
    ids=["itself", "no shared problem", "scheme", "problem", "steps", "functional", "confidence"],
)
def test_what_cannot_be_used_is_told_in_one_line_and_ends_with_2(typed, words, told):
    outcome = typed("compare", "--on", "gbm", *words)
    assert (outcome.code, outcome.out) == (2, "")
    assert outcome.err.startswith(f"sdebench: {told}")
    assert outcome.err.count("\n") == 1


def test_a_scheme_that_breaks_its_contract_is_told_in_one_line_and_ends_with_2(typed, write):
    write(BROKEN)
    outcome = typed("compare", "milstein", "my.py:still", "--on", "gbm", *FEW)
    assert (outcome.code, outcome.out, outcome.err.count("\n")) == (2, "", 1)
    assert "my.py:still cannot be used: it breaks its contract" in outcome.err


def test_the_sentence_on_a_broken_contract_ends_with_one_full_stop(typed, write):
    write(BROKEN)
    outcome = typed("compare", "milstein", "my.py:still", "--on", "gbm", *FEW)
    assert not outcome.err.rstrip().endswith("..")


@pytest.mark.parametrize("words", [(), ("milstein",)], ids=["none", "one"])
def test_fewer_than_two_schemes_are_a_wrong_use(typed, words):
    outcome = typed("compare", *words)
    assert (outcome.code, outcome.out) == (2, "")
    assert re.match("Usage: .*compare", outcome.err)


def test_help_says_how_two_schemes_are_compared_and_ends_with_0(typed):
    outcome = typed("compare", "--help")
    assert outcome.code == 0
    assert "OLD NEW" in outcome.out
