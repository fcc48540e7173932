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
def comparison(sections: Sequence[Section]) -> "Figure":
    """Return errors of several schemes on one problem: strong ones, and weak ones of the mean."""
    figure, axes = new_axes("step size h", "size of error")
    drawn = [each for each in of_schemes(sections) if each.rungs]
    for each in drawn:
        draw_errors(axes, each)
        draw_fit(axes, each)
    logarithmic(axes)
    draw_key(axes, drawn)
    return figure


@styled
def cost(sections: Sequence[Section]) -> "Figure":
    """Return errors against the time that a path takes, for each scheme on one problem."""
    figure, axes = new_axes("time of a path, in seconds", "size of error")
    drawn = [e for e in of_schemes(sections) if e.row.cost.step_seconds and e.rungs]
    for each in drawn:
        axes.plot(
            [rung.steps * (each.row.cost.step_seconds or 0.0) for rung in each.rungs],
            each.errors,
            color=each.colour,
            marker=each.mark,
            markerfacecolor=each.face,
            linestyle=each.line,
        )
    logarithmic(axes)
    draw_key(axes, drawn, top=False)
    return figure


def described(section: Section) -> str:
    """Return in words what the convergence plot of a section shows."""
    parts = []
    for row in section.measured:
        known = [rung for rung in row.rungs if rung.error and rung.counts]
        if known:
            first, last = known[0], known[-1]
            parts.append(
                f"{label(row)}: from {abs(first.error or 0):.2g} at h = {first.h:.2g} to "
                f"{abs(last.error or 0):.2g} at h = {last.h:.2g}, claimed order "
                f"{numbers.claimed(row.claimed)}, measured {numbers.order(row.order)}"
            )
    return f"Errors of {section.title} against the step size. {'; '.join(parts)}."


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
