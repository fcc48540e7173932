"""Where schemes, problems and functionals come from; content is named by string, when asked for.

A scheme is any module-level `Scheme` (what the decorator makes): in a module of `sdebench.schemes`,
in an object or a module that an installed package names under the entry-point group
`sdebench.schemes`, or in a user's file `my.py:function`. All three are collected by one function.
What an installed package offers and cannot be had is told, and the others go on.
"""

import hashlib
import importlib
import importlib.util
import os
import pkgutil
import sys
from collections.abc import Callable, Iterable
from dataclasses import replace
from functools import lru_cache
from pathlib import Path
from types import ModuleType
from typing import TYPE_CHECKING, Any, TypeVar

from sdebench.blame import users_frames
from sdebench.errors import SdebenchError, UnknownName, UserCodeRaised, UserFileError
from sdebench.functional import STANDARD, Functional
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.registry import Registry
from sdebench.sde import Array

if TYPE_CHECKING:
    from importlib.metadata import EntryPoint

SCHEMES = "sdebench.schemes"
PROBLEMS = "sdebench.problems"
Kind = TypeVar("Kind", Scheme, Problem)


@lru_cache(maxsize=1)
def schemes() -> Registry[Scheme]:
    """Return every registered scheme: those of the bench, then those of installed packages."""
    from importlib.metadata import entry_points  # heavy, and not needed to define a scheme

    registry: Registry[Scheme] = Registry("scheme", "sdebench catalogue")
    for module in _modules(SCHEMES):
        for scheme in collect(module, Scheme):
            registry.add(scheme, module.__name__)
    for point in entry_points(group=SCHEMES):
        try:
            for scheme in _offered(point):
                registry.add(scheme, point.value)
        except SdebenchError as fault:
            registry.faults.append(str(fault))
    return registry


def _offered(point: "EntryPoint") -> list[Scheme]:
    """Return what an installed package offers: one scheme, or all of a module."""
    place = f"The entry point '{point.name}' ({point.value})"
    try:
        loaded = point.load()
    except (Exception, SystemExit) as cause:
        raise UserFileError(
            f"{place} cannot be loaded: {type(cause).__name__}: {cause}."
        ) from cause
    if isinstance(loaded, ModuleType):
        return collect(loaded, Scheme, own=False)
    if not isinstance(loaded, Scheme):
        raise UserFileError(
            f"{place} is no scheme: write @scheme(strong=..., weak=...) above the function."
        )
    return [loaded]


@lru_cache(maxsize=1)
def problems() -> Registry[Problem]:
    """Return every problem of the bench."""
    registry: Registry[Problem] = Registry("problem", "sdebench catalogue")
    for module in _modules(PROBLEMS):
        for problem in collect(module, Problem):
            registry.add(problem, module.__name__)
    return registry


def collect(module: ModuleType, kind: type[Kind], own: bool = True) -> list[Kind]:
    """Return the things of a kind in a module, in its order; only its `own` or also imported."""
    found = [value for value in vars(module).values() if isinstance(value, kind)]
    if not own:
        return found
    return [each for each in found if getattr(each, "module", module.__name__) == module.__name__]


def find_scheme(given: str | Scheme) -> Scheme:
    """Return a scheme from a registered name, from `file.py:function`, or as it is given."""
    if isinstance(given, Scheme):
        return given
    if not isinstance(given, str) and not callable(given):
        raise UserFileError(f"{given!r} is no scheme: give a name, file.py:function, or a scheme.")
    if not isinstance(given, str):
        raise UserFileError(
            f"{getattr(given, '__name__', 'This function')} claims no order: write "
            "@scheme(strong=..., weak=...) above it."
        )
    if _is_file(given):
        return replace(_scheme_in_file(given), typed=given)
    stem, colon, name = given.rpartition(":")
    if colon:
        raise UserFileError(f"'{given}' names no file: write '{stem}.py:{name}'.")
    return schemes()[given]


