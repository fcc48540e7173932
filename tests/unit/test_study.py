"""The study: what is measured, how long, and what is told of it."""

from dataclasses import replace

import msgspec
import numpy as np
import pytest

import sdebench as sb
from sdebench.study import MAX_LOOKS, Count, Effort
from sdebench.verdict import Verdict

QUICK = {"on": "gbm", "looks": 1, "threads": 1, "steps": (4, 8, 16)}


def numbers(evidence: sb.Evidence) -> list:
    """Return all that was measured, without what depends on the clock or the threads."""
    found = []
    for row in evidence.results:
        timeless = {"seconds": 0.0, "threads": 1, "step_seconds": None}
        cost = msgspec.structs.replace(row.cost, **timeless)
        found.append(msgspec.structs.replace(row, cost=cost))
    return [evidence.claims, found]


@pytest.fixture(scope="module")
def quick() -> sb.Evidence:
    """Return a quick run of Milstein, by both routes."""
    return sb.measure("milstein", **QUICK)


@pytest.mark.parametrize("schemes", ["milstein", ["milstein"], ("milstein",)], ids=repr)
def test_one_scheme_or_several_may_be_given(schemes):
    evidence = sb.measure(schemes, **QUICK)
    assert {c.scheme for c in evidence.claims} == {"milstein"}


def test_schemes_and_problems_are_measured_in_the_order_given():
    evidence = sb.measure(
        ["milstein", "euler-maruyama"],
        on=["ou", "gbm"],
        looks=1,
        threads=1,
        steps=(4, 8, 16),
    )
    found = list(dict.fromkeys((c.scheme, c.problem) for c in evidence.claims))
    assert found == [
        ("milstein", "ou"),
        ("milstein", "gbm"),
        ("euler-maruyama", "ou"),
        ("euler-maruyama", "gbm"),
    ]


def test_without_a_problem_named_those_that_apply_are_measured():
    evidence = sb.measure("exact-ou", looks=1, threads=1, steps=(4, 8, 16))
    assert {c.problem for c in evidence.claims} == {"ou"}


def test_a_problem_that_was_named_and_does_not_apply_is_shown_as_such():
    evidence = sb.measure("exact-ou", **QUICK)
    assert {c.verdict for c in evidence.claims} == {Verdict.NOT_APPLICABLE}


def test_the_same_seed_gives_the_same_numbers_on_any_number_of_threads(quick):
    two = sb.measure("milstein", **(QUICK | {"threads": 2}))
    assert numbers(quick) == numbers(two)


def test_another_seed_gives_other_numbers(quick):
    assert numbers(quick) != numbers(sb.measure("milstein", **QUICK, seed=2))


def test_the_errors_of_a_scheme_do_not_depend_on_what_else_is_measured(quick):
    beside = sb.measure(["euler-maruyama", "milstein"], **QUICK)

    def errors(evidence):
        rows = [r for r in evidence.results if r.scheme == "milstein"]
        return [rung.error for r in rows for rung in r.rungs]

    assert errors(quick) == errors(beside)


def test_intervals_are_shared_among_all_rows_of_the_run():
    """Twice the rows halve each row's error probability, which widens its interval."""
    alone = sb.measure("milstein", route="sampled", **QUICK)
    beside = sb.measure(["euler-maruyama", "milstein"], route="sampled", **QUICK)

    def low(evidence):
        return next(c.low for c in evidence.claims if c.scheme == "milstein")

    assert low(beside) < low(alone)


def test_intervals_of_propagated_errors_are_bounds_and_are_not_shared():
    """They hold no chance, so that other rows of the run and the seed do not move them."""
    alone = sb.measure("milstein", route="propagated", **QUICK)
    beside = sb.measure(["euler-maruyama", "milstein"], route="propagated", **QUICK, seed=2)
    assert [c for c in beside.claims if c.scheme == "milstein"] == alone.claims


def test_looks_are_taken_exactly_as_often_as_said():
    evidence = sb.measure("milstein", **(QUICK | {"looks": 3}))
    assert evidence.provenance.looks == 3
    assert {r.cost.looks for r in evidence.results if r.route == "sampled"} == {3}


def test_a_spent_budget_still_takes_one_look():
    evidence = sb.measure("milstein", on="gbm", threads=1, steps=(4, 8, 16), budget=1e-9)
    assert evidence.provenance.looks == 1


