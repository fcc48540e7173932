"""The sampled route: the same bits whatever runs beside it, and what a block adds up to."""

from dataclasses import replace

import numpy as np
import pytest

import sdebench as sb
from sdebench.functional import STANDARD
from sdebench.ladder import Ladder
from sdebench.sample import BATCH, BLOCK, Plan, Sample
from tests.tolerance import binomial_band, round_off, sampling

LADDER = Ladder((2, 4, 8))


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=0.5, noise=("dw", "dz"))
def euler_that_also_reads_dz(sde, t, x, h, noise):
    return euler.step(sde, t, x, h, noise) + 0.0 * noise.dz


def plan(**changes) -> Plan:
    base = Plan(euler, sb.problem("gbm"), LADDER, STANDARD, seed=1)
    return replace(base, **changes)


def drawn(*blocks: int, threads: int = 1, **changes) -> Sample:
    sample = Sample(plan(**changes))
    for n in blocks:
        sample.extend(n, threads)
    return sample


def same_bits(a: Sample, b: Sample) -> bool:
    return all(
        np.array_equal(x, y)
        for x, y in [
            (a.tally.moments.mean, b.tally.moments.mean),
            (a.tally.moments.scatter, b.tally.moments.scatter),
            (a.tally.largest, b.tally.largest),
            (a.tally.squares, b.tally.squares),
        ]
    )


@pytest.fixture(scope="module")
def four_blocks() -> Sample:
    return drawn(4)


def test_the_bits_do_not_depend_on_threads(four_blocks):
    assert same_bits(four_blocks, drawn(4, threads=2))


@pytest.mark.parametrize("blocks", [(2, 2), (1, 3), (1, 1, 1, 1)], ids=str)
def test_the_bits_do_not_depend_on_how_the_sample_grew(four_blocks, blocks):
    assert same_bits(four_blocks, drawn(*blocks, threads=2))


def test_the_bits_are_the_same_beyond_the_window_of_blocks_in_flight():
    assert same_bits(drawn(18), drawn(5, 13, threads=2))


def test_the_bits_do_not_depend_on_what_else_is_measured(four_blocks):
    other = Sample(plan(problem=sb.problem("ou")))
    mine = Sample(plan())
    for _ in range(2):
        other.extend(1, 2)
        mine.extend(2, 2)
    assert same_bits(four_blocks, mine)


def test_a_further_functional_changes_no_bit_of_the_common_rows(four_blocks):
    more = drawn(4, functionals=(*STANDARD, sb.Functional("cube", lambda x: x**3)))
    few, many = four_blocks.plan.rows, more.plan.rows
    for mine, theirs in [
        (few.squares, many.squares),
        *((few.weak(i), many.weak(i)) for i in range(3)),
    ]:
        mean, further = four_blocks.tally.moments.mean, more.tally.moments.mean
        assert np.array_equal(mean[list(mine)], further[list(theirs)])


def test_a_grid_maximum_changes_no_bit_of_the_common_rows(four_blocks):
    more = drawn(4, grid_maximum=True)
    mean, further = four_blocks.tally.moments.mean, more.tally.moments.mean
    assert np.array_equal(mean[list(plan().rows.squares)], further[list(more.plan.rows.squares)])


def test_schemes_on_one_problem_share_their_paths_whatever_they_step_by(four_blocks):
    other = drawn(4, scheme=euler_that_also_reads_dz)
    rows = list(four_blocks.plan.rows.squares)
    assert np.array_equal(four_blocks.tally.moments.mean[rows], other.tally.moments.mean[rows])


@pytest.mark.parametrize(
    "changes",
    [{"seed": 2}, {"problem": sb.problem("gbm", mu=0.26)}],
    ids=["seed", "parameters"],
)
def test_other_seeds_and_problems_take_other_paths(four_blocks, changes):
    """Seen on a control row, which is a function of the path alone."""
    other = drawn(4, **changes)
    row = four_blocks.plan.rows.controls[0]
    assert four_blocks.tally.moments.mean[row] != other.tally.moments.mean[row]


def test_blocks_take_different_paths():
    one, two = drawn(1), drawn(2)
    row = one.plan.rows.controls[0]
    assert one.tally.moments.mean[row] != two.tally.moments.mean[row]


def test_a_block_of_paths_makes_batch_means(four_blocks):
    assert four_blocks.n_paths == 4 * BLOCK
    assert four_blocks.tally.moments.count == 4 * BLOCK // BATCH


