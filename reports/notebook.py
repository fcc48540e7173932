"""Evidence as a table in a notebook."""

from html import escape

from sdebench.reports.tables import Table, claims_table

from sdebench.evidence import Evidence


def evidence_html(evidence: Evidence) -> str:
    """Return the claims as an HTML table with the sentences of those that are not supported."""
    sentences = "".join(
        f"<p><b>{escape(c.scheme)} on {escape(c.problem)}, {c.kind}: {c.verdict.value}.</b> "
        f"{escape(c.sentence)}</p>"
        for c in evidence.claims
        if c.verdict.value in ("refuted", "undecided")
    )
    return f"{_table(claims_table(evidence))}{sentences}<p>Verdict: {evidence.verdict.value}</p>"


def _table(table: Table) -> str:
    head = "".join(f"<th>{escape(cell)}</th>" for cell in table.headings)
    body = "".join(
        "<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>" for row in table.rows
    )
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
