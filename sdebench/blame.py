"""Whose mistake an exception is: a user's function is shown its own frames, ours are not hidden."""

import inspect
import sysconfig
import traceback
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import cache
from pathlib import Path

from sdebench.errors import SdebenchError, UserCodeRaised


@contextmanager
def blamed(name: str, function: Callable[..., object], where: str) -> Iterator[None]:
    """Turn an exception raised by a user's `function` into `UserCodeRaised`.

    `name` and `where` say in its sentence what raised and when. It shows the frames of the
    function's file and of other files of the user's. An exception that never passed through any
    is a fault of ours and goes on unchanged. An attempt to exit is an exception like any other.
    """
    try:
        yield
    except SdebenchError:
        raise
    except (Exception, SystemExit) as cause:
        own = _file(function)
        frames = users_frames(cause, own)
        if not any(frame.filename == own for frame in frames):
            raise
        raise UserCodeRaised(name, where, cause, frames) from cause


def users_frames(cause: BaseException, own: str) -> list[traceback.FrameSummary]:
    """Return the frames of an exception in the file `own` and in other files of the user's."""
    return [
        frame
        for frame in traceback.extract_tb(cause.__traceback__)
        if frame.filename == own or not frame.filename.startswith(_not_users())
    ]


@cache
def _not_users() -> tuple[str, ...]:
    """Where code is of ours, of Python or of an installed package, unless the function is there."""
    paths = sysconfig.get_paths()
    return str(Path(__file__).parent), paths["stdlib"], paths["purelib"], "<frozen"


def _file(function: Callable[..., object]) -> str:
    try:
        return inspect.getfile(inspect.unwrap(function))
    except TypeError:  # a callable object: its class has the file
        try:
            return inspect.getfile(type(function))
        except TypeError:  # built in: nothing of the user's
            return ""
