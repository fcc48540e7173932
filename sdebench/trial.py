"""Trials: the inputs on which the laws of the contract are checked."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from sdebench import probe
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import SDE, Array
from sdebench.wiener import Noise, Stack, StepLaw, normal_trapezoid

N_PATHS = 16384  # as many as a sample's block, so that code that cuts large arrays is seen


@dataclass(frozen=True)
class Trial:
    """One input of a step: a time, a step length, states and noise of shape `(paths,)`.

    `parameters` tells them in a sentence where they are not the problem's own.
    """

    sde: SDE
    t: float
    x: Array
    h: float
    noise: Stack
    parameters: str = ""

    def run(self, scheme: Scheme, part: slice | None = None) -> Array:
        """Return the step's result on fresh copies, of all paths or of a part of them."""
        part = slice(None) if part is None else part
        noise = Noise(**{name: values[part].copy() for name, values in self.noise.items()})
        return scheme.step(self.sde, self.t, self.x[part].copy(), self.h, noise)

    def at(self, path: int | None = None) -> str:
        """Return where this is, for a sentence."""
        where = f"at t={self.t:g}, h={self.h:g}{self.parameters}"
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


def trials(
    scheme: Scheme, problem: Problem, parameters: str = "", n_paths: int = N_PATHS
) -> Iterator[Trial]:
    """Yield trials at the start and inside the horizon, with a long and a short step."""
    sde = problem.sde.in_calculus(scheme.calculus)
    rng = np.random.default_rng(7)
    for t in probe.times(problem):
        for h in (problem.horizon / 8, problem.horizon / 512):
            law = StepLaw(scheme.noise, h, problem.decay_rate)
            normals = [rng.standard_normal(n_paths) for _ in law.names]
            outer = normal_trapezoid(0.0)[0][[0, -1]]
            for row in normals:
                row[:2] = outer
            noise = law.from_normals(normals)
            x = np.resize(probe.states(problem), n_paths)
            own = {name: noise[name] for name in scheme.noise}
            yield Trial(sde, t, x, h, own, parameters)


def scaled(noise: Stack, factor: float) -> dict[str, Array]:
    """Return the functionals times a factor."""
    return {name: factor * values for name, values in noise.items()}
