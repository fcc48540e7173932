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
import select
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections import deque
from collections.abc import Sequence
from contextlib import suppress
from types import FrameType
from typing import Any

import numpy as np

from sdebench.errors import ForeignFailed, UserFileError
from sdebench.foreign import Declared
from sdebench.integrator import Scheme
from sdebench.sde import SDE, Array
from sdebench.whole_path import whole_path
from sdebench.wiener import Noise

PIPE = 1 << 20  # bytes that a pipe holds, where the system lets it
CHUNK = 1 << 20  # bytes moved at a time
LAST_LINES = 5  # of standard error, shown with a failure
MAGIC = b"\x93NUMPY"


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


class Limit:
    """The time that one run may take, from now on."""

    def __init__(self, seconds: float) -> None:
        self.seconds = seconds
        self.end = time.monotonic() + seconds

    @property
    def left(self) -> float:
        """The seconds that are left, at least 0."""
        return max(self.end - time.monotonic(), 0.0)


class Running:
    """A process of a program, alone in its group so that its children end with it."""

    def __init__(self, name: str, command: Sequence[str]) -> None:
        self.name = name
        self.errors = tempfile.TemporaryFile()  # noqa: SIM115  open as long as the process
        try:
            self.process = subprocess.Popen(
                command,
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                stderr=self.errors,
                start_new_session=True,
            )
        except OSError as cause:
            self.errors.close()
            raise UserFileError(f"'{command[0]}' cannot be started: {cause.strerror}.") from None
        assert self.process.stdin is not None
        assert self.process.stdout is not None
        self.to, self.back = self.process.stdin.fileno(), self.process.stdout.fileno()
        os.set_blocking(self.to, False)
        _widen(self.to)
        _widen(self.back)

    def answer(self, parts: Sequence[bytes | memoryview], n_paths: int, limit: Limit) -> Array:
        """Send a run and return its end states; raises `ForeignFailed`."""
        self._send(parts, limit)
        head = self._read(len(MAGIC) + 2, limit, begins=MAGIC)
        size = 2 if head[-2] == 1 else 4
        length = self._read(size, limit)
        described = self._read(int.from_bytes(length, "little"), limit)
        shape, kind = self._described(head[-2], bytes(length + described))
        if shape != (n_paths,) or kind != np.float64:
            raise self._failed(
                f"answered an array of {kind} of shape {shape}, not of float64 of ({n_paths},)"
            )
        content = self._read(n_paths * kind.itemsize, limit)
        end: Array = np.frombuffer(content, dtype=kind)
        return end

    def _described(self, version: int, text: bytes) -> tuple[tuple[int, ...], "np.dtype[Any]"]:
        read = np.lib.format
        header = read.read_array_header_1_0 if version == 1 else read.read_array_header_2_0
        try:
            shape, _, kind = header(io.BytesIO(text))
        except ValueError as cause:
            raise self._failed(f"answered an array that cannot be read: {cause}") from None
        return shape, kind

    def _send(self, parts: Sequence[bytes | memoryview], limit: Limit) -> None:
        for part in parts:
            left = memoryview(part).cast("B")
            while left:
                self._wait(self.to, select.POLLOUT, limit)
                try:
                    left = left[os.write(self.to, left[:CHUNK]) :]
                except BlockingIOError:
                    continue
                except BrokenPipeError:
                    raise self._failed(self._how_it_ended()) from None

    def _read(self, size: int, limit: Limit, begins: bytes = b"") -> bytearray:
        """Return so many bytes, of which the first must be as given."""
        found = bytearray(size)
        left = memoryview(found)
        while left:
            self._wait(self.back, select.POLLIN, limit)
            n = os.readv(self.back, [left[:CHUNK]])
            if n == 0:
                told = f"{size - len(left)} of {size} bytes of its answer"
                raise self._failed(f"{self._how_it_ended()} after {told}")
            left = left[n:]
            if begins:
                seen = bytes(found[: size - len(left)])
                if seen[: len(begins)] != begins[: len(seen)]:
                    raise self._failed(f"answered {seen!r}, which begins no array in NPY format")
        return found

    def _wait(self, pipe: int, event: int, limit: Limit) -> None:
        poll = select.poll()
        poll.register(pipe, event)
        if not poll.poll(1000 * limit.left):
            raise self._failed(f"has not answered within {limit.seconds:g} s and was ended")

    def _how_it_ended(self) -> str:
        try:
            code = self.process.wait(timeout=1.0)
        except subprocess.TimeoutExpired:
            return "closed its standard input or output"
        return f"was ended by signal {-code}" if code < 0 else f"ended with exit code {code}"

    def _failed(self, what: str) -> ForeignFailed:
        self.end()
        self.errors.seek(0)
        lines = self.errors.read().decode(errors="replace").splitlines()
        return ForeignFailed(self.name, what, lines[-LAST_LINES:])

    def end(self) -> None:
        """End the process and all it has started; nothing of it is left."""
        for stream in (self.process.stdin, self.process.stdout):
            with suppress(OSError):
                if stream is not None:
                    stream.close()
        with suppress(OSError):
            os.killpg(self.process.pid, signal.SIGKILL)
        self.process.wait()


def _npy(values: Array) -> list[bytes | memoryview]:
    """Return an array in the NPY format: its head, and its content where it is."""
    head = io.BytesIO()
    np.lib.format.write_array_header_1_0(head, np.lib.format.header_data_from_array_1_0(values))
    return [head.getvalue(), values.data.cast("B")]


def _widen(pipe: int) -> None:
    """Let a pipe hold more, where the system can."""
    with suppress(ImportError, AttributeError, OSError):
        import fcntl

        fcntl.fcntl(pipe, fcntl.F_SETPIPE_SZ, PIPE)
