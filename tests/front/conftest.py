"""How the tests type a command: in this process, in one of its own, and on a terminal."""

import fcntl
import os
import pty
import struct
import subprocess
import sys
import termios
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from sdebench.cli import main

HEAD = '''\
"""A user's file."""

from pathlib import Path

import numpy as np

from sdebench import scheme


def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


'''


@dataclass(frozen=True)
class Outcome:
    """The exit code and what was printed."""

    code: int
    out: str
    err: str


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return an empty folder that is the working directory."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def typed(
    folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> Callable[..., Outcome]:
    """Return a function that runs the command line in this process."""

    def run(*words: str) -> Outcome:
        monkeypatch.setattr(sys, "argv", ["sdebench", *words])
        code: object = 0
        try:
            main()
        except SystemExit as end:
            code = end.code or 0
        out, err = capsys.readouterr()
        assert isinstance(code, int)
        return Outcome(code, out, err)

    return run


@pytest.fixture
def clean_environment() -> dict[str, str]:
    """Return the environment without what changes how terminals are written to."""
    dropped = {"COLUMNS", "LINES", "NO_COLOR", "FORCE_COLOR", "COLORTERM", "TTY_COMPATIBLE"}
    kept = {name: value for name, value in os.environ.items() if name not in dropped}
    return kept | {"TERM": "xterm-256color", "PYTHONDONTWRITEBYTECODE": "1"}


@pytest.fixture
def started(folder: Path, clean_environment: dict[str, str]) -> Callable[..., subprocess.Popen]:
    """Return a function that starts the command line in a process of its own."""

    def start(*words: str, **settings) -> subprocess.Popen:
        settings = {"cwd": folder, "env": clean_environment, "text": True} | settings
        return subprocess.Popen(
            [sys.executable, "-m", "sdebench", *words],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            **settings,
        )

    return start


@pytest.fixture
def in_own_process(started) -> Callable[..., Outcome]:
    """Return a function that runs the command line in a process of its own, to its end."""

    def run(*words: str, **settings) -> Outcome:
        process = started(*words, **settings)
        out, err = process.communicate(timeout=60)
        return Outcome(process.returncode, out, err)

    return run


@pytest.fixture
def on_terminal(folder: Path, clean_environment: dict[str, str]) -> Callable[..., Outcome]:
    """Return a function that runs the command line on a pseudo-terminal so many columns wide.

    Standard output and standard error are one there, as on a screen.
    """

    def run(*words: str, columns: int = 100, **environment: str) -> Outcome:
        screen, terminal = pty.openpty()
        fcntl.ioctl(terminal, termios.TIOCSWINSZ, struct.pack("HHHH", 50, columns, 0, 0))
        process = subprocess.Popen(
            [sys.executable, "-m", "sdebench", *words],
            cwd=folder,
            env=clean_environment | environment,
            stdin=terminal,
            stdout=terminal,
            stderr=terminal,
        )
        os.close(terminal)
        shown = b""
        while piece := _read(screen):
            shown += piece
        os.close(screen)
        return Outcome(process.wait(timeout=60), shown.decode(), "")

    return run


def _read(screen: int) -> bytes:
    try:
        return os.read(screen, 65536)
    except OSError:  # how Linux says that the last writer is gone
        return b""


@pytest.fixture
def write(folder: Path) -> Callable[..., Path]:
    """Return a function that writes a user's file, after the usual imports and an Euler step."""

    def file(body: str, name: str = "my.py") -> Path:
        path = folder / name
        path.write_text(HEAD + body)
        return path

    return file


@pytest.fixture
def traced(write) -> str:
    """Return a scheme, as typed, that leaves the file `called` behind once it is called."""
    write(
        "@scheme(strong=0.5, strong_additive=1.0, weak=1.0)\n"
        "def traced(sde, t, x, h, noise):\n"
        "    Path(__file__).with_name('called').touch()\n"
        "    return euler(sde, t, x, h, noise)\n",
        "trace.py",
    )
    return "trace.py:traced"
