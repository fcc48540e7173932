"""What can be propagated, and the sentences that say why not."""

import math
import re

import numpy as np
import pytest

import sdebench as sb
from sdebench.chain import BASE, MOST_NODES
from sdebench.errors import UserCodeRaised
from sdebench.functional import STANDARD
from sdebench.grid import reach
from sdebench.propagable import TRIED, growth_of, why_not, why_rough

STEPS = (4, 16, 64, 256)


def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def scheme_of(step) -> sb.Scheme:
    return sb.scheme(strong=0.5, name="mine")(step)


def why(step, on="gbm", steps=STEPS) -> str | None:
    return why_not(scheme_of(step), sb.problem(on), steps)


@pytest.mark.parametrize("on", ["gbm", "ou", "tanh"])
def test_a_step_that_does_not_depend_on_time_can_be_propagated(on):
    assert why(euler, on) is None


def test_a_problem_that_depends_on_time_cannot_be_propagated():
    assert why(euler, "ramped-noise") == "ramped-noise depends on time"


def test_a_step_whose_drift_depends_on_time_cannot_be_propagated():
    """With the first time at which it differs, and the number of steps, told."""

    def ageing(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + 1e-9 * t * h

    assert why(ageing) == "the step depends on time, as at t=0.25 with 4 steps"


@pytest.mark.parametrize("steps", [(4,), (64,), (65,), (1000,)], ids=str)
def test_a_step_that_is_another_at_the_end_alone_is_found(steps):
    """At (N - 1) h of N steps; it would catch times that stop short of the last step."""

    def closing(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + (1e-6 if t > sde.horizon - 1.5 * h else 0.0)

    last = 1 - 1 / steps[0]
    assert why(closing, steps=steps) == (
        f"the step depends on time, as at t={last:.4g} with {steps[0]} steps"
    )


def test_a_step_that_is_another_at_the_start_alone_is_found():
    """It would catch steps that are compared with one another and not with that at time 0."""

    def opening(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + (0.0 if t > 0 else 1e-6)

    assert why(opening) == "the step depends on time, as at t=0.25 with 4 steps"


def test_a_step_that_depends_on_time_on_one_rung_alone_is_found():
    def sometimes(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + (1e-6 * t if round(sde.horizon / h) == 64 else 0.0)

    assert why(sometimes, steps=(4, 16, 64)).endswith("with 64 steps")
    assert why(sometimes, steps=(4, 16)) is None


def test_a_step_that_heeds_time_for_one_sign_of_the_noise_alone_is_found():
    """Noise of both signs is tried."""

    def partly(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + np.where(noise.dw > 0, 1e-6 * t, 0.0)

    assert why(partly) is not None


@pytest.mark.parametrize("sd", [-4.5, 4.5])
def test_a_step_that_heeds_time_in_rare_states_alone_is_found(sd):
    """Beyond 4.5 standard deviations of log X_T; it would catch a look at typical states alone."""
    p = sb.problem("gbm").params
    place = math.exp(math.log(p["x0"]) + p["mu"] - p["sigma"] ** 2 / 2 + sd * p["sigma"])

    def partly(sde, t, x, h, noise):
        rare = (x - place) * sd > 0
        return euler(sde, t, x, h, noise) + np.where(rare, 1e-6 * t, 0.0)

    assert why(partly) is not None


def test_a_step_that_computes_with_time_and_ignores_it_can_be_propagated():
    def ignoring(sde, t, x, h, noise):
        middle = t + h / 2
        return euler(sde, middle, x, h, noise) + 0.0 * math.sin(middle)

    assert why(ignoring) is None


def test_a_step_that_gives_no_number_at_all_times_does_not_depend_on_time():
    """It is told elsewhere what is wrong with it; NaN equals NaN here."""
    assert why(lambda sde, t, x, h, noise: x * math.nan) is None


def test_a_step_that_writes_to_what_it_is_given_is_not_taken_for_one_that_depends_on_time():
    """It would catch inputs that are shared among times."""

    def writing(sde, t, x, h, noise):
        x += sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
        noise.dw *= 2
        return x

    assert why(writing) is None


def test_a_step_in_stratonovichs_calculus_is_given_its_drift():
    given = []

    @sb.scheme(strong=0.5, calculus="stratonovich")
    def watching(sde, t, x, h, noise):
        given.append(sde.calculus)
        return x

    why_not(watching, sb.problem("gbm"), STEPS)
    assert set(given) == {"stratonovich"}


def test_a_step_that_raises_at_a_later_time_is_told_as_the_users():
    def raising(sde, t, x, h, noise):
        if t > 0.5:
            raise ValueError("too late")
        return euler(sde, t, x, h, noise)

    with pytest.raises(UserCodeRaised, match="when it was tried at other times: too late"):
        why(raising)


def spacing_in_u(problem: sb.Problem, width: float) -> float:
    """Return the widest spacing of 108 Chebyshev points in u: π/n of half the interval."""
    low, start, high = reach(problem, width)
    half = (max(high, start) - min(low, start) + (high - low) / 2) / 2
    return math.pi / MOST_NODES * half


def told_place(step, on="gbm", steps=STEPS) -> float:
    sentence = why(step, on, steps)
    return float(
        re.fullmatch(r"the step changes abruptly with the state, near x=(\S+)", sentence)[1]
    )


ABRUPT = {
    "a jump": lambda end, x: end + np.where(x > 0.65, 0.1 * x, 0.0),
    "another regime": lambda end, x: np.where(x > 0.65, end, x),
}


@pytest.mark.parametrize("change", ABRUPT.values(), ids=ABRUPT)
def test_a_step_that_changes_abruptly_with_the_state_is_named_by_its_place(change):
    """Between the nodes next to it; it would catch a place that is told in u."""

    def abrupt(sde, t, x, h, noise):
        return change(euler(sde, t, x, h, noise), x)

    gap = abs(math.log(told_place(abrupt) / 0.65))
    assert gap <= 2 * spacing_in_u(sb.problem("gbm"), TRIED)


def test_a_step_that_changes_abruptly_and_writes_to_its_state_is_found():
    """It would catch moves taken from a state that the step has overwritten: there are none."""

    def abrupt(sde, t, x, h, noise):
        x += euler(sde, t, x, h, noise) - x + np.where(x > 0.65, 0.1 * x, 0.0)
        return x

    assert told_place(abrupt) > 0


@pytest.mark.parametrize("part", ["coarse", "fine"])
def test_a_step_that_changes_abruptly_on_the_coarsest_or_the_finest_rung_alone_is_found(part):
    def abrupt(sde, t, x, h, noise):
        there = h > 0.2 if part == "coarse" else h < 0.005
        return euler(sde, t, x, h, noise) + (np.where(x > 0.65, 0.1 * x, 0.0) if there else 0.0)

    assert abs(math.log(told_place(abrupt) / 0.65)) <= 2 * spacing_in_u(sb.problem("gbm"), TRIED)


def test_a_step_that_changes_abruptly_within_a_narrow_band_alone_is_found():
    """Between two of the nodes; it would catch a look at places as far apart as they are."""
    width = spacing_in_u(sb.problem("gbm"), TRIED) / 8

    def abrupt(sde, t, x, h, noise):
        band = np.abs(np.log(x / 0.65)) < width
        return euler(sde, t, x, h, noise) + np.where(band, 0.1 * x, 0.0)

    assert abs(math.log(told_place(abrupt) / 0.65)) <= 2 * width


def test_a_step_that_changes_abruptly_where_the_state_is_small_is_found():
    """By a part of the state; it would catch moves in x, beside which this one is lost."""

    def abrupt(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + np.where(x < 0.14, 0.02 * x, 0.0)

    place = told_place(abrupt, steps=(4,))
    assert abs(math.log(place / 0.14)) <= 2 * spacing_in_u(sb.problem("gbm"), TRIED)


def test_a_step_that_is_steep_in_the_state_is_not_abrupt():
    """A rise over some four nodes, which they tell to 1e-4; it would catch fewer nodes."""

    def steep(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + h * x * np.tanh(np.log(x / 0.65) / 0.1)

    assert why(steep) is None


@pytest.mark.parametrize("on", ["gbm", "ou", "tanh", "arctan", "arcsinh", "sinh"])
def test_a_step_that_changes_smoothly_with_the_state_is_not_abrupt(on):
    """With a correction that bends over the whole reach of the state."""

    def smooth(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + 0.1 * h * np.tanh(x) * noise.dw**2

    assert why(smooth, on) is None


def functional(f, growth=None, kinks=()) -> sb.Functional:
    return sb.Functional("payoff", f, growth, kinks)


GROWTHS = {
    "x": (lambda x: x, 1.0),
    "x squared": (lambda x: x**2, 2.0),
    "minus the root of x": (lambda x: -np.sqrt(x), 0.5),
    "cos": (np.cos, 0.0),
    "a constant": (np.ones_like, 0.0),
    "a call": (lambda x: np.maximum(x - 0.65, 0.0), 1.0),
    "a put": (lambda x: np.maximum(0.65 - x, 0.0), 0.0),
    "a condition": (lambda x: x > 0.65, 0.0),
    "one over x": (lambda x: 1 / x, 0.0),
    "a polynomial": (lambda x: x + x**3, 3.0),
}


@pytest.mark.parametrize(("f", "growth"), GROWTHS.values(), ids=GROWTHS)
def test_the_growth_that_is_not_stated_is_found_on_geometric_brownian_motion(f, growth):
    """To the next half, from values at the upper end; X reaches five times the strike there."""
    assert growth_of(functional(f), sb.problem("gbm")) == growth


@pytest.mark.parametrize("growth", [0.0, 0.3, 1.0, 12.0])
def test_a_growth_that_is_stated_is_taken(growth):
    assert growth_of(functional(np.exp, growth), sb.problem("gbm")) == growth


def test_the_growth_that_is_found_is_bounded():
    assert growth_of(functional(lambda x: x**20), sb.problem("gbm")) == 8.0


@pytest.mark.parametrize("growth", [None, 2.0], ids=["found", "stated"])
@pytest.mark.parametrize("on", ["ou", "tanh", "arctan", "arcsinh"])
def test_nothing_grows_where_the_state_does_not_spread_out(on, growth):
    """In u the state moves evenly, or ever less towards the ends."""
    assert growth_of(functional(lambda x: x * x, growth), sb.problem(on)) == 0.0


def test_growth_is_seen_at_both_ends_where_the_state_spreads_out_on_both():
    """sinh: a put grows at the lower end alone; it would catch a look at the upper one only."""
    put = functional(lambda x: np.maximum(-x, 0.0))
    assert growth_of(put, sb.problem("sinh")) == 1.0


SMOOTH = {
    "identity": lambda x: x,
    "cube": lambda x: x**3,
    "bump": lambda x: np.exp(-((x - 0.6) ** 2) / 0.05),
}


@pytest.mark.parametrize("on", ["gbm", "ou", "tanh", "arctan", "arcsinh", "sinh"])
@pytest.mark.parametrize("f", [*STANDARD, *(sb.Functional(n, f) for n, f in SMOOTH.items())])
def test_smooth_functionals_are_told_by_their_nodes(f, on):
    problem = sb.problem(on)
    assert why_rough(f, problem, growth_of(f, problem)) is None


ROUGH = {
    "a call": lambda k: lambda x: np.maximum(x - k, 0.0),
    "a digital": lambda k: lambda x: x > k,
    "a cap": lambda k: lambda x: np.minimum(x, k),
}


@pytest.mark.parametrize("kink", [0.5, 0.65, 0.9])
@pytest.mark.parametrize("kind", ROUGH)
@pytest.mark.parametrize("on", ["gbm", "ou"])
def test_a_kink_that_is_not_declared_is_named_by_its_place(on, kind, kink):
    """Between the nodes next to it: within two of their widest spacings.

    It would catch a place that is told in u.
    """
    problem = sb.problem(on)
    shift = 0.0 if on == "gbm" else 1.2
    f = functional(ROUGH[kind](kink + shift))
    sentence = why_rough(f, problem, growth_of(f, problem))
    place = float(re.search(r"payoff bends, jumps or swings near x=(\S+) ", sentence)[1])
    spacing = spacing_in_u(problem, BASE.width)
    expected = kink + shift
    if on == "gbm":
        assert abs(math.log(place / expected)) <= 2 * spacing
    else:
        assert abs(place - expected) <= 2 * spacing
    assert f"kinks=({place:.3g},)" in sentence


@pytest.mark.parametrize("kind", ROUGH)
def test_a_kink_that_is_declared_is_no_roughness(kind):
    f = functional(ROUGH[kind](0.65), kinks=(0.65,))
    assert why_rough(f, sb.problem("gbm"), 1.0) is None


def test_a_functional_that_swings_faster_than_the_nodes_is_rough():
    assert why_rough(functional(lambda x: np.cos(200 * x)), sb.problem("gbm"), 0.0) is not None
