"""How a row of evidence is drawn: marks, bars, lines, the claimed slope, the key."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from sdebench.reports import numbers, style
from sdebench.reports.sections import Section
from sdebench.reports.tables import error_of

from sdebench.evidence import Result, Rung

if TYPE_CHECKING:
    from matplotlib.axes import Axes

ROOM = 0.5  # orders above and below what is claimed or measured
BELOW = {"strong": 0.4, "weak": 0.15}  # of the errors, at which the claimed slope is drawn
LINE = 0.062  # of the height of the axes, from one line of the key to the next
SHRINK = 2.0  # points, by which the marks of a scheme are smaller than those of the one before
MOST_SHRUNK = 2  # times
LEAST = 0.2  # of an error, to which the lower end of a bar that reaches 0 is drawn


@dataclass(frozen=True)
class Drawn:
    """How the errors of a row are drawn: strong ones filled and on a line, weak ones hollow."""

    row: Result
    label: str
    colour: str
    mark: str
    size: float = style.MARK

    @property
    def filled(self) -> bool:
        """Whether the mark is."""
        return self.row.kind == "strong"

    @property
    def face(self) -> str:
        """The colour inside of the mark."""
        return self.colour if self.filled else "none"

    @property
    def line(self) -> str:
        """The style of the line."""
        return "-" if self.filled else "--"

    @property
    def rungs(self) -> list[Rung]:
        """The rungs that count."""
        return [rung for rung in self.row.rungs if rung.error and rung.counts]

    @property
    def errors(self) -> list[float]:
        """The sizes of the errors of these rungs."""
        return [abs(rung.error or 0.0) for rung in self.rungs]


def label(row: Result) -> str:
    """Return what the errors of a row are of, as a figure can show it."""
    return printable(error_of(row))


def printable(text: str) -> str:
    """Return a text with a space for what no figure can show, such as a control character."""
    return "".join(letter if letter.isprintable() else " " for letter in text)


def of_rows(rows: Sequence[Result]) -> list[Drawn]:
    """Return how rows of one scheme are drawn: the strong error, and the others in turn."""
    found, others = [], 0
    for row in rows:
        if row.kind == "strong" and row.at != "grid":
            look = style.STRONG
        else:
            look = style.WEAK[others % len(style.WEAK)]
            others += 1
        found.append(Drawn(row, label(row), *look))
    return found


def of_schemes(sections: Sequence[Section], among: Sequence[str] = ()) -> list[Drawn]:
    """Return how the first row of each kind of several schemes is drawn.

    Their colours go by their places `among` all schemes; marks shrink from the first to the last,
    so that errors that are the same show as one mark inside of another.
    """
    places = list(dict.fromkeys([*among, *(section.scheme for section in sections)]))
    return [
        Drawn(
            row,
            f"{printable(section.scheme)}, {label(row)}",
            *style.SCHEMES[places.index(section.scheme) % len(style.SCHEMES)],
            style.MARK + SHRINK * min(len(sections) - 1 - n, MOST_SHRUNK),
        )
        for n, section in enumerate(sections)
        for row in first_of_each_kind(section.measured)
    ]


def first_of_each_kind(rows: Sequence[Result]) -> list[Result]:
    """Return the first strong row and the first weak one."""
    return list({row.kind: row for row in reversed(rows)}.values())[::-1]


def draw_errors(axes: "Axes", drawn: Drawn) -> None:
    """Draw the errors of a row that count, with their bars."""
    rungs, errors = drawn.rungs, drawn.errors
    if rungs:
        widths = [rung.uncertainty or 0.0 for rung in rungs]
        low = [min(w, (1 - LEAST) * error) for error, w in zip(errors, widths, strict=True)]
        axes.errorbar(
            [rung.h for rung in rungs],
            errors,
            yerr=[low, widths],
            color=drawn.colour,
            marker=drawn.mark,
            markerfacecolor=drawn.face,
            markersize=drawn.size,
            linestyle="none",
            elinewidth=1.0,
        )


def draw_rest(axes: "Axes", drawn: Drawn) -> None:
    """Draw as crosses the errors of a row that do not count."""
    rest = {rung.h: abs(rung.error) for rung in drawn.row.rungs if rung.error and not rung.counts}
    if rest:
        axes.plot(list(rest), list(rest.values()), color=style.MUTED, marker="x", linestyle="none")


def draw_fit(axes: "Axes", drawn: Drawn) -> None:
    """Draw the line of the measured order through the finest rung that counts."""
    order, rungs = drawn.row.order, drawn.rungs
    if order is None or len(rungs) < 2:
        return
    finest = min(rungs, key=lambda rung: rung.h)
    h = [max(rung.h for rung in rungs), finest.h]
    line = [abs(finest.error or 0.0) * (each / finest.h) ** order for each in h]
    axes.plot(h, line, color=drawn.colour, linestyle=drawn.line, linewidth=0.9)


def draw_guide(axes: "Axes", drawn: Drawn) -> None:
    """Draw the claimed slope, a little below the errors."""
    row, rungs = drawn.row, drawn.rungs
    if row.claimed is None or len(rungs) < 2:
        return
    rungs = sorted(rungs, key=lambda rung: rung.h)[:3]
    base = min(abs(rung.error or 0.0) * (rungs[0].h / rung.h) ** row.claimed for rung in rungs)
    h = [rungs[0].h, rungs[-1].h]
    line = [base * BELOW[row.kind] * (each / h[0]) ** row.claimed for each in h]
    axes.plot(h, line, color=style.INK, linestyle=":", linewidth=1.2)
    axes.annotate(
        f"{row.kind} claim {numbers.claimed(row.claimed)}",
        (h[0], line[0]),
        xytext=(4, -1),
        textcoords="offset points",
        fontsize=8,
        color=style.INK,
        verticalalignment="top",
    )


def draw_claims(axes: "Axes", claimed: Sequence[float], shown: Sequence[float]) -> None:
    """Draw the claimed orders, and have the axis hold them and the orders that are near."""
    for order in claimed:
        axes.axhline(order, color=style.INK, linestyle=":", linewidth=1.0)
        axes.annotate(
            f"claimed {numbers.claimed(order)}",
            (0.0, order),
            xycoords=("axes fraction", "data"),
            xytext=(3, 4),
            textcoords="offset points",
            fontsize=8,
            color=style.INK,
        )
    near = [order for order in shown if not claimed or abs(order - claimed[-1]) < 4 * ROOM]
    ends = [*claimed, *near]
    axes.set_ylim(min(ends) - ROOM, max(ends) + ROOM)


def draw_key(axes: "Axes", drawn: Sequence[Drawn], top: bool = True) -> None:
    """Say in a corner what each mark is; a Matplotlib legend takes as long as all the rest."""
    first = 0.965 if top else 0.035 + LINE * (len(drawn) - 1)
    for n, each in enumerate(drawn):
        y = first - LINE * n
        axes.plot(
            [0.03],
            [y],
            transform=axes.transAxes,
            color=each.colour,
            marker=each.mark,
            markerfacecolor=each.face,
            linestyle="none",
        )
        axes.text(
            0.055,
            y,
            each.label,
            transform=axes.transAxes,
            fontsize=8.5,
            color=style.INK,
            verticalalignment="center",
        )
