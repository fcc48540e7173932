"""The contract: laws that a step must keep before anything about it is measured.

Each law is a member of `Law` with the sentence shown when it is broken and what to change. They
are tried at the start and inside the horizon, on typical states and on the outermost nodes of the
quadrature that one-step evidence uses.
"""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from enum import Enum

import numpy as np

from sdebench import probe
from sdebench.blame import blamed
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import Array, Coefficient
from sdebench.trial import N_PATHS, Trial, scaled, trials
from sdebench.wiener import Noise

N_FEW = 256  # paths with other parameters than the problem's own
N_ROUNDS = 2  # times a trial that four threads call the step at once; two cores miss 1 in 30
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
    OWN_ARRAYS = (
        "overwrites what another call of it has made (by {seen})",
        "share no working arrays between calls: several threads call the step at once",
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


def first_breach(scheme: Scheme, problem: Problem) -> Breach | None:
    """Return the first law that the scheme breaks on the problem, or None if it keeps all.

    Other parameters than the problem's own are tried for shape and finite results only.
    """
    checked = blamed(f"Scheme '{scheme.label}'", scheme.step, "when its contract was checked")
    with np.errstate(all="ignore"), checked:
        own = list(trials(scheme, problem))
        for check in CHECKS:
            for trial in own:
                breach = check(scheme, trial)
                if breach is not None:
                    return breach
        for each in probe.parameter_sets(problem)[1:]:
            told = ", ".join(f"{name}={each.params[name]:.6g}" for name in each.values)
            for trial in trials(scheme, each, f", {told}", N_FEW):
                breach = _shape(scheme, trial) or _finite(scheme, trial)
                if breach is not None:
                    return breach
    return None


def fingerprint(scheme: Scheme, problem: Problem) -> list[bytes]:
    """Return what the step gives on fixed inputs, to tell later whether it gives it still."""
    with np.errstate(all="ignore"):
        return [np.asarray(t.run(scheme)).tobytes() for t in trials(scheme, problem, "", N_FEW)]


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
    none = np.zeros(N_PATHS)
    returned = trial.run(scheme)
    first = returned.copy()
    other = Trial(trial.sde, trial.t, trial.x[::-1], trial.h / 2, trial.noise)
    other.run(scheme, slice(0, 7))
    # Twice, so that what changes with every second call is seen as well.
    for again in (trial.run(scheme), trial.run(scheme)):
        breach = _differing(Law.SAME_BITS, trial, first, again, none)
        if breach is not None:
            return breach
    other.run(scheme)
    return _differing(Law.OWN_ARRAYS, trial, first, returned, none)


def _own_arrays(scheme: Scheme, trial: Trial) -> Breach | None:
    """A sample calls the step from several threads at once: working arrays must not be shared.

    First with coefficients that have another thread take a step before they return, which meets
    every array kept across them; then with steps at once, which meet the others nearly always.
    """
    none = np.zeros(N_PATHS)
    factors = (1.0, -0.9, 1.1, 0.8)
    inputs = [
        Trial(trial.sde, trial.t, (1 + 0.001 * i) * trial.x, trial.h, scaled(trial.noise, factor))
        for i, factor in enumerate(factors)
    ]
    alone = [each.run(scheme) for each in inputs]

    with ThreadPoolExecutor(len(inputs)) as pool:

        def interrupted(coefficient: Coefficient) -> Coefficient:
            def value(t: float, x: Array) -> Array:
                pool.submit(inputs[1].run, scheme).result()
                return coefficient(t, x)

            return value

        sde = replace(
            trial.sde,
            drift=interrupted(trial.sde.drift),
            diffusion=interrupted(trial.sde.diffusion),
            diffusion_dx=interrupted(trial.sde.diffusion_dx),
        )
        found = [replace(inputs[0], sde=sde).run(scheme)]
        wanted = alone[:1]
        for _ in range(N_ROUNDS):
            found += pool.map(lambda each: each.run(scheme), inputs)
            wanted += alone
    for right, own in zip(wanted, found, strict=True):
        breach = _differing(Law.OWN_ARRAYS, trial, right, own, none)
        if breach is not None:
            return breach
    return None


def _own_path(scheme: Scheme, trial: Trial) -> Breach | None:
    whole = trial.run(scheme)
    half = N_PATHS // 2
    exact = np.zeros(N_PATHS)
    loose = ROUND_OFF * trial.scale
    for kept in (slice(0, half), slice(half, None)):
        moved = Trial(trial.sde, trial.t, 1.01 * trial.x, trial.h, scaled(trial.noise, -0.9))
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
    moves &= np.sum([np.abs(v) for v in trial.noise.values()], axis=0) > 0
    other = Trial(trial.sde, trial.t, trial.x, trial.h, scaled(trial.noise, -0.9))
    same = trial.run(scheme) == other.run(scheme)
    if not np.any(moves) or not np.all(same[moves]):
        return None
    return _breach(Law.ITS_NOISE, "", trial, int(np.flatnonzero(moves)[0]))


def _no_step(scheme: Scheme, trial: Trial) -> Breach | None:
    """In the limit: schemes without derivatives divide by √h or by dw, so that 0 is no input.

    A step of length h moves by terms of order √h at the most; for h = 2^-200 T these are some
    10^-30 √T, far below round-off of x for any coefficients. The noise is scaled alike.
    """
    h = trial.sde.horizon * 2.0**-200
    still = Trial(trial.sde, trial.t, trial.x, h, scaled(trial.noise, (h / trial.h) ** 0.5))
    tolerance = ROUND_OFF * trial.scale
    return _differing(Law.NO_STEP, still, trial.x, still.run(scheme), tolerance)


CHECKS: tuple[Callable[[Scheme, Trial], Breach | None], ...] = (
    _shape,
    _inputs,
    _finite,
    _same_bits,
    _own_path,
    _own_arrays,
    _its_noise,
    _no_step,
)


def _differing(
    law: Law, trial: Trial, wanted: Array, found: Array, tolerance: Array
) -> Breach | None:
    gap = np.abs(found - wanted)
    gap[np.isnan(found) & np.isnan(wanted)] = 0.0  # that a result is not finite, its own law says
    bad = np.flatnonzero(~(gap <= tolerance))
    if bad.size == 0:
        return None
    worst = int(bad[np.argmax(gap[bad])])
    return _breach(law, f"{gap[worst]:.3g}", trial)


def _breach(law: Law, seen: str, trial: Trial, path: int | None = None) -> Breach:
    return Breach(law, law.sentence(seen, trial.at(path)))
