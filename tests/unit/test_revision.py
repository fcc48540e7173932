"""The revision of the repository in the working directory."""

import subprocess

import pytest

from sdebench.revision import revision


def git(*words):
    identity = ("-c", "user.name=a", "-c", "user.email=a@example.org")
    done = subprocess.run(["git", *identity, *words], check=True, capture_output=True, text=True)
    return done.stdout.strip()


@pytest.fixture
def repository(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    git("init", "-q")
    (tmp_path / "step.py").write_text("one")
    git("add", ".")
    git("commit", "-qm", "one")
    return tmp_path


def test_it_is_the_commit_whatever_its_tags(repository):
    git("tag", "-a", "v1", "-m", "one")
    assert revision() == git("rev-parse", "HEAD")


def test_a_file_that_differs_is_told(repository):
    (repository / "step.py").write_text("two")
    assert revision() == f"{git('rev-parse', 'HEAD')}-dirty"


def test_there_is_none_outside_of_a_repository(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("GIT_CEILING_DIRECTORIES", str(tmp_path.parent))
    assert revision() is None


def test_there_is_none_without_git(repository, monkeypatch):
    monkeypatch.setenv("PATH", str(repository))
    assert revision() is None
