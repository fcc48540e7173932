"""Evidence as Matplotlib figures, which are yours to restyle and save.

Matplotlib is imported when a figure is made.
"""

from collections.abc import Sequence
from typing import TYPE_CHECKING

from sdebench.reports import numbers
from sdebench.reports.axes import logarithmic, new_axes, powers_of_ten, say_nothing, styled
from sdebench.reports.drawing import (
    LINE,
    ROOM,
    Drawn,
    draw_claims,
    draw_errors,
    draw_fit,
    draw_guide,
    draw_key,
    draw_rest,
    first_of_each_kind,
    label,
    of_rows,
    of_schemes,
)
from sdebench.reports.sections import Section

if TYPE_CHECKING:
    from matplotlib.figure import Figure


@styled
def convergence(section: Section) -> "Figure":
    """Return errors against the step size: with bars, fitted lines, and the claimed slopes."""
    figure, axes = new_axes("step size h", "size of error")
    drawn = of_rows(section.measured)
    for each in drawn:
        draw_errors(axes, each)
        draw_rest(axes, each)
        draw_fit(axes, each)
    for each in of_rows(first_of_each_kind(section.measured)):
        draw_guide(axes, each)
    logarithmic(axes)
    draw_key(axes, drawn)
    return figure


@styled
def local_orders(section: Section) -> "Figure":
    """Return the local order of each pair of neighbouring rungs, beside the claimed orders."""
    figure, axes = new_axes("step size h of the finer rung", "local order")
    shown: list[float] = []
    drawn = of_rows(section.measured)
    for each in drawn:
        points = {r.h: r.local_order for r in each.rungs if r.local_order is not None}
        axes.plot(
            list(points),
            list(points.values()),
            color=each.colour,
            marker=each.mark,
            markerfacecolor=each.face,
            linestyle=each.line,
            linewidth=0.9,
        )
        shown += points.values()
    if shown:
        draw_claims(
            axes, sorted({r.claimed for r in section.measured if r.claimed is not None}), shown
        )
        axes.set_ylim(top=axes.get_ylim()[1] + ROOM * LINE * 4 * len(drawn))
    else:
        say_nothing(axes)
    axes.set_xscale("log")
    powers_of_ten(axes.xaxis)
    draw_key(axes, drawn)
    return figure


@styled
def comparison(sections: Sequence[Section], among: Sequence[str] = ()) -> "Figure":
    """Return errors of several schemes on one problem: strong ones, and weak ones of the mean.

    A scheme has the colour of its place `among` all schemes of a report, if they are given.
    """
    figure, axes = new_axes("step size h", "size of error")
    drawn = [each for each in of_schemes(sections, among) if each.rungs]
    for each in drawn:
        draw_errors(axes, each)
        draw_fit(axes, each)
    logarithmic(axes)
    draw_key(axes, drawn)
    return figure


@styled
def cost(sections: Sequence[Section], among: Sequence[str] = ()) -> "Figure":
    """Return errors against the time that a path takes; colours as in `comparison`."""
    figure, axes = new_axes("time of a path, in seconds", "size of error")
    drawn = [e for e in of_schemes(sections, among) if e.row.cost.step_seconds and e.rungs]
    for each in drawn:
        axes.plot(
            [rung.steps * (each.row.cost.step_seconds or 0.0) for rung in each.rungs],
            each.errors,
            color=each.colour,
            marker=each.mark,
            markerfacecolor=each.face,
            linestyle=each.line,
            markersize=each.size,
        )
    logarithmic(axes)
    draw_key(axes, drawn, top=False)
    return figure


def described(section: Section) -> str:
    """Return in words what the convergence plot of a section shows."""
    parts = [
        f"{each.label}: {_span(each)}, claimed order {numbers.claimed(each.row.claimed)}, "
        f"measured {numbers.order(each.row.order)}"
        for each in of_rows(section.measured)
        if each.rungs
    ]
    return f"Errors of {section.title} against the step size. {'; '.join(parts)}."


def described_together(problem: str, sections: Sequence[Section], against: str) -> str:
    """Return in words what a plot of several schemes on a problem shows."""
    parts = [f"{each.label}: {_span(each)}" for each in of_schemes(sections) if each.rungs]
    return f"Errors on {problem} against {against}. {'; '.join(parts)}."


def _span(drawn: Drawn) -> str:
    """Return the first and the last error that count, with their step sizes."""
    points = zip(drawn.rungs, drawn.errors, strict=True)
    said = [f"{error:.2g} at h = {rung.h:.2g}" for rung, error in points]
    return f"from {said[0]} to {said[-1]}"


def described_orders(section: Section) -> str:
    """Return in words what the plot of local orders shows."""
    parts = []
    for row in section.measured:
        orders = [r.local_order for r in row.rungs if r.local_order is not None and r.counts]
        if orders:
            first, last = numbers.order(orders[0]), numbers.order(orders[-1])
            claimed = numbers.claimed(row.claimed)
            parts.append(f"{label(row)}: from {first} to {last} as h falls, claimed {claimed}")
    return f"Local orders of {section.title}. {'; '.join(parts)}."
