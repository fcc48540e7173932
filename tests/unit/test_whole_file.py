"""A file is written whole or not at all."""

import errno
import os

import pytest

from sdebench.errors import CannotWrite
from sdebench.whole_file import check_writable, write_whole

writing = pytest.mark.parametrize(
    "check", [check_writable, lambda p: write_whole(p, b"")], ids=["check", "write"]
)


def test_content_is_written_whole(tmp_path):
    write_whole(tmp_path / "out.txt", b"all of it")
    assert (tmp_path / "out.txt").read_bytes() == b"all of it"
    assert os.listdir(tmp_path) == ["out.txt"]


def test_an_existing_file_is_replaced(tmp_path):
    (tmp_path / "out.txt").write_bytes(b"old and longer")
    write_whole(tmp_path / "out.txt", b"new")
    assert (tmp_path / "out.txt").read_bytes() == b"new"


@pytest.mark.parametrize("call", ["replace", "fsync"])
def test_a_failure_leaves_the_old_file_and_nothing_else(tmp_path, monkeypatch, call):
    """The disk fills up while writing (fsync), or the move is refused (replace)."""

    def fail(*args):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    path = tmp_path / "out.txt"
    path.write_bytes(b"old")
    monkeypatch.setattr(os, call, fail)
    with pytest.raises(CannotWrite, match="No space left"):
        write_whole(path, b"new")
    assert path.read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["out.txt"]


def test_a_written_file_has_the_rights_that_the_umask_leaves(tmp_path):
    kept = os.umask(0o027)
    try:
        write_whole(tmp_path / "out.txt", b"")
    finally:
        os.umask(kept)
    assert (tmp_path / "out.txt").stat().st_mode & 0o777 == 0o640


@writing
def test_a_folder_that_does_not_exist_cannot_be_written_to(tmp_path, check):
    with pytest.raises(CannotWrite, match="No such file or directory"):
        check(tmp_path / "none" / "e.json")


@writing
def test_a_directory_cannot_be_written_to(tmp_path, check):
    with pytest.raises(CannotWrite, match="directory"):
        check(tmp_path)


def test_a_check_leaves_nothing_behind(tmp_path):
    check_writable(tmp_path / "e.json")
    assert os.listdir(tmp_path) == []


def test_a_check_does_not_touch_an_existing_file(tmp_path):
    path = tmp_path / "e.json"
    path.write_bytes(b"old")
    before = path.stat()
    check_writable(path)
    after = path.stat()
    assert path.read_bytes() == b"old"
    assert (after.st_mtime_ns, after.st_ino) == (before.st_mtime_ns, before.st_ino)


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write to a read-only file")
def test_a_read_only_file_is_told_before_anything_is_measured(tmp_path):
    path = tmp_path / "e.json"
    path.write_bytes(b"old")
    path.chmod(0o444)
    with pytest.raises(CannotWrite, match="read-only"):
        check_writable(path)


def test_what_is_no_regular_file_is_not_replaced_by_one(tmp_path):
    """As /dev/null would be, for a user who may write to /dev."""
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    for write in (check_writable, lambda p: write_whole(p, b"")):
        with pytest.raises(CannotWrite, match="no regular file"):
            write(pipe)
    assert pipe.is_fifo()


def test_a_link_stays_a_link_and_what_it_points_to_is_replaced(tmp_path):
    (tmp_path / "target.json").write_bytes(b"old")
    link = tmp_path / "link.json"
    link.symlink_to("target.json")
    write_whole(link, b"new")
    assert link.is_symlink()
    assert (tmp_path / "target.json").read_bytes() == b"new"
