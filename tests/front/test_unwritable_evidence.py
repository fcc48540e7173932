"""A file that cannot be written is told before anything is measured, and nothing is harmed."""

import os
import stat

import pytest

ONCE = ("--looks", "1", "--threads", "1")


@pytest.fixture
def refused(typed, traced, folder):
    """Return a function that measures into `path` and asserts that this was refused at once."""

    def run(path: str) -> str:
        outcome = typed("measure", traced, "--on", "gbm", *ONCE, "--save", path)
        assert outcome.code == 2
        assert outcome.out == ""
        assert outcome.err.startswith("sdebench: Cannot write")
        assert outcome.err.count("\n") == 1
        assert not (folder / "called").exists()
        return outcome.err

    return run


def test_a_missing_folder_is_told_before_anything_is_measured(refused):
    assert "'absent/evidence.json'" in refused("absent/evidence.json")


def test_a_directory_is_told_before_anything_is_measured(refused, folder):
    (folder / "place").mkdir()
    assert "it is a directory" in refused("place")


def test_an_empty_name_is_told_before_anything_is_measured(refused):
    refused("")


def test_a_folder_that_is_a_file_is_told_before_anything_is_measured(refused, folder):
    (folder / "note.txt").touch()
    assert "Not a directory" in refused("note.txt/evidence.json")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write into a read-only folder")
def test_a_read_only_folder_is_told_before_anything_is_measured(refused, folder):
    (folder / "kept").mkdir(mode=0o555)
    refused("kept/evidence.json")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write a read-only file")
def test_a_read_only_file_is_told_before_anything_is_measured(refused, folder):
    (folder / "old.json").touch(mode=0o444)
    refused("old.json")


def test_a_name_too_long_is_told_before_anything_is_measured(refused):
    refused("e" * 300 + ".json")


def test_a_special_file_is_never_replaced(typed, folder):
    # As root the same would replace a device by a regular file.
    os.mkfifo(folder / "pipe")
    words = ("--on", "ou", *ONCE, "--steps", "4,8,16", "--save", "pipe")
    outcome = typed("measure", "euler-maruyama", *words)
    assert stat.S_ISFIFO((folder / "pipe").stat().st_mode)
    assert outcome.code == 2


def test_evidence_is_written_where_a_link_points_and_the_link_is_kept(typed, folder):
    (folder / "archive").mkdir()
    (folder / "latest.json").symlink_to("archive/evidence.json")
    words = ("--on", "ou", *ONCE, "--steps", "4,8,16", "--save", "latest.json")
    typed("measure", "euler-maruyama", *words)
    assert (folder / "latest.json").is_symlink()
    assert (folder / "archive" / "evidence.json").exists()


def test_a_refused_file_leaves_nothing_behind(refused, folder):
    (folder / "place").mkdir()
    refused("place")
    assert sorted(p.name for p in folder.iterdir() if p.name != "__pycache__") == [
        "place",
        "trace.py",
    ]
