"""The contract: laws that a step must keep before anything about it is measured.

Each law is a member of `Law` with the sentence shown when it is broken and what to change. They
are tried at the start and inside the horizon, on typical states and on the outermost nodes of the
quadrature that one-step evidence uses.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from enum import Enum

import numpy as np

from sdebench import probe
from sdebench.blame import blamed
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import SDE, Array
from sdebench.wiener import Noise, Stack, StepLaw, gauss_hermite

N_PATHS = 16384  # as many as a sample's block, so that code that cuts large arrays is seen
N_OUTER = 40  # the quadrature whose outermost nodes are tried
ROUND_OFF = 64 * float(np.finfo(float).eps)  # some 64 operations a step, relative to its terms


class Law(Enum):
    """A law of the contract: what was broken, and what to change."""

    SHAPE = (
        "returns {seen} where an array of shape (paths,) of float64 belongs",
        "return an array with the shape and dtype of x",
    )
    INPUTS = (
        "writes into its input {seen}",
        "make new arrays instead of changing x or noise in place",
    )
    FINITE = (
        "gives {seen} for finite input",
        "keep square roots, logarithms and divisions inside their domain",
    )
    SAME_BITS = (
        "gives another result when called again with the same input (by {seen})",
        "draw no random numbers of its own and keep nothing from one call to the next",
    )
    OWN_PATH = (
        "lets one path depend on others (by {seen})",
        "use only element-wise operations on x and noise: no mean, sort, roll or shared state",
    )
    ITS_NOISE = (
        "gives the same result whatever its noise",
        "use the functionals in `noise`, and no other source of randomness",
    )
    NO_STEP = (
        "moves X by {seen} in a step of vanishing length without noise",
        "let every term vanish with h and the noise",
    )

    def sentence(self, seen: str, where: str) -> str:
        """Return the whole sentence: the law, the input, and what to change."""
        broken, mend = self.value
        return f"The step {broken.format(seen=seen)} {where}; {mend}."


@dataclass(frozen=True)
class Breach:
    """A broken law with its sentence."""

    law: Law
    sentence: str


@dataclass(frozen=True)
class Trial:
    """One input of a step: a time, a step length, states and noise of shape `(paths,)`."""

    sde: SDE
    t: float
    x: Array
    h: float
    noise: Stack

    def run(self, scheme: Scheme, part: slice | None = None) -> Array:
        """Return the step's result on fresh copies, of all paths or of a part of them."""
        part = slice(None) if part is None else part
        noise = Noise(**{name: values[part].copy() for name, values in self.noise.items()})
        return scheme.step(self.sde, self.t, self.x[part].copy(), self.h, noise)

    def at(self, path: int | None = None) -> str:
        """Return where this is, for a sentence."""
        where = f"at t={self.t:g}, h={self.h:g}"
        if path is None:
            return where
        values = ", ".join(f"{name}={v[path]:.6g}" for name, v in self.noise.items())
        return f"{where}, x={self.x[path]:.6g}, {values}"

    @property
    def scale(self) -> Array:
        """The size of a step's terms, path by path, for round-off."""
        a, b = self.sde.drift(self.t, self.x), self.sde.diffusion(self.t, self.x)
        noise = np.sum([np.abs(v) for v in self.noise.values()], axis=0)
        size: Array = np.abs(self.x) + np.abs(a) * self.h + np.abs(b) * noise + abs(self.sde.start)
        return size


def first_breach(scheme: Scheme, problem: Problem) -> Breach | None:
    """Return the first law that the scheme breaks on the problem, or None if it keeps all."""
    with np.errstate(all="ignore"), blamed(scheme, "when its contract was checked"):
        trials = list(_trials(scheme, problem))
        for check in CHECKS:
            for trial in trials:
                breach = check(scheme, trial)
                if breach is not None:
                    return breach
    return None


def _trials(scheme: Scheme, problem: Problem) -> Iterator[Trial]:
    sde = problem.sde.in_calculus(scheme.calculus)
    rng = np.random.default_rng(7)
    for t in probe.times(problem):
        for h in (problem.horizon / 8, problem.horizon / 512):
            law = StepLaw(scheme.noise, h, problem.decay_rate)
            normals = [rng.standard_normal(N_PATHS) for _ in law.names]
            outer = gauss_hermite(N_OUTER)[0][[0, -1]]
            for row in normals:
                row[:2] = outer
            noise = law.from_normals(normals)
            x = np.resize(probe.states(problem), N_PATHS)
            yield Trial(sde, t, x, h, {name: noise[name] for name in scheme.noise})


