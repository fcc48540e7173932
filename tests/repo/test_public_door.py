"""The public door: what `import sdebench` offers, and what it costs."""

import inspect
import subprocess
import sys
import types

import pytest

import sdebench

HEAVY = ("scipy", "rich", "matplotlib", "jax", "click", "jsonschema", "hypothesis", "pytest")


def test_all_names_what_the_module_exports():
    exported = {
        name
        for name, value in vars(sdebench).items()
        if not name.startswith("_") and not isinstance(value, types.ModuleType)
    }
    assert set(sdebench.__all__) == exported


def test_all_names_nothing_twice():
    assert len(set(sdebench.__all__)) == len(sdebench.__all__)


def test_all_is_sorted_constants_then_classes_then_functions():
    def key(name: str) -> tuple[bool, bool, str]:
        return not name.isupper(), name[0].islower(), name

    assert sdebench.__all__ == sorted(sdebench.__all__, key=key)


@pytest.mark.parametrize("name", sdebench.__all__)
def test_everything_exported_has_a_docstring(name):
    assert inspect.getdoc(getattr(sdebench, name))


@pytest.mark.parametrize("module", ["sdebench", "sdebench.cli"])
def test_an_import_loads_nothing_heavy(module):
    allowed = {"click"} if module == "sdebench.cli" else set()
    code = f"import {module}, sys; print(*{{name.split('.')[0] for name in sys.modules}})"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    loaded = set(done.stdout.split())
    assert "sdebench" in loaded
    assert loaded & set(HEAVY) == allowed


def test_importing_from_the_door_leaves_the_functions_in_place():
    # `problem` and `scheme` are functions, and `sdebench.problem` a module too: a later import of
    # the module must not put it in the function's place.
    code = (
        "import sdebench.problem, sdebench.study, sdebench as sb; sb.measure; "
        "sb.measure('exact-ou', on='gbm'); print(callable(sb.problem), callable(sb.scheme))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["True", "True"]
