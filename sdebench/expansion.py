"""One step against the exact flow, by quadrature: errors, moments and Hermite coefficients.

From states x, a step of length h is taken by the scheme and by the flow at quadrature nodes of
the Wiener functionals, free of sampling noise, for h = τ/2^4 … τ/2^16 with τ the horizon or the
SDE's own time scale, if shorter. With Z = dw/√h and D the scheme's increment minus the flow's:

    mean error       E D                        O(h^p1)
    root mean square (E D²)^(1/2)               O(h^p2)
    moments          E (ΔX^h)^j - E (ΔX)^j      O(h^(q+1)) for weak order q
    coefficients     E[ΔX He_j(Z)] / j!         the term of degree j in the Itô–Taylor expansion
"""

import math
from dataclasses import dataclass

import numpy as np

from sdebench import probe
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.wiener import Noise, Rule, StepLaw, gauss_hermite, in_order, normal_trapezoid

OCTAVES = range(4, 17)
N_REST = 6  # nodes for each further functional given dw, whose effect is O(h^1.5)
LEADING = (1.0, 0.5, 1.0, 1.5)  # powers of h that lead the terms of degree 0 … 3 in dw
ROUND_OFF = 4 * float(np.finfo(float).eps)  # a step's last additions, relative to its largest term


@dataclass(frozen=True)
class Setting:
    """Where steps were taken: a parameter set, a time and states of shape `(states,)`.

    `own` says whether the parameters are those of the problem as it was given.
    """

    problem: Problem
    t: float
    x: Array
    own: bool = True


@dataclass(frozen=True)
class Expansion:
    """What quadrature gave in one setting; arrays are `(step sizes, states)` or more.

    `coefficients` and `needed` are `(step sizes, states, 4)` over the leading power of h, the
    scheme's and the flow's; `difference` is the coefficients of D. `moments` are differences and
    `moments_needed` the flow's. What ends in `_check` is found again by a second rule.
    `rest` and `rest_needed` are the root mean squares, over h^1.5, of what is not a function of
    dw. `floors` is the round-off of a step's result.
    """

    setting: Setting
    h: Array
    mean_error: Array
    root_mean_square: Array
    moments: Array
    moments_check: Array
    moments_needed: Array
    moment_floors: Array
    coefficients: Array
    needed: Array
    difference: Array
    difference_check: Array
    rest: Array
    rest_needed: Array
    floors: Array


def settings(problem: Problem) -> list[Setting]:
    """Return the settings that one-step evidence looks at."""
    return [
        Setting(each, t, probe.states(each), own=index == 0)
        for index, each in enumerate(probe.parameter_sets(problem))
        for t in probe.times(each, index)
    ]


def expand(scheme: Scheme, setting: Setting, n_moments: int) -> Expansion:
    """Return the expansion of the scheme's step in one setting, with moments 1 … `n_moments`."""
    scale = probe.time_scale(setting.problem, setting.t, setting.x)
    h = scale * 2.0 ** -np.array(OCTAVES, dtype=float)
    levels = [_level(scheme, setting, float(each), n_moments) for each in h]
    columns = [np.array(column) for column in zip(*levels, strict=True)]
    return Expansion(setting, h, *columns)


def _level(scheme: Scheme, setting: Setting, h: float, n_moments: int) -> tuple[Array, ...]:
    """Return the quantities of `Expansion`, in its order, at one step size."""
    # Half a spacing apart, the two rules differ by more than either errs at a kink or a jump.
    step = _step(scheme, setting, h, normal_trapezoid(0.0))
    check = _step(scheme, setting, h, normal_trapezoid(0.5))
    floors = ROUND_OFF * (np.abs(setting.x) + np.abs(step.needed).max(axis=(1, 2)))
    moments, moments_needed, sizes = step.moments(n_moments)
    return (
        step.mean(step.d),
        np.sqrt(step.mean(step.d * step.d)),
        moments,
        check.moments(n_moments)[0],
        moments_needed,
        floors[:, None] * sizes,
        *step.project(np.stack((step.yours, step.needed, step.d))),
        check.project(check.d),
        *step.rest(np.stack((step.yours, step.needed))),
        floors,
    )


