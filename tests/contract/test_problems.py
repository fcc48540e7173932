"""What must hold for every registered problem: flow, law, coefficients and coordinate agree."""

import re
import sys

import numpy as np
import pytest

import sdebench as sb
from sdebench.admission import check_problem
from sdebench.expansion import Setting, expand, limit
from sdebench.functional import STANDARD
from sdebench.grid import reach
from sdebench.probe import parameter_sets, states, time_scale, times
from sdebench.wiener import StepLaw, concatenate, gauss_hermite
from tests.tolerance import round_off

# Operations behind one exact step, those inside exp and the like included: a formula has some
# twenty, and its intermediate results are of the size of x, of its result, or of their ratio.
OPERATIONS = 64


@sb.scheme(strong=0.5)
def still(sde, t, x, h, noise):
    """Take no step: only the flow's own expansion is looked at."""
    return x


def drawn(problem: sb.Problem, h: float, n: int, seed: int) -> dict[str, np.ndarray]:
    """Return functionals of `n` paths over a step, from a seed."""
    rng = np.random.default_rng(seed)
    law = StepLaw(problem.flow_noise, h, problem.decay_rate)
    return law.from_normals([rng.standard_normal(n) for _ in law.names])


@pytest.mark.parametrize("which", range(5), ids=["defaults", *(f"set {i}" for i in range(1, 5))])
def test_the_flow_over_two_steps_is_that_over_both(problem, which):
    """Over h1 then h2 = over h1 + h2 with the joined noise, for two unequal steps from t > 0."""
    p = parameter_sets(problem)[which]
    t, h1, h2 = 0.2 * p.horizon, 0.3 * p.horizon, 0.17 * p.horizon
    n = 50
    first, second = drawn(p, h1, n, 1), drawn(p, h2, n, 2)
    joined = concatenate(first, second, h2, p.decay_rate)
    x = np.resize(states(p), n)
    between = p.exact_step(t, x, h1, sb.Noise(**first))
    twice = p.exact_step(t + h1, between, h2, sb.Noise(**second))
    once = p.exact_step(t, x, h1 + h2, sb.Noise(**joined))
    scale = max(float(np.abs(v).max()) for v in (x, between, once, *joined.values()))
    assert np.abs(twice - once).max() <= round_off(scale, 3 * OPERATIONS)


def test_the_flow_over_no_time_is_no_step(problem):
    x = states(problem)
    none = sb.Noise(**{name: np.zeros_like(x) for name in problem.flow_noise})
    for t in times(problem):
        moved = problem.exact_step(t, x, 0.0, none)
        assert np.abs(moved - x).max() <= round_off(float(np.abs(x).max()), OPERATIONS)


@pytest.mark.parametrize("functional", STANDARD, ids=lambda f: f.name)
@pytest.mark.parametrize("which", range(5), ids=["defaults", *(f"set {i}" for i in range(1, 5))])
def test_the_law_is_that_of_the_flow(problem, functional, which):
    """E f(X_T) by Gauss–Hermite over the flow's own noise beside the law's quadrature.

    The first is known to three times its change against fewer nodes, the second to its own
    stated doubt.
    """
    p = parameter_sets(problem)[which]
    step = StepLaw(p.flow_noise, p.horizon, p.decay_rate)
    means, scale = [], 0.0
    for n in (64, 48):
        nodes, weights = step.nodes(gauss_hermite(n), n if len(step.names) < 3 else 12)
        noise = sb.Noise(**{name: nodes[name] for name in p.flow_noise})
        end = p.exact_step(0.0, np.full(len(weights), p.start), p.horizon, noise)
        values = functional.function(end)
        means.append(float(weights @ values))
        scale = max(scale, float(weights @ np.abs(values)))
    exact, doubt = p.law(p.params).expectation(functional.function)
    allowed = doubt + 3 * abs(means[0] - means[1]) + round_off(scale, 64 * OPERATIONS)
    assert abs(means[0] - exact) <= allowed


def test_the_law_heeds_every_parameter(problem):
    """A law that ignores one is right at the defaults alone."""

    def shape(p: sb.Problem) -> tuple[float, ...]:
        law = p.law(p.params)
        return tuple(law.expectation(f.function)[0] for f in STANDARD)

    own = shape(problem)
    moved = {
        name: shape(problem.with_parameters({name: 1.25 * problem.params[name]}))
        for name in problem.params
    }
    assert [name for name, other in moved.items() if other == own] == []


