"""What integrators in other languages share: where they are declared, what they are sent."""

from collections.abc import Sequence
from pathlib import Path
from types import FrameType

import numpy as np

from sdebench.sde import SDE, Array
from sdebench.wiener import Noise


class Declared:
    """An integrator of another language: its name, where it is declared, what it is sent."""

    def __init__(
        self, name: str, params: Sequence[str], noise: Sequence[str], doc: str, place: FrameType
    ) -> None:
        self.__name__ = name
        self.__module__ = str(place.f_globals.get("__name__", ""))
        self.__doc__ = doc
        self.params = tuple(params)
        self.noise = (noise,) if isinstance(noise, str) else tuple(noise)
        self.file = Path(place.f_code.co_filename)

    def placed(self, name: str) -> Path:
        """Return a file beside the one that declares the integrator, or from the working folder."""
        beside = self.file.parent / name
        return beside if beside.exists() else Path(name)

    def sent(self, sde: SDE, x: Array, noise: Noise) -> tuple[Array, Array, Array]:
        """Return parameters, states and noise `(functionals, steps, paths)` as plain arrays."""
        values = np.array([sde.params[name] for name in self.params], dtype=np.float64)
        drawn = np.stack([vars(noise)[name] for name in self.noise])
        return values, np.ascontiguousarray(x), np.ascontiguousarray(drawn)
