"""Error constants and cost over the runs of a gate: a table, figures and a page."""

import os
from collections.abc import Sequence
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from jinja2 import Environment, StrictUndefined
from sdebench.reports import export, numbers, render, style
from sdebench.reports.axes import new_axes, styled
from sdebench.reports.drawing import printable
from sdebench.reports.folder import check_folder, put
from sdebench.reports.inline import inline_svg
from sdebench.reports.page import resource
from sdebench.reports.sections import slug
from sdebench.reports.tables import Table

from sdebench.history import Point

if TYPE_CHECKING:
    from matplotlib.figure import Figure

Series = Sequence[Point]
ROOM = 1.25  # on either side of what is drawn, as a factor


def by_series(points: Sequence[Point]) -> dict[tuple[str, ...], list[Point]]:
    """Return the points of each kind of error, oldest first."""
    found: dict[tuple[str, ...], list[Point]] = {}
    for point in points:
        found.setdefault(point.series, []).append(point)
    return found


def trend_table(points: Sequence[Point]) -> Table:
    """Return one row a kind of error: runs, the constant at first and last, the cost."""
    rows = []
    for own in by_series(points).values():
        first, last = own[0], own[-1]
        rows.append(
            (
                *(last.scheme, last.problem, _what(last), str(len(own))),
                *(_constant(first), _constant(last)),
                _change(first.constant, last.constant),
                numbers.microseconds(last.step_seconds),
                (last.revision or "")[:12],
            )
        )
    headings = (
        *("scheme", "problem", "error", "runs", "constant at first", "constant at last"),
        *("change", "a step", "last revision"),
    )
    return Table("Error constants over the runs", headings, rows, frozenset({3, 4, 5, 6, 7}))


@styled
def constants(own: Series) -> "Figure":
    """Return the error constant of one kind of error over the runs, with its bounds."""
    figure, axes = new_axes("run", "error constant")
    known = [p for p in own if p.constant is not None and p.low is not None and p.high is not None]
    axes.errorbar(
        [p.run for p in known],
        [p.constant or 0.0 for p in known],
        yerr=[
            [max((p.constant or 0.0) - (p.low or 0.0), 0.0) for p in known],
            [max((p.high or 0.0) - (p.constant or 0.0), 0.0) for p in known],
        ],
        color=style.ACCENT,
        marker="o",
        linewidth=0.9,
        elinewidth=1.0,
    )
    _frame(axes, [p.constant for p in known if p.constant])
    return figure


@styled
def costs(own: Series) -> "Figure":
    """Return the time of one step of a path over the runs, in microseconds."""
    figure, axes = new_axes("run", "time of a step, in microseconds")
    known = [p for p in own if p.step_seconds]
    axes.plot(
        [p.run for p in known],
        [1e6 * (p.step_seconds or 0.0) for p in known],
        color=style.OCHRE,
        marker="s",
        linewidth=0.9,
    )
    _frame(axes, [1e6 * p.step_seconds for p in known if p.step_seconds])
    return figure


def _frame(axes: object, values: Sequence[float]) -> None:
    from matplotlib.axes import Axes
    from matplotlib.ticker import MaxNLocator

    assert isinstance(axes, Axes)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    if values:
        axes.set_ylim(0.0, max(values) * ROOM)


def write_trend(points: Sequence[Point], out: str | os.PathLike[str]) -> Path:
    """Write the page with its figures and tables into a folder; raises `CannotWrite`."""
    folder = Path(out)
    check_folder(folder)
    table = trend_table(points)
    contents = {
        f"tables/trend.{ending}": text.encode()
        for ending, text in (
            ("csv", export.table_csv(table)),
            ("md", export.markdown(table)),
            ("tex", export.latex(table)),
        )
    }
    plans = []
    for own in by_series(points).values():
        said = f"{own[0].scheme} on {own[0].problem}, {_what(own[0])}"
        name = f"trend--{slug(said)}"
        if any(p.constant is not None for p in own):
            plans.append((f"{name}--constant", f"Error constant, {said}", partial(constants, own)))
        if own[0].kind == "strong" and any(p.step_seconds for p in own):
            plans.append((f"{name}--cost", f"Time of a step, {said}", partial(costs, own)))
    shown = []
    made = render.all_images([drawing for _, _, drawing in plans])
    for (name, said, _), files in zip(plans, made, strict=True):
        contents |= {f"figures/{name}.{ending}": content for ending, content in files.items()}
        svg = inline_svg(files["svg"].decode(), name, printable(said))
        shown.append((name, said, svg))
    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True)
    environment.filters["typeset"] = numbers.typeset
    page = environment.from_string(resource("trend.html"))
    inner = environment.from_string(resource("table.html")).render(
        name="tables/trend", table=table, files=export.FILES
    )
    runs = len({p.run for p in points})
    contents["report.html"] = page.render(
        css=resource("report.css"), table=inner, figures=shown, runs=runs
    ).encode()
    put(folder, contents)
    return folder / "report.html"


def _what(point: Point) -> str:
    what = point.functional or ("largest on the grid" if point.at == "grid" else "")
    return f"{point.kind}, {what}" if what else point.kind


def _constant(point: Point) -> str:
    if point.constant is None or point.low is None or point.high is None:
        return "none"
    width = max(point.high - point.constant, point.constant - point.low)
    return numbers.with_uncertainty(point.constant, width)


def _change(first: float | None, last: float | None) -> str:
    return "" if not first or last is None else f"{last / first - 1:+.2%}"