@pytest.mark.parametrize("name", ["gbm", "ou", "ramped-noise"])
def test_the_exact_flow_taken_as_a_scheme_has_no_error(name):
    """Step by step on every rung against one flow over [0, T]: what joins the noise is right."""
    problem = sb.problem(name)

    @sb.scheme(strong=0.5, noise=problem.flow_noise)
    def flow(sde, t, x, h, noise):
        return problem.exact_step(t, x, h, noise)

    sample = drawn(1, scheme=flow, problem=problem)
    largest = np.sqrt(sample.tally.largest[list(sample.plan.rows.squares)])
    reach = sample.tally.largest[sample.plan.rows.reference[0]] ** 0.5
    assert np.all(largest <= round_off(float(reach), 64 * LADDER.steps[-1]))


def test_the_mean_of_the_exact_end_is_that_of_geometric_brownian_motion(four_blocks):
    """E X_T = x0 e^{mu T} from 65 536 paths of seed 1; false alarm 1e-6; catches a wrong flow."""
    row = four_blocks.plan.rows.reference[0]
    found = four_blocks.tally.moments.estimate([row])
    p = four_blocks.plan.problem.params
    error = found.covariance[0, 0] ** 0.5
    assert abs(found.means[0] - p["x0"] * np.exp(p["mu"])) <= sampling(error, found.dof)


def test_the_strong_error_of_one_euler_step_ladder_is_the_closed_form():
    """E (X^h_T - X_T)² on GBM as a product over steps; 65 536 paths, seed 1; false alarm 1e-6.

    Catches rungs that do not see the same path as the exact end point.
    """
    sample = drawn(4)
    p, found = sample.plan.problem.params, sample.tally.moments.estimate(range(3))
    for rung, n in enumerate(LADDER.steps):
        h = 1.0 / n
        a, s2 = p["mu"] * h, p["sigma"] ** 2 * h
        square = (1 + a) ** 2 + s2
        mixed = np.exp(a) * (1 + a + s2)
        known = p["x0"] ** 2 * (square**n - 2 * mixed**n + np.exp(2 * a + s2) ** n)
        error = found.covariance[rung, rung] ** 0.5
        assert abs(found.means[rung] - known) <= sampling(error, found.dof)


def test_the_grid_maximum_is_at_least_the_error_at_the_horizon():
    sample = drawn(2, grid_maximum=True)
    rows, mean = sample.plan.rows, sample.tally.moments.mean
    assert np.all(mean[list(rows.grid)] > mean[list(rows.squares)])


def test_paths_that_end_in_no_number_are_counted_a_rung():
    """A step that fails for dw > 0 on long steps only: half of all paths on the first rung."""

    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        bad = (noise.dw > 0) & (h > 0.4) & (t == 0)
        return np.where(bad, np.nan, euler.step(sde, t, x, h, noise))

    counted = drawn(1, scheme=failing).tally.non_finite
    low, high = binomial_band(BLOCK, 0.5)  # seed 1, one block, false alarm 1e-6
    assert low <= counted[0] <= high
    assert counted[1:].tolist() == [0, 0]


def test_the_largest_and_the_sum_of_squares_are_those_of_single_paths():
    sample = drawn(1)
    rows, tally = sample.plan.rows, sample.tally
    row = rows.absolute[0]
    # Σ|e|² of the row of absolute errors is the mean of the row of squares times the paths.
    total = tally.moments.mean[rows.squares[0]] * BLOCK
    assert abs(tally.squares[row] - total) <= round_off(total, BLOCK)
    assert tally.largest[row] ** 2 == tally.largest[rows.squares[0]]
    assert 0 < tally.largest[row] < total


def test_time_reaches_the_step_as_the_start_of_each_step():
    seen = []

    @sb.scheme(strong=0.5)
    def watching(sde, t, x, h, noise):
        seen.append((round(1 / h), t))
        return x

    drawn(1, scheme=watching, problem=sb.problem("gbm"))
    for n in LADDER.steps:
        assert [t for steps, t in seen if steps == n] == [k / n for k in range(n)]


def test_every_block_is_reported():
    calls = []
    Sample(plan()).extend(3, 2, lambda: calls.append(1))
    assert len(calls) == 3


def test_the_normals_of_a_path_are_those_of_its_finest_rung():
    assert plan().normals_per_path == 8
    assert plan(problem=sb.problem("ou")).normals_per_path == 16
