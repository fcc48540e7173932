"""A process of a program that answers runs, and is ended with all that it has started."""

import io
import os
import select
import signal
import subprocess
import tempfile
import time
from collections.abc import Sequence
from contextlib import suppress
from typing import Any

import numpy as np

from sdebench.errors import ForeignFailed, UserFileError
from sdebench.sde import Array

PIPE = 1 << 20  # bytes that a pipe holds, where the system lets it
CHUNK = 1 << 20  # bytes moved at a time
LAST_LINES = 5  # of standard error, shown with a failure
MAGIC = b"\x93NUMPY"


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


def _widen(pipe: int) -> None:
    """Let a pipe hold more, where the system can."""
    with suppress(ImportError, AttributeError, OSError):
        import fcntl

        fcntl.fcntl(pipe, fcntl.F_SETPIPE_SZ, PIPE)