def test_the_derivative_of_the_diffusion_is_its_derivative(problem):
    """By central differences at two distances, whose change bounds their own error."""
    for i, p in enumerate(parameter_sets(problem)):
        sde, x = p.sde, states(p)
        for t in times(p, i):

            def slope(distance, sde=sde, t=t, x=x):
                ahead, behind = sde.diffusion(t, x + distance), sde.diffusion(t, x - distance)
                return (ahead - behind) / (2 * distance)

            size = float(np.abs(x).max())
            near = size * float(np.finfo(float).eps) ** (1 / 3)
            values = float(np.abs(sde.diffusion(t, x)).max())
            lost = round_off(values, OPERATIONS) / near
            allowed = np.abs(slope(near) - slope(2 * near)) + lost
            assert np.all(np.abs(sde.diffusion_dx(t, x) - slope(near)) <= allowed)


@pytest.mark.parametrize("which", range(5), ids=["defaults", *(f"set {i}" for i in range(1, 5))])
@pytest.mark.parametrize("term", ["drift", "diffusion", "half b times db/dx"])
def test_the_coefficients_are_the_leading_terms_of_the_flow(problem, which, term):
    """In X_{t+h} - X_t the terms of h, dw and dw² - h are a, b and b ∂b/∂x / 2."""
    p = parameter_sets(problem)[which]
    sde, x = p.sde, states(p)
    for t in times(p, which):
        b = sde.diffusion(t, x)
        coefficients = {
            "drift": sde.drift(t, x),
            "diffusion": b,
            "half b times db/dx": 0.5 * b * sde.diffusion_dx(t, x),
        }
        j = list(coefficients).index(term)
        e = expand(still, Setting(p, t, x), 1)
        power = (1.0, 0.5, 1.0)[j]
        found, doubt = limit(e.needed[..., j], e.floors / e.h[:, None] ** power)
        assert np.all(np.abs(found - coefficients[term]) <= doubt)


def reached(p: sb.Problem) -> np.ndarray:
    """Return places in the coordinate up to six standard deviations of the end, and the start."""
    low, start, high = reach(p, 6.0)
    return np.linspace(min(low, start), max(high, start), 201)


def test_the_way_back_inverts_the_coordinate(problem):
    """An ulp of u is as much of x as the slope says, and the other way about.

    It would catch the inverse of another branch, and one that is right near the start alone.
    """
    for p in parameter_sets(problem):
        c, u = p.coordinate, reached(p)
        x = c.back(u)
        slope = np.abs(c.slope(x))
        ulp = round_off(1.0, OPERATIONS)
        assert np.all(np.abs(c.to(x) - u) <= ulp * (np.abs(u) + np.abs(x) * slope))
        assert np.all(np.abs(c.back(c.to(x)) - x) <= ulp * (np.abs(x) + np.abs(u) / slope))


def test_the_slope_is_the_derivative_of_the_coordinate(problem):
    """By central differences at two distances, whose change bounds their own error."""
    for p in parameter_sets(problem):
        c, x = p.coordinate, states(p)
        near = float(np.abs(x).max()) * float(np.finfo(float).eps) ** (1 / 3)

        def slope(distance, c=c, x=x):
            return (c.to(x + distance) - c.to(x - distance)) / (2 * distance)

        # A value is known to some ulp of its own and, by the slope, of the state.
        lost = round_off(1.0, OPERATIONS) * (np.abs(c.to(x)) + np.abs(c.slope(x) * x)) / near
        allowed = np.abs(slope(near) - slope(2 * near)) + lost
        assert np.all(np.abs(c.slope(x) - slope(near)) <= allowed)


def test_the_coordinate_increases(problem):
    for p in parameter_sets(problem):
        x = p.coordinate.back(reached(p))
        assert np.all(np.diff(x) > 0)
        assert np.all(np.diff(p.coordinate.to(x)) > 0)
        assert np.all(p.coordinate.slope(x) > 0)


def test_the_coordinate_keeps_the_shape_of_the_state_and_leaves_it_alone(problem):
    x = states(problem).reshape(2, 2)
    kept = x.copy()
    c = problem.coordinate
    for values in (c.to(x), c.slope(x), c.back(c.to(x))):
        assert (values.shape, values.dtype) == ((2, 2), np.float64)
    assert np.array_equal(x, kept)


def test_the_law_is_normal_in_the_coordinate_where_nothing_depends_on_time(problem):
    """Its transform is the way back, within six standard deviations."""
    if not problem.autonomous:
        pytest.skip("the coordinate of a problem that depends on time is of no use")
    for p in parameter_sets(problem):
        law = p.law(p.params)
        g = law.mean + np.linspace(-6, 6, 201) * law.sd
        x = p.coordinate.back(g)
        assert np.all(np.abs(law.transform(g) - x) <= round_off(1.0, OPERATIONS) * np.abs(x))


