"""Axes in the bench's style: logarithmic, marked at powers of ten, with room for a key."""

import math
from collections.abc import Callable
from functools import wraps
from typing import TYPE_CHECKING, Any, TypeVar, cast

from sdebench.reports import numbers, style

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Make = TypeVar("Make", bound=Callable[..., "Figure"])
HEADROOM = 0.15  # of the logarithmic height, for the key
LABELS = (-0.11, -0.125)  # of the axes, at which they are named: to find room for it takes time
SLACK = 1e-9  # by which the logarithm of a power of ten may fall short of it


def styled(make: Make) -> Make:
    """Return a function that makes a figure, with the bench's style in force while it does."""

    @wraps(make)
    def made(*args: Any, **named: Any) -> "Figure":
        from matplotlib import rc_context

        with rc_context(style.SETTINGS):
            return make(*args, **named)

    return cast(Make, made)


def new_axes(x: str, y: str) -> "tuple[Figure, Axes]":
    """Return a figure with axes of these labels."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(style.WIDTH, style.HEIGHT))
    axes = figure.add_axes(style.FRAME)
    axes.set_xlabel(x)
    axes.set_ylabel(y)
    axes.set_axisbelow(True)
    axes.xaxis.set_label_coords(0.5, LABELS[0])
    axes.yaxis.set_label_coords(LABELS[1], 0.5)
    return figure, axes


def logarithmic(axes: "Axes") -> None:
    """Make both axes logarithmic, with room above for the key."""
    if not axes.lines:
        say_nothing(axes)
    axes.set_xscale("log")
    axes.set_yscale("log")
    powers_of_ten(axes.xaxis)
    powers_of_ten(axes.yaxis)
    low, high = axes.get_ylim()
    axes.set_ylim(low, high * (high / low) ** HEADROOM)


def say_nothing(axes: "Axes") -> None:
    """Say that there is nothing to draw, on axes that are still fit for logarithms."""
    axes.set_xlim(1e-3, 1.0)
    axes.set_ylim(1e-3, 1.0)
    said = "no error that counts"
    axes.text(0.5, 0.5, said, transform=axes.transAxes, color=style.INK, ha="center")


def powers_of_ten(axis: object) -> None:
    """Mark an axis at powers of ten, and between where it has few."""
    from matplotlib.axis import Axis
    from matplotlib.ticker import FuncFormatter, LogLocator, NullLocator

    assert isinstance(axis, Axis)
    low, high = sorted(axis.get_view_interval())
    between = (1.0, 2.0, 5.0) if high < 20 * low else (1.0,)
    axis.set_major_locator(LogLocator(10, subs=between, numticks=9))
    axis.set_minor_locator(NullLocator())
    axis.set_major_formatter(FuncFormatter(lambda value, _: _power(value)))


def _power(value: float) -> str:
    exponent = math.floor(math.log10(value) + SLACK)
    first = round(value / 10.0**exponent)
    if abs(exponent) <= 1:
        return f"{value:g}"
    return f"{f'{first} × ' if first != 1 else ''}10{numbers.superscript(exponent)}"
