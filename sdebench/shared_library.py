"""Integrators in a shared library: a C function, also of Fortran, Rust or what else can make one.

    int f(int64_t steps, int64_t paths, double t, double h, const double *params,
          const double *x, const double *noise, double *end)

takes `paths` states `x` at time t through so many steps of length h and writes the states after
them to `end`. `params` are the values of the parameters named, in that order; `noise[i*steps*paths
+ k*paths + j]` is functional i of step k on path j. It returns 0, or any other number to say that
it failed. Several threads call it at once.
"""

import ctypes
import sys
from collections.abc import Sequence
from functools import cached_property
from types import FrameType
from typing import Any

import numpy as np

from sdebench.errors import ForeignFailed, UserFileError
from sdebench.foreign import Declared
from sdebench.integrator import Scheme
from sdebench.sde import SDE, Array
from sdebench.whole_path import whole_path
from sdebench.wiener import Noise


def library(
    file: str,
    function: str,
    *,
    params: Sequence[str] = (),
    noise: Sequence[str] = ("dw",),
    name: str | None = None,
    **claims: Any,
) -> Scheme:
    """Return a scheme whose paths are run by a function of a shared library.

    `file`: the library, from the folder of the file that declares the scheme. `function`: its name,
    with the signature above. `params`: parameters of the problem, in the order that it takes them.
    `noise` and `claims` as in `sdebench.scheme`. The library is loaded when it is first used;
    `UserFileError` says if it, or the function, is not there.
    """
    place = sys._getframe(1)  # of the declaration, beside which the library is
    own = Library(function, params, noise, f"{function} of {file}.", place, file)
    key = name or function.replace("_", "-")
    return whole_path(params=params, noise=own.noise, name=key, **claims)(own)


class Library(Declared):
    """A function of a shared library, called as a path."""

    def __init__(
        self,
        name: str,
        params: Sequence[str],
        noise: Sequence[str],
        doc: str,
        place: FrameType,
        library: str,
    ) -> None:
        super().__init__(name, params, noise, doc, place)
        self.library = library

    @cached_property
    def function(self) -> Any:
        """The function, loaded."""
        place = self.placed(self.library)
        if not place.is_file():
            raise UserFileError(f"There is no library '{self.library}' beside '{self.file}'.")
        try:
            found = getattr(ctypes.CDLL(str(place.resolve())), self.__name__)
        except OSError as cause:
            raise UserFileError(f"'{self.library}' cannot be loaded: {cause}.") from None
        except AttributeError:
            raise UserFileError(f"'{self.library}' has no function '{self.__name__}'.") from None
        whole, number, array = ctypes.c_int64, ctypes.c_double, ctypes.c_void_p
        found.argtypes = [whole, whole, number, number, array, array, array, array]
        found.restype = ctypes.c_int
        return found

    def __call__(self, sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
        """Return the states after all steps of the noise; what is not written to is NaN."""
        params, start, drawn = self.sent(sde, x, noise)
        end = np.full(x.shape, np.nan)
        arrays = [each.ctypes.data for each in (params, start, drawn, end)]
        code = self.function(drawn.shape[1], x.size, t, h, *arrays)
        if code != 0:
            raise ForeignFailed(self.__name__, f"returned {code} instead of 0")
        return end
