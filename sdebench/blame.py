"""Whose mistake an exception is: a user's step is shown its own frames, ours are not hidden."""

import inspect
import sysconfig
import traceback
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sdebench.errors import SchemeRaised, SdebenchError
from sdebench.integrator import Scheme

# Code of ours, of Python and of installed packages: never the user's own frames, unless the
# scheme itself lives there.
_NOT_USERS = (
    str(Path(__file__).parent),
    *(sysconfig.get_paths()[k] for k in ("stdlib", "purelib")),
)


@contextmanager
def blamed(scheme: Scheme, where: str) -> Iterator[None]:
    """Turn an exception raised by the step of `scheme` into `SchemeRaised`.

    It shows the frames of the scheme's file and of other files of the user's. An exception that
    never passed through any is a fault of ours and goes on unchanged.
    """
    try:
        yield
    except SdebenchError:
        raise
    except Exception as cause:
        own = _file(scheme)
        frames = [
            frame
            for frame in traceback.extract_tb(cause.__traceback__)
            if frame.filename == own or not frame.filename.startswith(_NOT_USERS)
        ]
        if not any(frame.filename == own for frame in frames):
            raise
        text = "".join(traceback.format_list(frames))
        raise SchemeRaised(scheme.label, where, cause, text) from cause


def _file(scheme: Scheme) -> str:
    try:
        return inspect.getfile(inspect.unwrap(scheme.step))
    except TypeError:  # a callable object: its class has the file
        return inspect.getfile(type(scheme.step))
