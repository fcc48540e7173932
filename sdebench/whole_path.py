"""Integrators that run whole paths: from a start and all the noise to the end states.

Their step, which contract and one-step evidence look at, is a path of one step. What they are is
measured on whole paths, so that what they keep from one step to the next is part of it.
"""

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import update_wrapper
from typing import Any

from sdebench.integrator import Scheme, scheme
from sdebench.sde import SDE, Array
from sdebench.wiener import Noise

Path = Callable[[SDE, float, Array, float, Noise], Array]


def whole_path(*, params: Sequence[str] = (), **claims: Any) -> Callable[[Path], Scheme]:
    """Return a decorator that makes a function which runs whole paths a scheme.

    The function is f(sde, t, x, h, noise): from states `x`, shape `(paths,)`, at time `t` it takes
    as many steps of length `h` as the noise has, and returns the states after them. `noise.dw`, and
    what else `noise=` asks for, has shape `(steps, paths)`. `params` are parameters that a problem
    must have. `claims` are as in `sdebench.scheme`.

    >>> @whole_path(strong=0.5, weak=1.0)
    ... def euler_path(sde, t, x, h, noise):
    ...     for k, dw in enumerate(noise.dw):
    ...         x = x + sde.drift(t + k * h, x) * h + sde.diffusion(t + k * h, x) * dw
    ...     return x
    >>> euler_path.name
    'euler-path'
    """

    def decorate(path: Path) -> Scheme:
        def step(sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
            one = {name: values[None] for name, values in vars(noise).items()}
            return path(sde, t, x, h, Noise(**one))

        update_wrapper(step, path)
        return replace(scheme(**claims)(step), path=path, params=tuple(params))

    return decorate
