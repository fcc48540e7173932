"""The report of evidence files: a page, a summary, and every figure and table as files.

All is made before the first file is put in place; what a folder held before stays until then.
"""

import os
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from sdebench.reports import export, figures, render, summary
from sdebench.reports.check_table import check_table
from sdebench.reports.errors_table import errors_table
from sdebench.reports.folder import check_folder, put
from sdebench.reports.inline import inline_svg
from sdebench.reports.orders_table import orders_table
from sdebench.reports.page import Shown, page
from sdebench.reports.sections import Section, by_problem, sections
from sdebench.reports.tables import Table, terms_table

from sdebench.evidence import Evidence

if TYPE_CHECKING:
    from matplotlib.figure import Figure


@dataclass(frozen=True)
class Planned:
    """A figure to be drawn: the name of its files, the call, and what is said of it."""

    name: str
    drawing: Callable[[], "Figure"]
    caption: str
    description: str


def report(evidences: Sequence[Evidence]) -> dict[str, bytes]:
    """Return the files of the report on some evidence, by their paths in its folder."""
    found = sections(evidences)
    problems = by_problem(found)
    of_pairs = {section.name: _figures(section) for section in found}
    among = list(dict.fromkeys(section.scheme for section in found))
    of_problems = {name: _side_by_side(name, own, among) for name, own in problems.items()}
    plans = [plan for own in (*of_pairs.values(), *of_problems.values()) for plan in own]
    contents, shown = _drawn(plans)
    tables = {section.name: _tables(section, contents) for section in found}
    claims = summary.matrix(found)
    every = [claim for section in found for claim in section.claims]
    _add(contents, "claims", claims, export.claims_csv(every))
    contents["summary.md"] = summary.summary(found).encode()
    contents["report.html"] = page(
        found,
        [evidence.provenance for evidence in evidences],
        {name: [shown[plan.name] for plan in own] for name, own in of_pairs.items()},
        tables,
        [(name, [shown[plan.name] for plan in own]) for name, own in of_problems.items() if own],
    ).encode()
    return contents


def write_report(evidences: Sequence[Evidence], out: str | os.PathLike[str]) -> Path:
    """Write the report into the folder `out` and return the path of its page.

    Raises `CannotWrite`, before anything is changed, if the folder holds what is not ours.
    """
    folder = Path(out)
    check_folder(folder)
    put(folder, report(evidences))
    return folder / "report.html"


def _drawn(plans: Sequence[Planned]) -> tuple[dict[str, bytes], dict[str, Shown]]:
    """Return the files of all figures, and how each is shown on the page."""
    contents: dict[str, bytes] = {}
    shown: dict[str, Shown] = {}
    made = render.all_images([plan.drawing for plan in plans])
    for plan, files in zip(plans, made, strict=True):
        path = f"figures/{plan.name}"
        contents |= {f"{path}.{ending}": content for ending, content in files.items()}
        svg = inline_svg(files["svg"].decode(), plan.name, plan.description)
        shown[plan.name] = Shown(path, svg, plan.caption)
    return contents, shown


def _add(contents: dict[str, bytes], name: str, table: Table, csv: str) -> tuple[str, Table]:
    """Add a table in all its formats, and return it with its path for the page."""
    path = f"tables/{name}"
    made = {"csv": csv, "md": export.markdown(table), "tex": export.latex(table)}
    contents |= {f"{path}.{ending}": text.encode() for ending, text in made.items()}
    return path, table


def _figures(section: Section) -> list[Planned]:
    if not section.has_errors:
        return []
    return [
        Planned(
            f"{section.name}--convergence",
            partial(figures.convergence, section),
            "Errors, with their uncertainty where it is wider than a mark. Lines: the slope of the "
            "finest pair, extended; dotted, the claimed slope.",
            figures.described(section),
        ),
        Planned(
            f"{section.name}--local-order",
            partial(figures.local_orders, section),
            "Slopes between neighbouring step sizes: how the order is approached.",
            figures.described_orders(section),
        ),
    ]


def _side_by_side(problem: str, own: Sequence[Section], among: Sequence[str]) -> list[Planned]:
    name = own[0].name.partition("--")[2]
    left_out = [section.scheme for section in own if not section.has_errors]
    said = f" Without errors to draw: {', '.join(left_out)}." if left_out else ""
    plans = [
        Planned(
            f"schemes--{name}--convergence",
            partial(figures.comparison, own, among),
            f"Strong errors filled, weak errors of the first functional hollow.{said}",
            figures.described_together(problem, own, "the step size"),
        ),
        Planned(
            f"schemes--{name}--cost",
            partial(figures.cost, own, among),
            f"Errors against the time that a path takes on one thread, noise and all.{said}",
            figures.described_together(problem, own, "the time of a path"),
        ),
    ]
    timed = any(row.cost.step_seconds for section in own for row in section.measured)
    return plans[(len(own) < 2) : (2 if timed else 1)]


def _tables(section: Section, contents: dict[str, bytes]) -> list[tuple[str, Table]]:
    shown = []
    if section.measured:
        table = orders_table(section.measured)
        shown.append(_add(contents, f"{section.name}--orders", table, export.table_csv(table)))
    for kind in ("strong", "weak"):
        rows = [row for row in section.measured if row.kind == kind]
        if rows:
            paths = {row.cost.paths for row in rows if row.route == "sampled"}
            sample = "".join(f", sampled on {n} paths" for n in paths)
            table = errors_table(f"{kind.capitalize()} error{sample}", rows)
            name = f"{section.name}--{kind}"
            shown.append(_add(contents, name, table, export.rungs_csv(rows)))
    for row in section.one_step:
        name = f"{section.name}--one-step-{row.bears_on}"
        table = replace(terms_table(row), title=f"One step, {row.bears_on}: limits as h → 0")
        shown.append(_add(contents, name, table, export.terms_csv(row)))
    if section.checks:
        table = check_table(section.checks, section.measured)
        csv = export.rungs_csv(section.checks)
        shown.append(_add(contents, f"{section.name}--check", table, csv))
    return shown