def test_further_functionals_come_beside_the_standard_ones():
    def square_root(x):
        return x**0.5

    evidence = sb.measure("milstein", functionals=[square_root], **QUICK)
    found = [r.functional for r in evidence.results if r.kind == "weak" and r.counts]
    assert found == ["mean", "second-moment", "cos", "square-root"]
    checks = [r.functional for r in evidence.results if r.kind == "weak" and r.check]
    assert checks == found


@pytest.mark.parametrize("route", ["quadrature", "both", "", 1], ids=repr)
def test_a_route_that_does_not_exist_is_refused(route):
    with pytest.raises(sb.SdebenchError, match="it is 'propagated', 'sampled', or left out"):
        sb.measure("milstein", route=route, **QUICK)


def test_errors_are_propagated_to_4096_steps_and_checked_to_64_by_default(supported_evidence):
    assert supported_evidence.provenance.steps == [4, 8, 16, 32, 64, 256, 1024, 4096]
    assert "--steps" not in supported_evidence.provenance.command


def test_the_users_steps_are_those_of_both_routes(quick):
    for row in quick.results[3:]:
        assert [rung.steps for rung in row.rungs] == [4, 8, 16]


def test_the_steps_of_a_check_end_at_64_though_the_users_do_not():
    evidence = sb.measure("milstein", **(QUICK | {"steps": (16, 32, 64, 128, 256)}))
    steps = {row.check: [r.steps for r in row.rungs] for row in evidence.results[3:]}
    assert steps == {False: [16, 32, 64, 128, 256], True: [16, 32, 64]}


def test_the_seed_moves_what_is_sampled_and_nothing_that_is_propagated(quick):
    other = sb.measure("milstein", **QUICK, seed=2)

    def errors(evidence, route):
        return [rung.error for r in evidence.results if r.route == route for rung in r.rungs]

    assert errors(quick, "propagated") == errors(other, "propagated")
    assert errors(quick, "sampled") != errors(other, "sampled")


def test_progress_is_told_to_its_end():
    told = []
    sb.measure("milstein", progress=lambda *args: told.append(args), **QUICK)
    assert {what.partition(":")[0] for what, _, _ in told} == {"milstein on gbm"}
    assert told[-1][1] == told[-1][2] > 0


def test_a_functional_that_raises_is_told_as_the_users(user_file):
    path = user_file("def payoff(x):\n    raise ValueError('no price')\n")
    with pytest.raises(sb.SdebenchError, match="no price"):
        sb.measure("milstein", functionals=[f"{path}:payoff"], **QUICK)


def test_a_functional_that_writes_to_its_input_is_refused():
    def shifting(x):
        x -= 0.4
        return x

    with pytest.raises(sb.SdebenchError, match="'shifting' writes into its input"):
        sb.measure("milstein", functionals=[shifting], **QUICK)


def test_two_functionals_of_one_name_are_refused():
    with pytest.raises(sb.SdebenchError, match="two of them have this name"):
        sb.measure("milstein", functionals=[lambda x: x**3, lambda x: x**4], **QUICK)


UNSTABLE = {
    "errors as large as numbers can be": "ou:theta=100000",
    "errors far larger than the solution": "ou:theta=1000",
    "errors of no number, on every path": "ou:theta=10000000",
}


@pytest.mark.parametrize("on", UNSTABLE.values(), ids=UNSTABLE)
def test_an_honest_scheme_that_is_unstable_on_every_rung_is_undecided(on):
    """|1 - θh| exceeds 1 on all rungs: no order shows, which is no fault of the scheme."""
    evidence = sb.measure("euler-maruyama", on=on, steps=(4, 8, 16, 32), looks=1, threads=1)
    assert {c.verdict for c in evidence.claims} == {Verdict.UNDECIDED}
    assert all("--steps" in c.sentence for c in evidence.claims)


@pytest.mark.filterwarnings("error")
def test_a_scheme_that_is_unstable_has_no_warning_printed():
    sb.measure(
        "euler-maruyama", on="ou:theta=1000", steps=(64, 128, 256), route="propagated", threads=1
    )


