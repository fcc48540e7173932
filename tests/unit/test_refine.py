"""How one rung is refined: which part, how far, and where no refinement is tried."""

import math
from dataclasses import asdict, replace

import numpy as np
import pytest

import sdebench as sb
from sdebench.chain import BASE, MEAN_SQUARE, MOST_NODES, Chain, exact_goal, weak_goal
from sdebench.functional import STANDARD
from sdebench.refine import MOST_DEGREE, PARTS, Rung, first_resolution, refined, variations
from tests.tolerance import round_off


@sb.scheme(strong=0.5, weak=1.0)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


FREE = replace(BASE, kept=math.inf)
HELD_ONES = replace(BASE, kept=2.0)
CHANGES = {
    "nodes": {"nodes", "width"},
    "degree": {"degree"},
    "span": {"span", "kept"},
    "hold": {"kept"},
    "noise": {"spacing", "n_rest"},
}


def changed(a, b) -> set[str]:
    return {name for name, value in asdict(a).items() if asdict(b)[name] != value}


def test_variations_change_each_part_alone():
    found = variations(HELD_ONES)
    assert {part: changed(HELD_ONES, r) for part, r in found.items()} == CHANGES
    assert list(found) == PARTS


def test_a_variation_of_the_span_holds_errors_at_the_same_size():
    """`kept` is in units of the span; it would catch two parts that change at once."""
    r = variations(HELD_ONES)["span"]
    size = HELD_ONES.kept * HELD_ONES.span
    assert abs(r.kept * r.span - size) <= round_off(size, 4)


def test_a_variation_of_what_is_kept_changes_nothing_where_nothing_is_held():
    found = variations(FREE)
    assert found["hold"] == FREE
    assert changed(FREE, found["span"]) == {"span"}


def moves(**moved: float) -> dict:
    """Return relative changes of one goal, part by part."""
    return {MEAN_SQUARE: np.array([moved.get(part, 0.0) for part in PARTS])}


@pytest.mark.parametrize("resolution", [FREE, HELD_ONES], ids=["free", "held"])
@pytest.mark.parametrize(
    ("part", "fields"),
    [
        ("nodes", {"nodes"}),
        ("degree", {"degree"}),
        ("span", {"degree"}),
        ("hold", {"degree"}),
        ("noise", {"spacing", "n_rest"}),
    ],
)
def test_the_part_that_moves_is_refined_alone(part, fields, resolution):
    """All that tells of the polynomials is answered by their degree."""
    assert changed(resolution, refined(resolution, moves(**{part: 0.1}))) == fields


def test_refinement_is_towards_what_is_finer():
    finer = refined(BASE, moves(nodes=0.1, degree=0.1, noise=0.1))
    assert finer.nodes > BASE.nodes
    assert finer.degree > BASE.degree
    assert finer.spacing < BASE.spacing
    assert finer.n_rest > BASE.n_rest


@pytest.mark.parametrize("part", ["degree", "span", "hold"])
def test_polynomials_of_the_highest_degree_are_held_if_they_still_move(part):
    highest = replace(FREE, degree=MOST_DEGREE)
    held = refined(highest, moves(**{part: 0.1}))
    assert changed(highest, held) == {"kept"}
    assert 1 < held.kept < math.inf
    assert refined(held, moves(**{part: 0.1})) is None


def test_parts_that_move_less_than_a_tenth_of_the_worst_are_left_alone():
    found = refined(BASE, moves(nodes=0.1, noise=0.009))
    assert changed(BASE, found) == {"nodes"}


def test_the_worst_of_all_goals_is_refined():
    """It would catch a refinement by the first goal alone."""
    changes = moves(noise=1e-9) | {weak_goal(STANDARD[0], 1.0): moves(nodes=0.1)[MEAN_SQUARE]}
    assert changed(BASE, refined(BASE, changes)) == {"nodes"}


def test_nothing_is_refined_where_nothing_moves():
    assert refined(BASE, moves()) is None
    assert refined(BASE, {}) is None


@pytest.mark.parametrize("part", PARTS)
def test_a_change_that_is_no_number_is_refined(part):
    """It would catch a tenth of infinity as the least change that is."""
    assert refined(BASE, moves(**{part: math.inf})) is not None


def test_refinement_ends():
    """Where every part moves for ever: within as many rounds as there are levels of all parts."""
    resolution, rounds = BASE, 0
    while resolution is not None:
        last, resolution = resolution, refined(resolution, moves(**dict.fromkeys(PARTS, 1.0)))
        rounds += 1
        assert rounds < 10
    assert last.nodes == MOST_NODES
    assert last.degree >= MOST_DEGREE


@pytest.mark.parametrize(("steps", "degree"), [(1, BASE.degree), (4096, 2)])
def test_small_errors_begin_with_a_low_degree(steps, degree):
    """Scaled errors of Euler on GBM are some 0.05 with one step, and 0.001 with 4096."""
    first = first_resolution(Chain(euler, sb.problem("gbm"), steps))
    assert first == replace(BASE, degree=degree)


def measured(on: str, steps: int, monkeypatch) -> tuple[dict, set]:
    """Return estimates of one rung by their names, and the resolutions that were tried."""
    problem = sb.problem(on)
    law = problem.law(problem.params)
    square = exact_goal(STANDARD[1], 2.0)
    goals = {weak_goal(STANDARD[0], 2.0): exact_goal(STANDARD[0], 2.0), MEAN_SQUARE: square}
    exact = {goal: law.expectation(check.functional)[0] for goal, check in goals.items()}
    tried = set()
    plain = Chain.expectations

    def expectations(chain, wanted, resolution):
        tried.add(resolution)
        return plain(chain, wanted, resolution)

    monkeypatch.setattr(Chain, "expectations", expectations)
    second, _ = law.expectation(lambda x: x * x)
    scale = math.sqrt(second) + abs(problem.start)
    found = Rung(Chain(euler, problem, steps), goals, exact, scale).measure()
    return {goal.kind: e for goal, e in found.items()}, tried


def test_what_round_off_hides_is_not_refined(monkeypatch):
    """Of 4096 steps over a thousandth of the horizon: weak errors of 1e-11, which are kept, too."""
    found, tried = measured("ou:horizon=0.001", 4096, monkeypatch)
    assert {name: e.dropped for name, e in found.items()} == {
        "weak": None,
        "mean square": "round-off hides it",
    }
    assert max(r.nodes for r in tried) == BASE.nodes
    assert max(r.degree for r in tried) <= BASE.degree + 1


def test_what_explodes_is_refined_but_once(monkeypatch):
    """|1 - θh|^16 is 61^16, from which no polynomial in a scaled error is of use."""
    found, tried = measured("ou:theta=1000", 16, monkeypatch)
    assert {e.dropped for e in found.values()} == {"the nodes do not resolve it"}
    assert max(r.nodes for r in tried) == round(1.4 * BASE.nodes)


@pytest.mark.parametrize(("on", "steps"), [("gbm:mu=2,sigma=1", 4), ("gbm:mu=2,sigma=0.1", 512)])
def test_what_refinement_mends_is_refined(on, steps, monkeypatch):
    """So that the two above are not merely left as they began; the second explodes at first."""
    found, tried = measured(on, steps, monkeypatch)
    assert {name: e.dropped for name, e in found.items()} == dict.fromkeys(found)
    assert max(r.nodes for r in tried) > BASE.nodes
