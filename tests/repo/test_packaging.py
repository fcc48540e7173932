"""What is in the archives that are shipped, and whether they work."""

import importlib.metadata
import os
import shutil
import subprocess
import sys
import tarfile
import tomllib
import zipfile
from pathlib import Path

import pytest

SHIPPED = ("sdebench", "schemes", "reports")
BUILT_FROM = (
    *SHIPPED,
    "sdebench_pytest.py",
    "tests",
    "README.md",
    "DEVELOPERS.md",
    "LICENSE",
    "pyproject.toml",
)
BACKEND = (
    "import setuptools.build_meta as backend, sys; "
    "place = sys.argv[1]; backend.build_sdist(place); backend.build_wheel(place)"
)


@pytest.fixture(scope="module")
def backend_path(root, tmp_path_factory) -> str:
    """Return a folder with a build backend as new as pyproject.toml asks, '' if it is installed."""
    (wanted,) = tomllib.loads((root / "pyproject.toml").read_text())["build-system"]["requires"]
    name, least = wanted.split(">=")
    try:
        if int(importlib.metadata.version(name).split(".")[0]) >= int(least):
            return ""
    except importlib.metadata.PackageNotFoundError:
        pass
    place = tmp_path_factory.mktemp("backend")
    words = ["install", "--quiet", "--disable-pip-version-check", "--no-deps", "--target"]
    done = subprocess.run(
        [sys.executable, "-m", "pip", *words, place, wanted], capture_output=True, text=True
    )
    if done.returncode:
        pytest.skip(f"{wanted} is neither installed nor to be had: {done.stderr[-200:]}")
    return str(place)


@pytest.fixture(scope="module")
def archives(root, backend_path, tmp_path_factory) -> tuple[Path, Path]:
    """Return the source archive and the wheel, built from a copy of the repository."""
    copy, built = tmp_path_factory.mktemp("copy"), tmp_path_factory.mktemp("built")
    for name in BUILT_FROM:
        if (root / name).is_dir():
            unwanted = shutil.ignore_patterns("__pycache__", "*.egg-info")
            shutil.copytree(root / name, copy / name, ignore=unwanted)
        else:
            shutil.copy(root / name, copy / name)
    done = subprocess.run(
        [sys.executable, "-c", BACKEND, built],
        cwd=copy,
        env=os.environ | {"PYTHONPATH": backend_path},
        capture_output=True,
        text=True,
    )
    assert done.returncode == 0, done.stderr
    (sdist,), (wheel,) = built.glob("*.tar.gz"), built.glob("*.whl")
    return sdist, wheel


@pytest.fixture(scope="module")
def wheel_names(archives) -> set[str]:
    with zipfile.ZipFile(archives[1]) as wheel:
        return set(wheel.namelist())


@pytest.fixture
def unpacked(archives, tmp_path) -> Path:
    """Return a folder with the unpacked wheel, as in site-packages."""
    with zipfile.ZipFile(archives[1]) as wheel:
        wheel.extractall(tmp_path / "site")
    return tmp_path / "site"


@pytest.fixture
def catalogue_of(tmp_path):
    """Return a function that runs `catalogue` on the package in a folder, away from the root."""

    def run(site: Path) -> str:
        done = subprocess.run(
            [sys.executable, "-m", "sdebench", "catalogue"],
            cwd=tmp_path,
            env=os.environ | {"PYTHONPATH": str(site)},
            capture_output=True,
            text=True,
        )
        return done.stdout + done.stderr

    return run


def test_the_wheel_puts_the_package_its_plugin_and_its_description_at_the_top(root, wheel_names):
    version = tomllib.loads((root / "pyproject.toml").read_text())["project"]["version"]
    described = f"sdebench-{version}.dist-info"
    assert {name.split("/")[0] for name in wheel_names} == {
        "sdebench",
        "sdebench_pytest.py",
        described,
    }


def test_the_wheel_holds_exactly_the_modules_of_the_repository(root, wheel_names):
    places = {"sdebench": "sdebench", "schemes": "sdebench/schemes", "reports": "sdebench/reports"}
    wanted = {
        f"{place}/{path.relative_to(root / top).as_posix()}"
        for top, place in places.items()
        for path in (*(root / top).rglob("*.py"), *(root / top).glob("templates/*"))
    }
    assert {n for n in wheel_names if n.startswith("sdebench/")} == wanted | {"sdebench/py.typed"}


def test_the_wheel_holds_the_licence(wheel_names):
    assert any(name.endswith("/LICENSE") for name in wheel_names)


def test_the_wheel_installs_the_command(archives):
    with zipfile.ZipFile(archives[1]) as wheel:
        (name,) = [n for n in wheel.namelist() if n.endswith("entry_points.txt")]
        assert "sdebench = sdebench.cli:main" in wheel.read(name).decode()


def test_the_source_archive_holds_what_the_wheel_is_built_from(root, archives):
    with tarfile.open(archives[0]) as sdist:
        held = {name.partition("/")[2] for name in sdist.getnames()}
    wanted = {
        path.relative_to(root).as_posix() for top in SHIPPED for path in (root / top).rglob("*.py")
    }
    assert wanted | {"README.md", "LICENSE", "pyproject.toml", "sdebench/py.typed"} <= held


def test_the_source_archive_holds_nothing_of_a_working_copy(archives):
    with tarfile.open(archives[0]) as sdist:
        names = sdist.getnames()
    assert [n for n in names if "__pycache__" in n or n.endswith((".pyc", ".json"))] == []


def test_the_packages_are_those_that_are_on_disk(root):
    settings = tomllib.loads((root / "pyproject.toml").read_text())["tool"]["setuptools"]
    folders = {path.parent for top in SHIPPED for path in (root / top).rglob("__init__.py")}
    names = {folder.relative_to(root).as_posix().replace("/", ".") for folder in folders}
    assert set(settings["packages"]) == {
        f"sdebench.{name}" if name in ("schemes", "reports") else name for name in names
    }


def test_the_wheel_works_where_the_repository_is_not(unpacked, catalogue_of):
    assert "\nmilstein " in catalogue_of(unpacked)


def test_a_scheme_is_added_by_adding_its_file(unpacked, catalogue_of):
    folder = unpacked / "sdebench" / "schemes"
    copied = (folder / "euler_maruyama.py").read_text()
    (folder / "your_scheme.py").write_text(copied.replace("def euler_maruyama", "def your_scheme"))
    assert "\nyour-scheme " in catalogue_of(unpacked)


def test_a_copied_scheme_that_keeps_its_name_is_told(unpacked, catalogue_of):
    folder = unpacked / "sdebench" / "schemes"
    shutil.copy(folder / "euler_maruyama.py", folder / "your_scheme.py")
    told = catalogue_of(unpacked)
    assert told.startswith("sdebench: Two schemes are named 'euler-maruyama'")
    assert "sdebench.schemes.your_scheme" in told


def test_a_problem_is_added_by_adding_its_file(unpacked, catalogue_of):
    folder = unpacked / "sdebench" / "problems"
    copied = (folder / "gbm.py").read_text()
    (folder / "your_problem.py").write_text(copied.replace('name="gbm"', 'name="your-problem"'))
    assert "\nyour-problem " in catalogue_of(unpacked)
