"""The folder of a report: that it is ours to write into, and how files come into it.

All is written beside before the first file is put in place; what the folder held stays until then.
"""

import os
import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path

from sdebench.errors import CannotWrite

MARKER = ".sdebench-report"  # in a folder that is ours, the names of our files in it


def check_folder(folder: Path) -> None:
    """Raise `CannotWrite` unless a report can be written into a folder."""
    try:
        if folder.exists() and not folder.is_dir():
            raise CannotWrite(str(folder), "it is a file")
        if folder.exists() and any(folder.iterdir()) and not (folder / MARKER).is_file():
            raise CannotWrite(str(folder), "it is a folder that holds other things than a report")
        parent = next(p for p in (folder, *folder.absolute().parents) if p.is_dir())
        with tempfile.TemporaryDirectory(dir=parent, prefix=".sdebench-"):
            pass
    except OSError as cause:
        raise CannotWrite(str(folder), cause.strerror or str(cause)) from None


def put(folder: Path, contents: Mapping[str, bytes]) -> None:
    """Write files, by their paths in a folder, in the order given; remove old ones of ours.

    Raises `CannotWrite`.
    """
    try:
        _put(folder, contents)
    except OSError as cause:
        raise CannotWrite(str(folder), cause.strerror or str(cause)) from None


def _put(folder: Path, contents: Mapping[str, bytes]) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    marker = folder / MARKER
    before = marker.read_text("utf-8").splitlines() if marker.is_file() else []
    staging = Path(tempfile.mkdtemp(dir=folder, prefix=".partial-"))
    try:
        for name, content in contents.items():
            target = staging / name
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_bytes(content)
        marker.write_text("\n".join(dict.fromkeys([*before, *contents])) + "\n", "utf-8")
        for name in contents:
            (folder / name).parent.mkdir(parents=True, exist_ok=True)
            os.replace(staging / name, folder / name)
        for name in set(before) - set(contents):
            if not Path(name).is_absolute() and ".." not in Path(name).parts:
                (folder / name).unlink(missing_ok=True)
        marker.write_text("\n".join(contents) + "\n", "utf-8")
    finally:
        shutil.rmtree(staging, ignore_errors=True)
