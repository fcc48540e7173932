"""What can be propagated: schemes that do not depend on time, functionals that nodes can tell."""

import math
from collections.abc import Iterable
from itertools import product

import numpy as np

from sdebench.blame import blamed
from sdebench.chain import BASE, MOST_NODES
from sdebench.functional import Functional
from sdebench.grid import Grid, reach
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.wiener import Noise, StepLaw


def growth_of(functional: Functional, problem: Problem) -> float:
    """Return the power of x with which f grows, where the state of a problem spreads out at all.

    Unless it is stated, from the largest |f| on two stretches at either end of what X_T reaches,
    against the growth of dx/du there.
    """
    low, _, high = reach(problem, 6.0)
    ends = [np.linspace(a, a + (b - a) / 8, 33) for a, b in ((low, high), (high, low))]
    found = 0.0
    for u in ends:
        x = problem.coordinate.back(u)
        stretch = np.abs(1 / problem.coordinate.slope(x))
        wider = math.log(stretch[:16].max() / stretch[17:].max())
        if wider < 0.1:  # the state does not spread out at this end
            continue
        if functional.growth is not None:
            return functional.growth
        size = np.abs(functional(x))
        steeper = math.log(max(size[:16].max(), 1e-300) / max(size[17:].max(), 1e-300))
        found = max(found, round(2 * steeper / wider) / 2)
    return min(found, 8.0)


ROUGH = 1e-3  # of the largest value, by which interpolation between the finest nodes may err


def why_rough(functional: Functional, problem: Problem, growth: float) -> str | None:
    """Return why a functional cannot be told by its values on the nodes, or None if it can."""
    if functional.kinks:
        return None
    grid = Grid.of(problem, MOST_NODES, BASE.width)
    between = (grid.u[1:] + grid.u[:-1]) / 2

    def weighted(u: Array) -> Array:
        x = problem.coordinate.back(u)
        return grid.window(u) * problem.coordinate.slope(x) ** growth * functional(x)

    with np.errstate(all="ignore"):
        values = weighted(grid.u)
        missed = np.abs(grid.interpolation(between) @ values - weighted(between))
    worst = int(np.argmax(missed))
    if missed[worst] <= ROUGH * np.abs(values).max():
        return None
    x = float(problem.coordinate.back(between[worst : worst + 1])[0])
    return (
        f"{functional.name} bends, jumps or swings near x={x:.4g} faster than its nodes tell: if "
        f"these are kinks, declare them, as in Functional(..., kinks=({x:.3g},))"
    )


N_TIMES = 64  # of a rung, at which a step is held against the step at time 0
TRIED = 5.0  # standard deviations of the end's law, over which steps are tried
N_STATES = 41
NORMALS = np.array([0.4, -1.1, 1.7, -0.3])  # of each functional


def why_not(scheme: Scheme, problem: Problem, steps: Iterable[int]) -> str | None:
    """Return why a scheme on a problem cannot be propagated, or None if it can."""
    if scheme.path is not None:
        return f"{scheme.label} runs whole paths"
    if not problem.autonomous:
        return f"{problem.label} depends on time"
    asked = blamed(f"Scheme '{scheme.label}'", scheme.step, "when it was tried at other times")
    rungs = list(steps)
    with np.errstate(all="ignore"), asked:
        place = _abrupt_place(scheme, problem, (rungs[0], rungs[-1]))
        if place is not None:
            return f"the step changes abruptly with the state, near x={place:.4g}"
        for n in rungs:
            time = _time_of_another_step(scheme, problem, problem.horizon / n, n)
            if time is not None:
                return f"the step depends on time, as at t={time:.4g} with {n} steps"
    return None


N_FINE = 8001  # states between which a step may hide nothing
ABRUPT = 0.01  # of the largest move, by which interpolation between the finest nodes may err


def _abrupt_place(scheme: Scheme, problem: Problem, steps: Iterable[int]) -> float | None:
    """Return a state about which the step is not what nodes tell of it, or None."""
    grid = Grid.of(problem, MOST_NODES, TRIED)
    fine = np.linspace(grid.low, grid.high, N_FINE)
    from_nodes = grid.interpolation(fine)
    for h, normal in product((problem.horizon / n for n in steps), NORMALS[:2]):
        at_nodes, at_fine = (_moves(scheme, problem, u, h, float(normal)) for u in (grid.u, fine))
        missed = np.abs(from_nodes @ at_nodes - at_fine)
        worst = int(np.argmax(missed))
        if missed[worst] > ABRUPT * np.abs(at_fine).max():
            return float(problem.coordinate.back(fine[worst : worst + 1])[0])
    return None


def _moves(scheme: Scheme, problem: Problem, u: Array, h: float, normal: float) -> Array:
    """Return how far a step takes x from places u, in units of u, with one value of all normals."""
    law = StepLaw(scheme.noise, h, problem.decay_rate)
    noise = law.from_normals([np.full(len(u), normal) for _ in law.names])
    own, x = Noise(**{name: noise[name] for name in scheme.noise}), problem.coordinate.back(u)
    end = scheme.step(problem.sde.in_calculus(scheme.calculus), 0.0, x.copy(), h, own)
    moves: Array = (end - x) * problem.coordinate.slope(x)
    return moves


def _time_of_another_step(scheme: Scheme, problem: Problem, h: float, n: int) -> float | None:
    """Return a time of the rung at which the step is not what it is at time 0, or None."""
    sde = problem.sde.in_calculus(scheme.calculus)
    low, _, high = reach(problem, TRIED)
    states = problem.coordinate.back(np.linspace(low, high, N_STATES))
    law = StepLaw(scheme.noise, h, problem.decay_rate)
    x = np.repeat(states, len(NORMALS))
    noise = law.from_normals([np.tile(NORMALS, N_STATES) for _ in law.names])

    def taken(t: float) -> Array:
        own = Noise(**{name: noise[name].copy() for name in scheme.noise})
        return scheme.step(sde, t, x.copy(), h, own)

    first = taken(0.0)
    for k in np.unique(np.linspace(0, n - 1, min(n, N_TIMES)).round()):
        if not np.array_equal(taken(float(k) * h), first, equal_nan=True):
            return float(k) * h
    return None
