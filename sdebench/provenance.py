"""How evidence was made: what was asked, by which versions and files, and how to repeat it."""

import hashlib
import inspect
import platform
import shlex
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Literal

import numpy as np

from sdebench import discovery
from sdebench.evidence import Provenance, Result
from sdebench.foreign import Declared
from sdebench.functional import STANDARD
from sdebench.integrator import Scheme
from sdebench.revision import revision
from sdebench.sample import Plan, stream_digest

Route = Literal["propagated", "sampled"]
ROUTES: tuple[Route, ...] = ("propagated", "sampled")


@dataclass(frozen=True)
class Wanted:
    """What was left open when a study was asked for, and the route if one was asked for."""

    every_scheme: bool
    every_problem: bool
    own_steps: bool
    route: Route | None


@dataclass(frozen=True)
class Asked:
    """A study as it was asked for; the files of its schemes are read when it is made."""

    plans: Sequence[Plan]
    wanted: Wanted
    seed: int
    confidence: float
    tolerance: float
    looks: int | None
    budget: float | None
    files: dict[str, str] = field(init=False)

    def __post_init__(self) -> None:
        """Take the digests of the users' files as they are now, just loaded."""
        object.__setattr__(self, "files", _digests(self.plans))

    def provenance(
        self, rows: Sequence[Result], rounds: int, threads: int, seconds: float
    ) -> Provenance:
        """Return the provenance of the rows, which took so many rounds of looks."""
        from importlib.metadata import version  # heavy, and needed at the end of a study only

        global_errors = [row for row in rows if row.route in ROUTES]
        return Provenance(
            sdebench=version("sdebench"),
            numpy=np.__version__,
            python=platform.python_version(),
            platform=platform.platform(),
            created=datetime.now(UTC).isoformat(timespec="seconds"),
            command=self._command(rounds),
            seed=self.seed,
            confidence=self.confidence,
            tolerance=self.tolerance,
            steps=sorted({rung.steps for row in global_errors for rung in row.rungs}),
            looks=rounds,
            budget=self.budget,
            threads=threads,
            seconds=seconds,
            revision=revision(),
            files=self.files,
            stream=stream_digest(self.seed),
        )

    def _command(self, rounds: int) -> str:
        """Return the command that repeats a run to the bit: a budget is replaced by its rounds."""
        wanted = self.wanted
        words = ["sdebench", "measure"]
        if not wanted.every_scheme:
            words += dict.fromkeys(_typed(plan.scheme) for plan in self.plans)
        if not wanted.every_problem:
            for label in dict.fromkeys(plan.problem.label for plan in self.plans):
                words += ["--on", label]
        for plan in self.plans[:1]:  # all are alike in these, and there may be none
            if not wanted.own_steps:
                words += ["--steps", ",".join(map(str, plan.ladder.steps))]
            for functional in plan.functionals[len(STANDARD) :]:
                words += ["--functional", functional.name]
            words += ["--grid-maximum"] if plan.grid_maximum else []
        words += ["--route", wanted.route] if wanted.route is not None else []
        words += ["--seed", str(self.seed)]
        words += ["--confidence", f"{self.confidence!r}", "--tolerance", f"{self.tolerance!r}"]
        if self.looks is not None or self.budget is not None:
            words += ["--looks", str(rounds)]
        return shlex.join(words)


def _typed(scheme: Scheme) -> str:
    """Return what to type for a scheme; one that was passed as an object is named by its file."""
    if scheme.typed is not None or discovery.schemes().get(scheme.name) is scheme:
        return scheme.label
    try:
        return f"{inspect.getfile(inspect.unwrap(scheme.step))}:{scheme.step.__name__}"
    except (TypeError, AttributeError):
        return scheme.label


def _digests(plans: Sequence[Plan]) -> dict[str, str]:
    """Return the SHA-256 of every user's file that a scheme or a functional was loaded from."""
    own = set(discovery.schemes().values())
    schemes = {plan.scheme.label: plan.scheme for plan in plans if plan.scheme not in own}
    functions: dict[str, Callable[..., object]] = {k: s.step for k, s in schemes.items()}
    functions |= {f.name: f.function for plan in plans for f in plan.functionals[len(STANDARD) :]}
    return dict(_found(functions.items()))


def _file(function: Callable[..., object]) -> str:
    """Return the file that a function was loaded from, or an integrator was declared in."""
    inner = inspect.unwrap(function)
    return str(inner.file) if isinstance(inner, Declared) else inspect.getfile(inner)


def _found(functions: Iterable[tuple[str, Callable[..., object]]]) -> Iterable[tuple[str, str]]:
    for label, function in functions:
        try:
            file = Path(_file(function))
            digest = hashlib.sha256(file.read_bytes()).hexdigest()
        except (TypeError, OSError):  # of no file: a built-in, or typed at a prompt
            continue
        yield (label.rpartition(":")[0] if ".py:" in label else file.name), digest
