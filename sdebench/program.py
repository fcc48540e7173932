"""Integrators in a program of their own, which reads and writes arrays in the NPY format.

On standard input, for each run: a line of JSON

    {"steps": 64, "paths": 16384, "t": 0.0, "h": 0.015625, "params": {"mu": 0.3}, "noise": ["dw"]}

then an array of float64 of shape (paths,), the states at time t, and one of shape (steps, paths)
for each functional of the noise. On standard output, for each run: an array of float64 of shape
(paths,), the states after all steps. The program reads the whole of a run before it answers, and
ends when its input does. Arrays are read without pickle.

The NPY format: https://numpy.org/doc/stable/reference/generated/numpy.lib.format.html
"""

import atexit
import io
import json
import os
import shutil
import sys
from collections import deque
from collections.abc import Sequence
from types import FrameType
from typing import Any

import numpy as np

from sdebench.errors import UserFileError
from sdebench.foreign import Declared
from sdebench.integrator import Scheme
from sdebench.running import Limit, Running
from sdebench.sde import SDE, Array
from sdebench.whole_path import whole_path
from sdebench.wiener import Noise


def program(
    command: Sequence[str],
    *,
    params: Sequence[str] = (),
    noise: Sequence[str] = ("dw",),
    name: str | None = None,
    seconds: float = 60.0,
    **claims: Any,
) -> Scheme:
    """Return a scheme whose paths are run by a program.

    `command`: the program with its arguments; a file is looked for beside the file that declares
    the scheme. `params`: parameters of the problem that it takes. `seconds` is the time that one
    run may take. `noise` and `claims` as in `sdebench.scheme`. It is started when it is first used,
    once for each thread, and ended with the bench.
    """
    words = [command] if isinstance(command, str) else list(command)
    called = os.path.basename(words[0])
    key = name or called.replace("_", "-")
    place = sys._getframe(1)  # of the declaration, beside which the program is
    own = Program(key, params, noise, f"The program {called}.", place, words, seconds)
    return whole_path(params=params, noise=own.noise, name=key, **claims)(own)


class Program(Declared):
    """A program called as a path: idle processes of it are kept for the next run."""

    def __init__(
        self,
        name: str,
        params: Sequence[str],
        noise: Sequence[str],
        doc: str,
        place: FrameType,
        command: Sequence[str],
        seconds: float,
    ) -> None:
        super().__init__(name, params, noise, doc, place)
        self.command = command
        self.seconds = seconds
        self.idle: deque[Running] = deque()
        atexit.register(self.close)

    def __call__(self, sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
        """Return the states after all steps of the noise."""
        _, start, drawn = self.sent(sde, x, noise)
        head = {
            "steps": drawn.shape[1],
            "paths": x.size,
            "t": t,
            "h": h,
            "params": {name: sde.params[name] for name in self.params},
            "noise": list(self.noise),
        }
        try:
            running = self.idle.pop()
        except IndexError:
            running = Running(self.__name__, self._started())
        parts = [json.dumps(head).encode() + b"\n", *_npy(start)]
        for each in drawn:
            parts += _npy(each)
        try:
            end = running.answer(parts, x.size, Limit(self.seconds))
        except BaseException:
            running.end()
            raise
        self.idle.append(running)
        return end

    def close(self) -> None:
        """End every idle process."""
        while self.idle:
            self.idle.pop().end()

    def _started(self) -> list[str]:
        """Return the command with its program found; raises `UserFileError`."""
        first, *rest = self.command
        place = self.placed(first)
        found = str(place.resolve()) if place.is_file() else shutil.which(first)
        if found is None:
            raise UserFileError(
                f"There is no program '{first}', neither beside '{self.file}' nor on the PATH."
            )
        return [found, *(self._argument(word) for word in rest)]

    def _argument(self, word: str) -> str:
        """Return an argument that names a file beside the declaring one with its place."""
        place = self.file.parent / word
        return str(place.resolve()) if place.is_file() else word


def _npy(values: Array) -> list[bytes | memoryview]:
    """Return an array in the NPY format: its head, and its content where it is."""
    head = io.BytesIO()
    np.lib.format.write_array_header_1_0(head, np.lib.format.header_data_from_array_1_0(values))
    return [head.getvalue(), values.data.cast("B")]
