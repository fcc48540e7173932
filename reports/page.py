"""The report as one page: no network, no script, all figures inside."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import resources
from itertools import groupby

from jinja2 import Environment, StrictUndefined
from markupsafe import Markup
from sdebench.reports import numbers, summary
from sdebench.reports.export import FILES
from sdebench.reports.sections import Section
from sdebench.reports.tables import Table

from sdebench.evidence import Provenance


@dataclass(frozen=True)
class Shown:
    """A figure on the page: the name of its files, its element and what is said of it."""

    name: str
    svg: str
    caption: str


def page(
    sections: Sequence[Section],
    provenances: Sequence[Provenance],
    figures: Mapping[str, Sequence[Shown]],
    tables: Mapping[str, Sequence[tuple[str, Table]]],
    problems: Sequence[tuple[str, Sequence[Shown]]],
) -> str:
    """Return the page; `figures` and `tables` are by the names of sections."""
    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    environment.filters["typeset"] = numbers.typeset
    environment.filters["claimed"] = numbers.claimed
    table = environment.from_string(resource("table.html"))

    def shown(named: tuple[str, Table]) -> Markup:
        return Markup(table.render(name=named[0], table=named[1], files=FILES))

    template = environment.from_string(resource("report.html"))
    return template.render(
        css=Markup(resource("report.css")),
        verdict=summary.verdict_sentence(sections),
        faults=summary.faults(sections),
        kinds=summary.kinds(sections),
        cells=summary.cells,
        measured=summary.measured,
        tolerance=" or ".join(sorted({f"{p.tolerance:g}" for p in provenances})),
        sections=sections,
        by_scheme=[(k, list(own)) for k, own in groupby(sections, lambda each: each.scheme)],
        figures=figures,
        tables=tables,
        problems=problems,
        provenances=provenances,
        facts=facts,
        shown=shown,
        version=provenances[0].sdebench,
    )


def resource(name: str) -> str:
    """Return the text of a template or style sheet."""
    return (resources.files("sdebench.reports") / "templates" / name).read_text("utf-8")


def facts(p: Provenance) -> list[tuple[str, str]]:
    """Return what there is to know of how evidence was made, as names and values."""
    found = {
        "made": p.created,
        "seed": str(p.seed),
        "confidence": f"{p.confidence:g}",
        "tolerance in orders": f"{p.tolerance:g}",
        "steps of all rungs": ", ".join(map(str, p.steps)),
        "looks": "until decided" if p.looks is None else str(p.looks),
        "took": f"{p.seconds:.1f} s on {p.threads} thread{'s' if p.threads > 1 else ''}",
        "revision": (p.revision or "no repository").replace("-dirty", ", and changes since"),
        **{f"SHA-256 of {file}": digest for file, digest in p.files.items()},
        "sdebench": p.sdebench,
        "NumPy": p.numpy,
        "Python": p.python,
        "platform": p.platform,
    }
    return list(found.items())