def find_problem(given: str | Problem, **parameters: float) -> Problem:
    """Return a problem from `name` or `name:parameter=value,…`, with further `parameters` set.

    Raises `UnknownName` for an unknown problem or parameter, `BadParameter` for a value that does
    not do.

    >>> find_problem("gbm", mu=1.5).label
    'gbm:mu=1.5'
    """
    if isinstance(given, Problem):
        return given.with_parameters(parameters) if parameters else given
    if not isinstance(given, str):
        raise UserFileError(f"{given!r} is no problem: give a name, such as 'gbm:mu=1.5'.")
    name, _, settings = given.partition(":")
    found = problems()[name]
    values: dict[str, object] = {}
    for setting in filter(None, settings.split(",")):
        key, equals, value = setting.partition("=")
        if not equals or not value.strip():
            raise UserFileError(f"'{setting}' in '{given}' sets nothing: write parameter=value.")
        if key.strip() in values:
            raise UserFileError(f"'{given}' sets {key.strip()} twice.")
        values[key.strip()] = value.strip()
    if values or not parameters:
        found = found.with_parameters(values, typed=given)
    return found.with_parameters(parameters) if parameters else found


def find_functional(given: str | Functional | Callable[[Array], Array]) -> Functional:
    """Return a functional from a standard name, `file.py:function`, or as it is given."""
    if isinstance(given, Functional):
        return given
    if callable(given):
        return Functional(getattr(given, "__name__", "functional").replace("_", "-"), given)
    standard = {f.name: f for f in STANDARD}
    if given in standard:
        return standard[given]
    if not _is_file(given):
        raise UnknownName("functional", given, standard)
    path, _, name = given.rpartition(":")
    function = _attribute(load_file(path), path, name, "function", callable)
    if isinstance(function, Functional):
        return replace(function, name=given)
    return Functional(given, function)


def _is_file(given: str) -> bool:
    return given.endswith(".py") or ".py:" in given


def _scheme_in_file(given: str) -> Scheme:
    path, colon, name = given.rpartition(":")
    if not colon:
        found = [s.name for s in collect(load_file(given), Scheme)]
        known = f" It defines: {', '.join(found)}." if found else ""
        raise UserFileError(f"'{given}' names no function: write '{given}:function'.{known}")
    value = _attribute(load_file(path), path, name, "function", callable)
    if not isinstance(value, Scheme):
        raise UserFileError(
            f"'{name}' in '{path}' is not a scheme: write @scheme(strong=..., weak=...) above it "
            "(from sdebench import scheme)."
        )
    return value


def _attribute(
    module: ModuleType, path: str, name: str, what: str, wanted: Callable[[object], bool]
) -> Any:
    value = getattr(module, name, None)
    if value is None or not wanted(value):
        own = [n for n, v in vars(module).items() if wanted(v) and _is_own(v, module)]
        hint = f" It has: {', '.join(own)}." if own else ""
        raise UnknownName(f"{what} in '{path}'", name, own, hint)
    return value


def _is_own(value: object, module: ModuleType) -> bool:
    defined = getattr(value, "module", None) or getattr(value, "__module__", None)
    return defined == module.__name__


def load_file(path: str) -> ModuleType:
    """Import a user's Python file and return its module; raises `UserFileError`.

    Its folder is importable while it loads, as for a script.
    """
    file = Path(path)
    if not file.is_file():
        raise UserFileError(f"There is no file '{path}'.")
    name = f"sdebench_user_{hashlib.sha256(str(file.resolve()).encode()).hexdigest()[:12]}"
    spec = importlib.util.spec_from_file_location(name, file)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    folder = str(file.resolve().parent)
    before = set(sys.modules)
    sys.path.insert(0, folder)
    sys.modules[name] = module
    try:
        spec.loader.exec_module(module)
    except SyntaxError as cause:
        line = f", line {cause.lineno}: {(cause.text or '').strip()}" if cause.lineno else ""
        where = path if cause.filename in (None, str(module.__file__)) else cause.filename
        raise UserFileError(f"'{where}' does not parse: {cause.msg}{line}.") from None
    except SdebenchError as fault:
        raise UserFileError(f"'{path}': {fault}") from fault
    except (Exception, SystemExit) as cause:
        frames = users_frames(cause, str(module.__file__))
        raise UserCodeRaised(f"'{path}'", "when loaded", cause, frames) from cause
    finally:
        sys.path.remove(folder)
        # Another file's sibling of the same name must not be given this one's.
        for key in set(sys.modules) - before - {name}:
            if str(getattr(sys.modules[key], "__file__", None)).startswith(folder + os.sep):
                del sys.modules[key]
    return module


def _modules(package: str) -> Iterable[ModuleType]:
    found = importlib.import_module(package)
    for info in pkgutil.iter_modules(found.__path__):
        yield importlib.import_module(f"{package}.{info.name}")
