"""Where the repository is, and what its files hold."""

import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """Give tests every installed Python file as `source`, every scheme and problem as `content`."""
    tops = {
        "source": ("sdebench", "schemes", "reports"),
        "content": ("schemes", "sdebench/problems"),
    }
    for name, folders in tops.items():
        if name in metafunc.fixturenames:
            found = [path for folder in folders for path in sorted((ROOT / folder).rglob("*.py"))]
            metafunc.parametrize(name, found, ids=[p.relative_to(ROOT).as_posix() for p in found])


@pytest.fixture(scope="session")
def root() -> Path:
    """Return the root of the repository."""
    return ROOT


@pytest.fixture(scope="session")
def kept_files(root: Path) -> list[Path]:
    """Return every file that version control keeps or would keep."""
    if not (root / ".git").exists():
        pytest.skip("this is no checkout: there is no list of the files that are kept")
    listed = subprocess.run(
        ["git", "ls-files", "--cached", "--others", "--exclude-standard", "-z"],
        cwd=root,
        capture_output=True,
        text=True,
        check=True,
    )
    paths = [root / name for name in listed.stdout.split("\0") if name]
    return [path for path in paths if path.is_file()]
