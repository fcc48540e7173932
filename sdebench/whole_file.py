"""A file that is written whole or not at all."""

import os
import tempfile
from pathlib import Path

from sdebench.errors import CannotWrite


def check_writable(path: Path) -> None:
    """Raise `CannotWrite` unless a file can be written at `path`; leaves nothing behind."""
    try:
        target = path.resolve()
        if target.exists() and not target.is_file():
            kind = "a directory" if target.is_dir() else "no regular file"
            raise CannotWrite(str(path), f"it is {kind}")
        with tempfile.NamedTemporaryFile(dir=target.parent, prefix=target.name, suffix=".partial"):
            pass
        if target.exists() and not os.access(target, os.W_OK):
            raise CannotWrite(str(path), "it is read-only")
    except OSError as cause:
        raise CannotWrite(str(path), cause.strerror or str(cause)) from None


def write_whole(path: Path, content: bytes) -> None:
    """Write `content` to a file beside `path` and move it there in one step.

    A link stays a link: what it points to is replaced.
    """
    check_writable(path)
    target = path.resolve()
    partial = None
    try:
        descriptor, partial = tempfile.mkstemp(
            dir=target.parent, prefix=target.name, suffix=".partial"
        )
        with os.fdopen(descriptor, "wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        umask = os.umask(0)
        os.umask(umask)
        os.chmod(partial, 0o666 & ~umask)
        os.replace(partial, target)
    except OSError as cause:
        raise CannotWrite(str(path), cause.strerror or str(cause)) from None
    finally:
        if partial is not None:
            Path(partial).unlink(missing_ok=True)