@dataclass(frozen=True)
class _Step:
    """Increments of scheme and flow at quadrature nodes, shape `(states, nodes, rest nodes)`."""

    h: float
    z: Array
    weights: Array
    rest_weights: Array
    yours: Array
    needed: Array
    d: Array

    def mean(self, values: Array) -> Array:
        """Return expectations, shape `(…, states)`."""
        return np.asarray((values @ self.rest_weights) @ self.weights)

    def project(self, values: Array) -> Array:
        """Return the coefficients of He_0 … He_3 over the leading powers of h."""
        z, given_dw = self.z, values @ self.rest_weights
        hermite = np.array([np.ones_like(z), z, z**2 - 1, z**3 - 3 * z])
        scale = np.array([math.factorial(j) * self.h ** LEADING[j] for j in range(4)])
        return np.asarray((given_dw * self.weights) @ hermite.T / scale)

    def rest(self, values: Array) -> Array:
        """Return the root mean square, over h^1.5, of what is no function of dw."""
        left = values - (values @ self.rest_weights)[..., None]
        return np.asarray(np.sqrt(self.mean(left**2)) / self.h**1.5)

    def moments(self, n_moments: int) -> tuple[Array, Array, Array]:
        """Return moments 1 … n: differences, the flow's, and how round-off is magnified.

        Arrays `(states, n)`. The j-th difference is D F_j with F_1 = 1 and
        F_j = Δ F_(j-1) + Δ'^(j-1), without cancellation between nearly equal moments.
        """
        factor = power = np.ones_like(self.d)
        averaged = np.empty((3, n_moments, *self.d.shape))
        for j in range(n_moments):
            higher = power * self.needed
            averaged[:, j] = self.d * factor, higher, factor * factor
            factor, power = self.yours * factor + higher, higher
        differences, needed, squares = self.mean(averaged).swapaxes(1, 2)
        return differences, needed, np.sqrt(squares)


def _step(scheme: Scheme, setting: Setting, h: float, rule: Rule) -> _Step:
    problem, t, x = setting.problem, setting.t, setting.x
    names = in_order((*scheme.noise, *problem.flow_noise))
    nodes, _ = StepLaw(names, h, problem.decay_rate).nodes(rule, N_REST)
    z, weights = rule
    start = np.repeat(x, len(nodes["dw"]))
    full = {name: np.tile(values, len(x)) for name, values in nodes.items()}
    own = Noise(**{name: full[name].copy() for name in scheme.noise})
    shape = (len(x), len(z), len(nodes["dw"]) // len(z))
    sde = problem.sde.in_calculus(scheme.calculus)
    stepped = scheme.step(sde, t, start.copy(), h, own).reshape(shape)
    flowed = problem.exact_step(t, start, h, Noise(**full)).reshape(shape)
    at = x[:, None, None]
    rest_weights = _rest_weights(len(names) - 1)
    return _Step(h, z, weights, rest_weights, stepped - at, flowed - at, stepped - flowed)


def _rest_weights(n_functionals: int) -> Array:
    weights = np.ones(1)
    for _ in range(n_functionals):
        weights = np.multiply.outer(weights, gauss_hermite(N_REST)[1]).ravel()
    return weights


def limit(values: Array, floors: Array) -> tuple[Array, Array]:
    """Return the limit of `values` as h → 0 and its uncertainty.

    `values` is `(step sizes, …)` on halving steps, an expansion in powers of √h; `floors` is the
    round-off of each. Powers are eliminated one by one (Richardson 1911); of all entries of the
    table the one with the least sum of truncation (its distance to both parents) and amplified
    round-off is taken, and three times that sum is its uncertainty.
    """
    column, noise = values, floors
    best, least = values[-1], np.full(values.shape[1:], np.inf)
    for power in range(1, 7):
        factor = 2.0 ** (power / 2)
        following = (factor * column[1:] - column[:-1]) / (factor - 1)
        noise = (factor * noise[1:] + noise[:-1]) / (factor - 1)
        doubt = np.abs(following - column[1:]) + noise
        doubt[1:] += np.abs(following[1:] - following[:-1])
        doubt[0] = np.inf
        found = doubt.min(axis=0)
        better = found < least
        if better.any():
            index = np.argmin(doubt, axis=0)[None]
            best = np.where(better, np.take_along_axis(following, index, axis=0)[0], best)
            least = np.where(better, found, least)
        column = following
    return best, 3 * least


TRUSTED = 100  # errors this many times above round-off give local orders to about 0.01
SETTLED = 0.25  # local orders that still move by more than this tell nothing
SPAN = 2  # octaves over which a local order is taken, so that rounding noise averages out


def rate(errors: Array, floors: Array) -> Array:
    """Return the power of h with which errors vanish, shape `(…)`.

    `errors` is `(step sizes, …)` on halving steps; the finest five above round-off count. The
    larger of the last local order and its extrapolation is taken, since an order that still rises
    is no sign of a low one; infinity where there is nothing to tell by: fewer than five errors
    above round-off, a change of sign among them, or local orders that have not settled.
    """
    flat = errors.reshape(len(errors), -1)
    above = np.abs(flat) > TRUSTED * floors.reshape(len(errors), -1)
    powers = np.full(flat.shape[1], np.inf)
    for i, column in enumerate(flat.T):
        last = len(column) if above[:, i].all() else int(np.argmin(above[:, i]))
        used = column[max(last - 2 * SPAN - 1, 0) : last]
        if len(used) < 2 * SPAN + 1 or len(set(np.sign(used))) > 1:
            continue
        before, local = np.log2(used[:-SPAN:SPAN] / used[SPAN::SPAN]) / SPAN
        if abs(local - before) < SETTLED:
            powers[i] = max(local, 2 * local - before)
    return powers.reshape(errors.shape[1:])
