"""The folder of a report: only ours is written into, and whole."""

import os

import pytest
from sdebench.reports.folder import MARKER, check_folder, put

import sdebench as sb

FILES = {"tables/a.csv": b"1", "report.html": b"page"}


def names(folder):
    return {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()} - {MARKER}


@pytest.mark.parametrize("kind", ["new", "empty", "nested"])
def test_files_are_put_into_a_folder_that_is_new_or_empty(tmp_path, kind):
    folder = tmp_path / ("a/b/c" if kind == "nested" else "out")
    if kind == "empty":
        folder.mkdir()
    check_folder(folder)
    put(folder, FILES)
    assert names(folder) == set(FILES)
    assert (folder / "report.html").read_bytes() == b"page"


def test_an_earlier_report_is_replaced_and_what_is_left_of_it_goes(tmp_path):
    put(tmp_path, FILES | {"figures/old.svg": b"old"})
    check_folder(tmp_path)
    put(tmp_path, FILES | {"report.html": b"new"})
    assert names(tmp_path) == set(FILES)
    assert (tmp_path / "report.html").read_bytes() == b"new"


def test_a_file_that_was_put_beside_an_earlier_report_is_left_alone(tmp_path):
    put(tmp_path, FILES)
    (tmp_path / "mine.txt").write_text("mine")
    put(tmp_path, FILES)
    assert names(tmp_path) == {*FILES, "mine.txt"}


def test_a_folder_that_holds_other_things_is_refused(tmp_path):
    (tmp_path / "thesis.tex").write_text("all of it")
    with pytest.raises(sb.SdebenchError, match="holds other things than a report"):
        check_folder(tmp_path)
    assert os.listdir(tmp_path) == ["thesis.tex"]


def test_a_file_is_refused(tmp_path):
    (tmp_path / "out").write_text("text")
    with pytest.raises(sb.SdebenchError, match="it is a file"):
        check_folder(tmp_path / "out")


def test_checking_leaves_nothing_behind(tmp_path):
    check_folder(tmp_path / "new")
    assert os.listdir(tmp_path) == []


def test_a_list_of_files_that_was_tampered_with_removes_nothing_elsewhere(tmp_path):
    (tmp_path / "precious").write_text("kept")
    folder = tmp_path / "out"
    put(folder, FILES)
    with (folder / MARKER).open("a") as marker:
        marker.write(f"../precious\n{tmp_path}/precious\n")
    put(folder, FILES)
    assert (tmp_path / "precious").read_text() == "kept"


def test_a_write_that_fails_leaves_the_old_report(tmp_path, monkeypatch):
    """As on a full disk: an error while files are still being written beside."""
    put(tmp_path, FILES)
    with pytest.raises(sb.SdebenchError, match="Cannot write"):
        put(tmp_path, {"report.html": b"new", "x" * 300: b"a name that no file can have"})
    assert (tmp_path / "report.html").read_bytes() == b"page"
    assert names(tmp_path) == set(FILES)
