"""A JSON file of a versioned format, read into its types or refused in one sentence."""

import os
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import msgspec

from sdebench.errors import SdebenchError

Content = TypeVar("Content")
Refusal = Callable[[str, str], SdebenchError]  # of a path, for a reason


def read_versioned(
    path: str | os.PathLike[str], kind: type[Content], wanted: str, refusal: Refusal
) -> Content:
    """Return what a file holds, if its `format` is the one that is wanted; else raise a refusal."""
    shown = os.fspath(path)
    try:
        content = Path(path).read_bytes()
        found = msgspec.json.decode(content, type=_Header).format
        if found != wanted:
            raise refusal(shown, f"its format is '{found}', this version reads '{wanted}'")
        return msgspec.json.decode(content, type=kind)
    except OSError as cause:
        raise refusal(shown, cause.strerror or str(cause)) from None
    except RecursionError:
        raise refusal(shown, "it is nested too deeply") from None
    except msgspec.MsgspecError as cause:
        raise refusal(shown, str(cause)) from None


class _Header(msgspec.Struct):
    format: str
