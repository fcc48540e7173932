"""What a project guards: `[tool.sdebench]` in its pyproject.toml, or sdebench.toml."""

import difflib
import tomllib
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any, Literal

import msgspec

from sdebench.discovery import find_functional, find_scheme
from sdebench.errors import BadProject, NoProject
from sdebench.functional import Functional
from sdebench.integrator import ClaimKind, Scheme
from sdebench.problem import Problem
from sdebench.request import chosen_pairs

OWN, SHARED = "sdebench.toml", "pyproject.toml"
TABLE = "tool.sdebench"
BASELINE = "sdebench-baseline.json"
Fraction = Annotated[float, msgspec.Meta(gt=0, lt=1)]
Counted = Annotated[int, msgspec.Meta(ge=1)]
Kinds = Annotated[tuple[Literal["strong", "weak"], ...], msgspec.Meta(min_length=1)]
Names = Annotated[list[str], msgspec.Meta(min_length=1)]


class Guarded(msgspec.Struct, frozen=True, kw_only=True, rename="kebab"):
    """The table: what is measured, how, and what may change.

    `schemes`: names or `file.py:function`, files in the project's folder. `problems`: as after
    --on; every one that a scheme applies to if left out. `allowed_change`: of an error at one step
    size, relative. `looks`: how often each pair is looked at, so that paths can be paired.
    """

    schemes: Names
    problems: Names | None = None
    kinds: Kinds = ("strong", "weak")
    functionals: list[str] = []
    steps: list[Counted] | None = None
    tolerance: Annotated[float, msgspec.Meta(gt=0, lt=0.25)] = 0.1
    confidence: Annotated[float, msgspec.Meta(gt=0.5, lt=1)] = 0.95
    seed: Annotated[int, msgspec.Meta(ge=0)] = 1
    looks: Counted = 1
    allowed_change: Fraction = 0.01
    baseline: str = BASELINE


@dataclass(frozen=True)
class Project:
    """A project's table, the file that it stands in, and the folder that paths in it start from."""

    guarded: Guarded
    file: Path

    @property
    def folder(self) -> Path:
        """The folder that paths in the table are relative to."""
        return self.file.parent

    @property
    def baseline(self) -> Path:
        """The file of the accepted baseline."""
        return self.folder / self.guarded.baseline

    def schemes(self) -> list[Scheme]:
        """Return the schemes, those in files loaded from the project's folder."""
        return [
            replace(find_scheme(self._placed(name)), typed=name if ".py:" in name else None)
            if ".py" in name
            else find_scheme(name)
            for name in self.guarded.schemes
        ]

    def claims(self) -> list[tuple[Scheme, Problem, ClaimKind]]:
        """Return every claim of a guarded kind, with a scheme and a problem it applies to."""
        return [
            (scheme, problem, claim.kind)
            for scheme, problem in chosen_pairs(self.schemes(), self.guarded.problems)
            if problem.suits(scheme)
            for claim in scheme.claims(problem.noise_kind)
            if claim.kind in self.guarded.kinds
        ]

    @property
    def options(self) -> dict[str, Any]:
        """The options of `measure` that the table says."""
        guarded = self.guarded
        return {
            "steps": guarded.steps,
            "functionals": self.functionals(),
            "seed": guarded.seed,
            "confidence": guarded.confidence,
            "tolerance": guarded.tolerance,
            "looks": guarded.looks,
        }

    def functionals(self) -> list[Functional]:
        """Return the further functionals of weak errors."""
        return [
            replace(find_functional(self._placed(name)), name=name)
            for name in self.guarded.functionals
        ]

    def _placed(self, name: str) -> str:
        """Return a name in a file with the file's place, and any other as it is."""
        return str(self.folder / name) if ".py" in name else name


def find_project(start: Path) -> Project:
    """Return the project that a file or a folder belongs to, at it or above it.

    Raises `NoProject` where there is none, `BadProject` where its table cannot be used.
    """
    if start.is_file():
        found = _table(start)
        if found is None:
            raise BadProject(str(start), f"it has no table [{TABLE}]")
        return Project(_checked(found, start), start)
    for folder in (start.resolve(), *start.resolve().parents):
        for name in (OWN, SHARED):
            file = folder / name
            found = _table(file) if file.is_file() else None
            if found is not None:
                return Project(_checked(found, file), file)
    raise NoProject(
        str(start),
        f"neither here nor above is there a {OWN}, or a {SHARED} with a table [{TABLE}]; write "
        'one, with schemes = ["my.py:step"]',
    )


def _table(file: Path) -> dict[str, Any] | None:
    try:
        content = tomllib.loads(file.read_text("utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as cause:
        raise BadProject(str(file), f"it cannot be read as TOML: {cause}") from None
    if file.name != SHARED:
        return content
    tool = content.get("tool", {})
    found = tool.get("sdebench") if isinstance(tool, dict) else None
    if found is not None and not isinstance(found, dict):
        raise BadProject(str(file), f"{TABLE} is no table: write [{TABLE}]")
    return found


def _checked(table: dict[str, Any], file: Path) -> Guarded:
    """Return the table's values; raise `BadProject` with the path of a key that will not do."""
    prefix = f"{TABLE}." if file.name == SHARED else ""
    known = [field.encode_name for field in msgspec.structs.fields(Guarded)]
    for key in table:
        if key not in known:
            near = difflib.get_close_matches(key, known, n=1, cutoff=0.0)
            raise BadProject(str(file), f"there is no key {prefix}{key}; the nearest is {near[0]}")
    try:
        return msgspec.convert(table, Guarded)
    except msgspec.ValidationError as cause:
        what, _, where = str(cause).partition(" - at `$")
        if not where and "missing required field" in what:
            raise BadProject(
                str(file), f'{prefix}schemes is missing: write schemes = ["my.py:step"]'
            ) from None
        path = where.strip("`.").lstrip(".")
        raise BadProject(str(file), f"{prefix}{path}: {_plain(what)}") from None


def _plain(what: str) -> str:
    """Return what is wrong with a value, in the words of the file's format."""
    words = {" | null": "", "`array`": "a list", "`str`": "text", "`float`": "a number"}
    for python, toml in (words | {"`int`": "a whole number", "`null`": "nothing"}).items():
        what = what.replace(python, toml)
    return f"{what[0].lower()}{what[1:]}"