def test_an_honest_scheme_that_overflows_on_some_paths_only_is_undecided():
    """Steps of θh = 78125 from the mean: |X| is some 1e308 on the last rung, times a normal."""
    evidence = sb.measure("euler-maruyama", on="ou:theta=5000000,x0=1.2", looks=1, threads=1)
    assert {c.verdict for c in evidence.claims} == {Verdict.UNDECIDED}


def test_a_stiff_problem_is_decided_on_rungs_that_are_fine_enough():
    """θ = 20 is unstable on 8 steps and less, and near its order from 128 on."""
    evidence = sb.measure(
        "euler-maruyama", on="ou:theta=20", steps=(64, 128, 256, 512), looks=2, threads=1
    )
    strong = next(c for c in evidence.claims if c.kind == "strong")
    assert strong.verdict is Verdict.SUPPORTED


@pytest.mark.parametrize("on", ["gbm:horizon=0.001", "ou:horizon=0.001"])
@pytest.mark.parametrize("name", ["euler-maruyama", "milstein"])
def test_an_honest_scheme_is_not_refuted_over_a_short_horizon(name, on):
    """There the controls explain an error almost whole, and round-off is what is left of it."""
    evidence = sb.measure(name, on=on, looks=1, threads=1)
    assert [c.sentence for c in evidence.claims if c.verdict is Verdict.REFUTED] == []


def test_a_payoff_that_is_zero_outside_of_a_band_is_no_fault_of_the_bench():
    def butterfly(x):
        return np.maximum(0.1 - np.abs(x - 0.8), 0.0)

    sb.measure("milstein", functionals=[butterfly], **QUICK)


@pytest.mark.parametrize("typed", ["gbm:mu=1000", "ou:sigma=1e-12"])
def test_a_problem_beyond_double_precision_is_refused(typed):
    with pytest.raises(sb.SdebenchError, match="cannot be used"):
        sb.measure("milstein", on=typed, looks=1, threads=1)


def effort_of(looks=None, budget=None):
    return Effort(looks, budget)


@pytest.mark.parametrize(
    ("effort", "looks", "settled", "seconds", "wanted"),
    [
        (effort_of(looks=3), 2, True, 1e9, True),
        (effort_of(looks=3), 3, False, 0.0, False),
        (effort_of(), 0, True, 1e9, True),
        (effort_of(), 1, True, 0.0, False),
        (effort_of(), 1, False, 1e9, True),
        (effort_of(), MAX_LOOKS, False, 0.0, False),
        (effort_of(budget=5.0), 0, False, 6.0, True),
        (effort_of(budget=5.0), 1, False, 4.0, True),
        (effort_of(budget=5.0), 1, False, 6.0, False),
        (effort_of(budget=5.0), 1, True, 4.0, False),
        (effort_of(budget=5.0), MAX_LOOKS + 1, False, 4.0, True),
    ],
)
def test_a_pair_is_looked_at_again_as_the_effort_says(effort, looks, settled, seconds, wanted):
    assert effort.wants(looks, settled, settled, seconds) is wanted


def test_within_a_budget_every_pair_is_looked_at_until_all_are_settled():
    assert Effort(None, 5.0).wants(looks=1, settled=True, all_settled=False, seconds=1.0)


def test_a_count_reports_what_is_done_of_the_total():
    told = []
    count = Count(2, lambda *args: told.append(args), "work")
    count()
    count()
    assert told == [("work", 1, 2), ("work", 2, 2)]


def test_a_law_that_is_off_ends_the_run_as_a_fault_of_the_bench():
    problem = sb.problem("gbm")
    sound = problem.law

    def off(p):
        law = sound(p)
        return replace(law, mean=law.mean + 0.1)

    with pytest.raises(sb.BenchFault):
        sb.measure("milstein", **(QUICK | {"on": replace(problem, law=off)}))


def test_a_payoff_that_is_a_condition_is_measured():
    """It would catch a difference of truth values, which NumPy refuses."""
    evidence = sb.measure(
        "milstein", on="gbm", functionals=lambda x: x > 0.6, looks=1, threads=1, steps=(4, 8, 16)
    )
    row = next(r for r in evidence.results if r.functional not in (None, *KNOWN_FUNCTIONALS))
    assert all(rung.error is not None for rung in row.rungs)


KNOWN_FUNCTIONALS = ("mean", "second-moment", "cos")
