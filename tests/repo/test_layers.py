"""The layers of DEVELOPERS.md, held against every import statement."""

import ast
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
CONTENT = ("schemes/*", "problems/*")


def read_layers(text: str) -> list[list[str]]:
    """Return the rows of the block after `<!-- layers -->`, top to bottom, as written."""
    block = re.search(r"<!-- layers -->\n```\n(.*?)```", text, re.DOTALL)
    assert block is not None
    return [re.split(r"\s{2,}", line, maxsplit=1)[1].split() for line in block[1].splitlines()]


def entry_of(path: Path, root: Path = ROOT) -> str:
    """Return how the block names a file: `study`, `reports/numbers`, `schemes/*`."""
    name = str(path.relative_to(root).with_suffix("")).removeprefix("sdebench/")
    folder, _, _ = name.rpartition("/")
    return f"{folder}/*" if f"{folder}/*" in CONTENT else name


def imported_entries(path: Path, source: str, root: Path = ROOT) -> set[str]:
    """Return how the block names each module of ours that a file imports, at any depth of it."""
    found = set()
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: an import without its full name"
            names = [f"{node.module}.{alias.name}" for alias in node.names]
        else:
            continue
        found |= {_file_of(n, root) for n in names if n.split(".")[0] == "sdebench"}
    return {entry_of(path, root) for path in found}


def _file_of(name: str, root: Path) -> Path:
    """Return the file of a module, or of the module that a name in it is imported from."""
    folders = {"schemes": root / "schemes", "reports": root / "reports"}
    _, *parts = name.split(".")
    base = folders.get(parts[0], root / "sdebench" / parts[0]) if parts else root / "sdebench"
    path = base.joinpath(*parts[1:])
    if path.with_suffix(".py").is_file():
        return path.with_suffix(".py")
    return path / "__init__.py" if path.is_dir() else _file_of(name.rpartition(".")[0], root)


def violation(layers: list[list[str]], importer: str, imported: str) -> str | None:
    """Return what is wrong with an import, or None if it keeps to the rule."""
    places = {name: (r, c) for r, row in enumerate(layers) for c, name in enumerate(row)}
    if importer not in places or imported not in places:
        return f"{importer} or {imported} is not in the block"
    if importer in CONTENT and imported != "__init__":
        return f"{importer} imports {imported}, not the public door"
    (row, column), (below, left) = places[importer], places[imported]
    if below > row or (below == row and left < column):
        return None
    return f"{importer} imports {imported}, which is not below it nor to its left"


@pytest.fixture(scope="module")
def layers() -> list[list[str]]:
    return read_layers((ROOT / "DEVELOPERS.md").read_text())


def test_every_import_goes_down_or_to_the_left(source, layers):
    found = imported_entries(source, source.read_text())
    wrong = {violation(layers, entry_of(source), each) for each in found} - {None}
    assert wrong == set()


def test_every_module_stands_in_the_block_once(layers):
    files = [p for top in ("sdebench", "schemes", "reports") for p in (ROOT / top).rglob("*.py")]
    packages = {"schemes/__init__", "problems/__init__", "reports/__init__"}
    named = {
        entry
        for path in files
        if (entry := entry_of(path)) not in CONTENT and path.relative_to(ROOT).as_posix()
    } - packages
    listed = [name for row in layers for name in row]
    assert sorted([*named, *CONTENT]) == sorted(listed)


@pytest.mark.parametrize("package", ["schemes", "reports", "sdebench/problems"])
def test_the_packages_of_many_hold_a_docstring_and_nothing_else(package):
    (only,) = ast.parse((ROOT / package / "__init__.py").read_text()).body
    assert isinstance(only, ast.Expr)


SMALL = [
    ["cli"],
    ["reports/numbers", "reports/tables"],
    [*CONTENT],
    ["__init__"],
    ["study"],
    ["sde"],
]


@pytest.mark.parametrize(
    ("importer", "imported"),
    [
        ("cli", "reports/tables"),
        ("cli", "sde"),
        ("reports/tables", "reports/numbers"),
        ("study", "sde"),
        ("schemes/*", "__init__"),
        ("problems/*", "__init__"),
    ],
)
def test_the_rule_allows_down_and_left(importer, imported):
    assert violation(SMALL, importer, imported) is None


@pytest.mark.parametrize(
    ("importer", "imported"),
    [
        ("sde", "study"),
        ("study", "__init__"),
        ("study", "schemes/*"),
        ("reports/numbers", "reports/tables"),
        ("reports/numbers", "reports/numbers"),
        ("schemes/*", "sde"),
        ("schemes/*", "schemes/*"),
        ("problems/*", "schemes/*"),
        ("schemes/*", "problems/*"),
        ("unlisted", "sde"),
        ("cli", "unlisted"),
    ],
)
def test_the_rule_forbids_all_else(importer, imported):
    assert violation(SMALL, importer, imported) is not None


@pytest.mark.parametrize(
    ("statement", "entry"),
    [
        ("import sdebench", "__init__"),
        ("from sdebench import scheme", "__init__"),
        ("from sdebench import discovery", "discovery"),
        ("import sdebench.sde", "sde"),
        ("from sdebench.sde import SDE", "sde"),
        ("def f():\n    from sdebench.study import measure", "study"),
        ("from sdebench.reports import terminal", "reports/terminal"),
        ("from sdebench.reports.tables import Table", "reports/tables"),
        ("from sdebench.schemes.milstein import milstein", "schemes/*"),
        ("from sdebench.problems import gbm", "problems/*"),
    ],
)
def test_every_form_of_import_is_seen(statement, entry):
    assert imported_entries(ROOT / "sdebench" / "x.py", statement) == {entry}