def _shape(scheme: Scheme, trial: Trial) -> Breach | None:
    for part in (slice(None), slice(0, 1)):
        result = trial.run(scheme, part)
        if not isinstance(result, np.ndarray):
            return _breach(Law.SHAPE, f"a {type(result).__name__}", trial)
        if result.shape != trial.x[part].shape or result.dtype != np.float64:
            seen = f"shape {result.shape} of {result.dtype} for {trial.x[part].size} path(s)"
            return _breach(Law.SHAPE, seen, trial)
    return None


def _inputs(scheme: Scheme, trial: Trial) -> Breach | None:
    given = {"x": trial.x.copy()} | {f"noise.{n}": v.copy() for n, v in trial.noise.items()}
    kept = {name: values.copy() for name, values in given.items()}
    noise = Noise(**{name: given[f"noise.{name}"] for name in trial.noise})
    scheme.step(trial.sde, trial.t, given["x"], trial.h, noise)
    changed = [n for n in given if not np.array_equal(given[n], kept[n])]
    return _breach(Law.INPUTS, " and ".join(changed), trial) if changed else None


def _finite(scheme: Scheme, trial: Trial) -> Breach | None:
    result = trial.run(scheme)
    bad = np.flatnonzero(~np.isfinite(result))
    if bad.size == 0:
        return None
    return _breach(Law.FINITE, str(result[bad[0]]), trial, int(bad[0]))


def _same_bits(scheme: Scheme, trial: Trial) -> Breach | None:
    first = trial.run(scheme)
    other = Trial(trial.sde, trial.t, trial.x[::-1], trial.h / 2, trial.noise)
    other.run(scheme, slice(0, 7))
    again = trial.run(scheme)
    return _differing(Law.SAME_BITS, trial, first, again, np.zeros_like(first))


def _own_path(scheme: Scheme, trial: Trial) -> Breach | None:
    whole = trial.run(scheme)
    half = N_PATHS // 2
    exact = np.zeros(N_PATHS)
    loose = ROUND_OFF * trial.scale
    for kept in (slice(0, half), slice(half, None)):
        moved = Trial(trial.sde, trial.t, 1.01 * trial.x, trial.h, _scaled(trial.noise, -0.9))
        moved.x[kept] = trial.x[kept]
        for name in trial.noise:
            moved.noise[name][kept] = trial.noise[name][kept]
        breach = _differing(Law.OWN_PATH, trial, whole[kept], moved.run(scheme)[kept], exact[kept])
        if breach is not None:
            return breach
    # Other lengths and places may take another vectorised branch: equal to round-off only.
    for part in (slice(0, 1), slice(3, 8), slice(None, None, -1)):
        alone = trial.run(scheme, part)
        breach = _differing(Law.OWN_PATH, trial, whole[part], alone, loose[part])
        if breach is not None:
            return breach
    return None


def _its_noise(scheme: Scheme, trial: Trial) -> Breach | None:
    moves = np.abs(trial.sde.diffusion(trial.t, trial.x)) > 0
    other = Trial(trial.sde, trial.t, trial.x, trial.h, _scaled(trial.noise, -0.9))
    same = moves & (trial.run(scheme) == other.run(scheme))
    same &= sum(np.abs(v) for v in trial.noise.values()) > 0
    if same.sum() <= moves.sum() // 2:
        return None
    return _breach(Law.ITS_NOISE, "", trial, int(np.flatnonzero(same)[0]))


def _no_step(scheme: Scheme, trial: Trial) -> Breach | None:
    """In the limit: schemes without derivatives divide by √h, so that h = 0 itself is no input.

    A step of length h without noise moves by terms of order √h at the most; at h = 2^-80 T these
    are far below round-off of x for coefficients up to 10^8.
    """
    h = trial.sde.horizon * 2.0**-80
    still = Trial(trial.sde, trial.t, trial.x, h, _scaled(trial.noise, 0.0))
    tolerance = ROUND_OFF * trial.scale
    return _differing(Law.NO_STEP, still, trial.x, still.run(scheme), tolerance)


CHECKS: tuple[Callable[[Scheme, Trial], Breach | None], ...] = (
    _shape,
    _inputs,
    _finite,
    _same_bits,
    _own_path,
    _its_noise,
    _no_step,
)


def _scaled(noise: Stack, factor: float) -> dict[str, Array]:
    return {name: factor * values for name, values in noise.items()}


def _differing(
    law: Law, trial: Trial, wanted: Array, found: Array, tolerance: Array
) -> Breach | None:
    gap = np.abs(found - wanted)
    bad = np.flatnonzero(~(gap <= tolerance))
    if bad.size == 0:
        return None
    worst = int(bad[np.argmax(gap[bad])])
    return _breach(law, f"{gap[worst]:.3g}", trial)


def _breach(law: Law, seen: str, trial: Trial, path: int | None = None) -> Breach:
    return Breach(law, law.sentence(seen, trial.at(path)))
