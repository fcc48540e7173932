"""The two routes to errors, propagated and sampled: which is taken, and what if they disagree."""

import dataclasses
import json
import re

import pytest

import sdebench as sb
from sdebench import cli

QUICK = ("--looks", "1", "--threads", "1", "--steps", "4,8,16")
PAYOFFS = """
import sdebench as sb


def call(x):
    return np.maximum(x - 0.6, 0.0)


declared = sb.Functional("call", call, kinks=(0.6,))
"""


@pytest.fixture
def rows_by_functional(typed, write, folder):
    """Return a function that measures Milstein with functionals of a user's file.

    It returns the outcome and the rows of the evidence file that are no check, by functional.
    """

    def run(*words: str):
        write(PAYOFFS, "fn.py")
        save = ("--save", "evidence.json")
        outcome = typed("measure", "milstein", "--on", "gbm", *QUICK, *words, *save)
        rows = json.loads((folder / "evidence.json").read_text())["results"][3:]
        return outcome, {row["functional"]: row for row in rows if not row["check"]}

    return run


def test_errors_are_propagated_by_default_and_the_check_on_a_sample_is_told(typed):
    outcome = typed("measure", "milstein", "--on", "gbm", *QUICK)
    assert "milstein on gbm, strong, propagated" in outcome.out
    assert "Propagated errors agree with a check on 32768 sampled paths" in outcome.out
    assert outcome.code == 0


@pytest.mark.parametrize(("route", "other"), [("propagated", "sampled"), ("sampled", "propagated")])
def test_one_route_alone_shows_nothing_of_the_other(typed, route, other):
    outcome = typed("measure", "milstein", "--on", "gbm", *QUICK, "--route", route)
    assert f"milstein on gbm, strong, {route}" in outcome.out
    assert not re.search(f"{other}|check", outcome.out, re.IGNORECASE)


def test_a_route_that_does_not_exist_is_a_wrong_use(typed):
    outcome = typed("measure", "milstein", "--on", "gbm", "--route", "guessed")
    assert outcome.code == 2
    assert "'guessed' is not one of 'propagated', 'sampled'" in outcome.err


def test_what_depends_on_time_and_is_to_be_propagated_is_undecided_and_says_why(typed):
    outcome = typed("measure", "milstein", "--on", "ramped-noise", "--route", "propagated")
    assert outcome.code == 3
    assert outcome.out.count("Not propagated: ramped-noise depends on time.") == 2
    assert "Leave out --route to sample it." in outcome.out
    assert "Verdict: undecided (2 undecided)" in outcome.out


def test_a_step_that_depends_on_time_is_sampled_and_says_at_which_time(typed, write):
    write(
        "@scheme(strong=0.5)\ndef late(sde, t, x, h, noise):\n"
        "    return euler(sde, t, x, h, noise) + 0.1 * h**2 * t\n"
    )
    outcome = typed("measure", "my.py:late", "--on", "gbm", *QUICK)
    assert "Sampled, since the step depends on time, as at t=0.25 with 4 steps" in outcome.out


def test_a_functional_with_an_undeclared_kink_is_sampled_and_says_how_to_declare_it(
    rows_by_functional,
):
    outcome, rows = rows_by_functional("--functional", "fn.py:call")
    assert outcome.code == 0
    assert rows["fn.py:call"]["route"] == "sampled"
    assert rows["mean"]["route"] == "propagated"
    (told,) = [line for line in outcome.out.splitlines() if line.startswith("Sampled, since ")]
    assert "fn.py:call bends, jumps or swings near x=0.6" in told
    assert "declare them, as in Functional(..., kinks=(0.6" in told


def test_a_functional_with_declared_kinks_is_propagated(rows_by_functional):
    outcome, rows = rows_by_functional("--functional", "fn.py:declared")
    assert outcome.code == 0
    assert {row["route"] for row in rows.values()} == {"propagated"}
    assert list(rows)[-1] == "fn.py:declared"
    assert "Sampled, since" not in outcome.out


def test_a_functional_that_was_not_propagated_and_not_sampled_is_told(rows_by_functional):
    outcome, rows = rows_by_functional("--functional", "fn.py:call", "--route", "propagated")
    assert rows["fn.py:call"]["verdict"] == "undecided"
    assert "fn.py:call" in outcome.out


def _gbm_whose_steps_do_not_join() -> sb.Problem:
    """Return GBM with a flow that is exact over the horizon, and not over a part of it.

    N of its steps of length h end off by a factor of some 1 + 0.0015 (T - h). E X_T² moves by less
    than a third of a hundredth, as much as the nodes may miss it by. Weak errors move by far more,
    of which a sample, whose exact end is one step, sees nothing.
    """
    right = sb.problem("gbm")

    def flow(p, t, x, h, noise):
        return right.flow(p, t, x, h, noise) * (1 + 0.0015 * h * (p["horizon"] - h))

    return dataclasses.replace(right, flow=flow)


FEW = {"steps": (4, 16, 64), "looks": 1, "threads": 1}


def test_routes_that_disagree_end_with_4_and_say_so_loudly(capsys):
    with pytest.raises(SystemExit) as end, cli.told():
        sb.measure("milstein", on=_gbm_whose_steps_do_not_join(), **FEW)
    out, err = capsys.readouterr()
    assert (end.value.code, out, err.count("\n")) == (4, "", 1)
    assert err.startswith("sdebench: The bench contradicts itself on milstein on gbm, ")
    assert "Trust no verdict of this run, and report it." in err


@pytest.mark.parametrize("route", ["propagated", "sampled"])
def test_one_route_alone_cannot_see_that_disagreement(route):
    """So that it is the comparison that ends the run above, and no law or flow by itself."""
    evidence = sb.measure("milstein", on=_gbm_whose_steps_do_not_join(), route=route, **FEW)
    assert {row.route for row in evidence.results if row.kind == "strong"} == {route}


def test_a_step_that_depends_on_time_in_a_tail_alone_is_no_fault_of_the_bench(typed, write):
    write(
        "@scheme(strong=0.5, weak=1.0)\ndef late(sde, t, x, h, noise):\n"
        "    kick = np.where((x > 0.85) & (t > 0.5), 0.2, 0.0)\n"
        "    return euler(sde, t, x, h, noise) + kick * h\n"
    )
    outcome = typed("measure", "my.py:late", "--on", "gbm", "--looks", "1", "--threads", "1")
    assert "contradicts itself" not in outcome.err
    assert outcome.code in (1, 3)
