"""The house rules on files: docstrings, sizes, standing alone, nothing of one machine."""

import ast
import re
import tomllib

import pytest

MAX_LINES = 300
FORMULAE = ("drift", "diffusion", "diffusion_dx", "flow", "law")  # told by the module's docstring
LOCAL = re.compile(r"(?<![\w.<:/])/(?:home|root|Users|work|mnt)/\w|\.\./shared|\bfile:///")


def test_a_module_has_a_docstring(source):
    assert ast.get_docstring(ast.parse(source.read_text()))


def test_every_public_class_and_function_has_a_docstring(source):
    tree = ast.parse(source.read_text())
    owners = [tree, *(n for n in tree.body if isinstance(n, ast.ClassDef))]
    kinds = ast.ClassDef | ast.FunctionDef | ast.AsyncFunctionDef
    bare = [
        node.name
        for owner in owners
        if not getattr(owner, "name", "").startswith("_")
        for node in owner.body
        if isinstance(node, kinds)
        and not node.name.startswith("_")
        and ast.get_docstring(node) is None
    ]
    if source.parent.name == "problems":
        bare = [name for name in bare if name not in FORMULAE]
    assert bare == []


def test_a_file_is_no_longer_than_one_can_keep_in_mind(source):
    assert len(source.read_text().splitlines()) <= MAX_LINES


def test_content_imports_the_public_door_numpy_and_math_only(content):
    imported = set()
    for node in ast.walk(ast.parse(content.read_text())):
        if isinstance(node, ast.Import):
            imported |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            imported.add(node.module or ".")
    assert imported <= {"sdebench", "numpy", "math"}


@pytest.mark.parametrize("name", ["schemes", "reports"])
def test_the_mapped_packages_are_not_on_disk(root, name):
    assert not (root / "sdebench" / name).exists()


def test_no_file_names_a_path_of_one_machine(kept_files):
    found = [
        f"{path}: {match[0]}"
        for path in kept_files
        for match in LOCAL.finditer(path.read_text(errors="replace"))
    ]
    assert found == []


@pytest.mark.parametrize("text", ["/" + "home/me/x", "see .." + "/shared/x", "'/" + "work/x'"])
def test_a_path_of_one_machine_would_be_found(text):
    assert LOCAL.search(text)


def test_developers_lists_exactly_the_dependencies(root):
    project = tomllib.loads((root / "pyproject.toml").read_text())["project"]
    extras = [each for group in project["optional-dependencies"].values() for each in group]
    declared = {re.split(r"[<>=~\[ ]", each)[0] for each in (*project["dependencies"], *extras)}
    table = _table((root / "DEVELOPERS.md").read_text(), "package")
    listed = [name for row in table for name in row[0].split(", ")]
    assert sorted(listed) == sorted(declared - {project["name"]})


def test_every_folder_of_tests_is_in_the_table_of_where_a_test_goes(root):
    folders = {p.name for p in (root / "tests").iterdir() if p.is_dir() and p.name[0] not in "._"}
    listed = {
        row[0].strip("`/") for row in _table((root / "tests/README.md").read_text(), "folder")
    }
    assert folders == listed


def _table(text: str, heading: str) -> list[list[str]]:
    """Return the rows of the Markdown table whose first heading this is."""
    lines = iter(text.splitlines())
    for line in lines:
        if line.startswith(f"| {heading} |"):
            next(lines)
            break
    rows = []
    for line in lines:
        if not line.startswith("|"):
            break
        rows.append([cell.strip() for cell in line.strip("|").split("|")])
    assert rows
    return rows