def test_a_problem_is_autonomous_if_and_only_if_nothing_in_it_depends_on_time(problem):
    """Drift, diffusion and flow at four times of the horizon beside time 0, to the bit."""
    depends = False
    for i, p in enumerate(parameter_sets(problem)):
        x, h = states(p), 0.01 * p.horizon
        noise = sb.Noise(**drawn(p, h, len(x), 5 + i))
        functions = [p.sde.drift, p.sde.diffusion, p.sde.diffusion_dx]
        functions.append(lambda t, x, p=p, h=h, noise=noise: p.exact_step(t, x, h, noise))
        for t in (*times(p, i), 0.5 * p.horizon, p.horizon - h):
            depends |= any(not np.array_equal(f(t, x), f(0.0, x)) for f in functions)
    assert problem.autonomous == (not depends)


def test_the_noise_is_of_the_kind_that_is_said(problem):
    slopes = [p.sde.diffusion_dx(t, states(p)) for p in parameter_sets(problem) for t in times(p)]
    depends = any(np.any(slope != 0) for slope in slopes)
    assert depends == (problem.noise_kind == "multiplicative")


def test_coefficients_keep_the_shape_of_the_state(problem):
    sde = problem.sde
    for n in (1, 7):
        x = np.resize(states(problem), n)
        for f in (sde.drift, sde.diffusion, sde.diffusion_dx):
            assert (f(0.5, x).shape, f(0.5, x).dtype) == ((n,), np.float64)


def test_coefficients_and_flow_leave_their_inputs_alone(problem):
    x = states(problem)
    noise = drawn(problem, 0.5, len(x), 3)
    kept = {name: values.copy() for name, values in noise.items()}
    before = x.copy()
    for f in (problem.sde.drift, problem.sde.diffusion, problem.sde.diffusion_dx):
        f(0.5, x)
    problem.exact_step(0.5, x, 0.5, sb.Noise(**noise))
    assert np.array_equal(x, before)
    assert all(np.array_equal(noise[name], kept[name]) for name in kept)


def test_the_flow_uses_the_functionals_it_names(problem):
    assert set(problem.flow_noise) <= set(problem.functionals)
    noise = drawn(problem, 0.5, 4, 4)
    own = sb.Noise(**{name: noise[name] for name in problem.flow_noise})
    assert problem.exact_step(0.0, states(problem), 0.5, own).shape == (4,)


def test_defaults_hide_no_factor(problem):
    """None is 0 or 1, no two are equal; only the horizon, a length of time, may be 1."""
    values = {n: v for n, v in problem.params.items() if n != "horizon"}
    assert [n for n, v in values.items() if v in (0.0, 1.0)] == []
    assert len(set(values.values())) == len(values)


def test_defaults_lie_in_their_own_domain(problem):
    for name, parameter in problem.declared.items():
        assert parameter.check(problem.name, name, parameter.default) == parameter.default


def test_a_bounded_parameter_says_why(problem):
    bounded = {
        name: p for name, p in problem.parameters.items() if np.isfinite([p.above, p.below]).any()
    }
    assert [name for name, p in bounded.items() if not p.why] == []


def test_the_file_of_a_problem_has_its_equation_its_source_and_the_why_of_its_defaults(problem):
    doc = sys.modules[problem.flow.__module__].__doc__ or ""
    assert "dX = " in doc
    assert re.search(r"\((1[89]|20)\d\d\)", doc), "a source, as 'Author (year)'"
    assert "Defaults: " in doc


def test_a_problem_and_its_other_parameter_sets_are_within_double_precision(problem):
    for p in parameter_sets(problem):
        check_problem(p)


def test_the_time_scale_is_a_part_of_the_horizon(problem):
    for i, p in enumerate(parameter_sets(problem)):
        for t in times(p, i):
            assert 0 < time_scale(p, t, states(p)) <= p.horizon


def test_the_equation_shows_every_parameter_but_the_start(problem):
    words = set(re.findall(r"[A-Za-z_]\w*", problem.equation))
    assert set(problem.parameters) - {"x0"} <= words


def test_the_name_of_a_problem_is_its_files_with_hyphens(problem):
    module = problem.flow.__module__.rpartition(".")[2]
    assert problem.name == module.replace("_", "-")
