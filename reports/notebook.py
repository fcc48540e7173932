"""Evidence in a notebook: the claims, and the errors of each behind a click."""

from html import escape

from sdebench.reports.tables import Table, claims_table, rungs_table

from sdebench.evidence import Evidence


def evidence_html(evidence: Evidence) -> str:
    """Return the claims as an HTML table, sentences on those not supported, and all errors."""
    sentences = "".join(
        f"<p><b>{escape(c.scheme)} on {escape(c.problem)}, {c.kind}: {c.verdict.value}.</b> "
        f"{escape(c.sentence)}</p>"
        for c in evidence.claims
        if c.verdict.value in ("refuted", "undecided")
    )
    tables = [rungs_table(row) for row in evidence.results if row.rungs and not row.check]
    errors = "".join(
        f"<details><summary>{escape(table.title)}</summary>{_table(table)}</details>"
        for table in tables
    )
    verdict = f"<p>Verdict: {evidence.verdict.value}</p>"
    return f"{_table(claims_table(evidence))}{sentences}{errors}{verdict}"


def _table(table: Table) -> str:
    head = "".join(f"<th>{escape(cell)}</th>" for cell in table.headings)
    body = "".join(
        "<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>" for row in table.rows
    )
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
