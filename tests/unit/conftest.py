"""Pieces that several unit tests build on: small studies, run once, and users' files."""

from pathlib import Path
from textwrap import dedent

import pytest

import sdebench as sb


@pytest.fixture(scope="session")
def supported_evidence() -> sb.Evidence:
    """Evidence that supports both claims of Milstein on geometric Brownian motion."""
    return sb.measure("milstein", on="gbm", looks=1, threads=1)


@pytest.fixture(scope="session")
def sampled_evidence() -> sb.Evidence:
    """The same by sampling alone."""
    return sb.measure("milstein", on="gbm", route="sampled", looks=1, threads=1)


@pytest.fixture(scope="session")
def refuted_evidence() -> sb.Evidence:
    """Evidence that refutes a strong order 1 of a step without Milstein's correction."""

    @sb.scheme(strong=1.0)
    def uncorrected(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw

    return sb.measure(uncorrected, on="gbm", looks=1, threads=1)


@pytest.fixture
def user_file(tmp_path: Path):
    """Return a function that writes a user's Python file and returns its path."""

    def write(text: str, name: str = "mine.py") -> Path:
        path = tmp_path / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(dedent(text))
        return path

    return write
