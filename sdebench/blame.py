"""Whose mistake an exception is: a user's step is shown its own frames, ours are not hidden."""

import traceback
from collections.abc import Iterator
from contextlib import contextmanager

from sdebench.errors import SchemeRaised, SdebenchError
from sdebench.integrator import Scheme


@contextmanager
def blamed(scheme: Scheme, where: str) -> Iterator[None]:
    """Turn an exception raised inside the file of `scheme` into `SchemeRaised`.

    Only the frames of that file are kept. An exception that never passed through it is a fault
    of ours and goes on unchanged.
    """
    try:
        yield
    except SdebenchError:
        raise
    except Exception as cause:
        code = getattr(scheme.step, "__code__", None)
        file = code.co_filename if code is not None else ""
        frames = [f for f in traceback.extract_tb(cause.__traceback__) if f.filename == file]
        if not frames:
            raise
        text = "".join(traceback.format_list(frames))
        raise SchemeRaised(scheme.label, where, cause, text) from cause
