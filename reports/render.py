"""Figures as files: SVG, PDF and PNG, the same bits each time, on all cores where that is safe."""

import gc
import io
import multiprocessing
import os
import signal
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor
from typing import TYPE_CHECKING, Any

from sdebench.reports import style

if TYPE_CHECKING:
    from matplotlib.figure import Figure

ENDINGS = ("svg", "pdf", "png")
DOTS = 144  # an inch, of the PNG
NO_DATE: dict[str, dict[str, Any]] = {
    "svg": {"Date": None, "Creator": None},
    "pdf": {"CreationDate": None, "Creator": None, "Producer": None},
    "png": {"Software": None},
}
QUICK = {"compress_level": 2}  # half the time of a PNG is its compression
FEW = 6  # figures, for which a process more is not worth its start
Drawing = Callable[[], "Figure"]


def images(figure: "Figure") -> dict[str, bytes]:
    """Return the content of each file by its ending."""
    from matplotlib import rc_context

    found = {}
    with rc_context(style.SETTINGS):
        for ending in ENDINGS:
            out = io.BytesIO()
            more: dict[str, Any] = {"pil_kwargs": QUICK} if ending == "png" else {}
            figure.savefig(out, format=ending, dpi=DOTS, metadata=NO_DATE[ending], **more)
            found[ending] = out.getvalue()
    return found


def all_images(drawings: Sequence[Drawing]) -> list[Mapping[str, bytes]]:
    """Return the files of several figures, each drawn by a call.

    Matplotlib draws one figure at a time in a process. Processes are forked, and only where a
    system forks: others would run a user's program once more to start.
    """
    cores = os.cpu_count() or 1
    forks = "fork" in multiprocessing.get_all_start_methods()
    if cores < 2 or not forks or len(drawings) < FEW:
        return [_draw(drawing) for drawing in drawings]
    import matplotlib.backends.backend_agg
    import matplotlib.backends.backend_pdf
    import matplotlib.backends.backend_svg
    import matplotlib.figure  # noqa: F401  so that each process need not

    context = multiprocessing.get_context("fork")
    with ProcessPoolExecutor(min(cores, len(drawings)), context, initializer=_begin) as pool:
        return list(pool.map(_draw, drawings, chunksize=2))


def _begin() -> None:
    """Ready a process that only draws."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # an interrupt is the parent's to tell
    gc.disable()  # a tenth of the time; the process ends with its figures


def _draw(drawing: Drawing) -> Mapping[str, bytes]:
    return images(drawing())
