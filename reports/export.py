"""A table as CSV, Markdown and LaTeX: text in, text out, with whatever it holds escaped."""

import csv
import io
from collections.abc import Sequence
from enum import Enum

from sdebench.reports import numbers
from sdebench.reports.tables import Table

from sdebench.evidence import ClaimResult, Result

LATEX = {
    "\\": r"\textbackslash{}",
    "&": r"\&",
    "%": r"\%",
    "$": r"\$",
    "#": r"\#",
    "_": r"\_",
    "{": r"\{",
    "}": r"\}",
    "~": r"\textasciitilde{}",
    "^": r"\textasciicircum{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    '"': r"\textquotedbl{}",
    "±": r"$\pm$",
    "×": r"$\times$",
    "−": r"$-$",
    "√": r"$\surd$",
    "→": r"$\to$",
    "∞": r"$\infty$",
    "·": r"$\cdot$",
    "–": "--",
    "—": "---",
    "…": r"\ldots{}",
    "’": "'",
}
SUPERSCRIPTS = dict(zip("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789", strict=True))
GREEK = {
    "α": "alpha",
    "β": "beta",
    "γ": "gamma",
    "δ": "delta",
    "θ": "theta",
    "κ": "kappa",
    "λ": "lambda",
    "μ": "mu",
    "ν": "nu",
    "ρ": "rho",
    "σ": "sigma",
    "φ": "phi",
    "χ": "chi",
    "ψ": "psi",
    "ω": "omega",
    "Δ": "Delta",
}
CLAIM = ("kind", "functional", "claimed", "order", "low", "high", "exact", "verdict")
FILES = ("csv", "md", "tex")
COLUMNS = (
    *("scheme", "problem", "kind", "functional", "route", "check"),
    *("steps", "h", "error", "uncertainty", "local_order", "counts"),
)


def rungs_csv(rows: Sequence[Result]) -> str:
    """Return every rung of some rows, with every digit: numbers read back as they were."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    for row in rows:
        for rung in row.rungs:
            values = (
                *(row.scheme, row.problem, row.kind, row.functional, row.route, row.check),
                *(rung.steps, rung.h, rung.error, rung.uncertainty, rung.local_order, rung.counts),
            )
            writer.writerow(["" if value is None else value for value in values])
    return out.getvalue()


def terms_csv(row: Result) -> str:
    """Return the terms of one step with every digit."""
    names = ("term", "at", "yours", "needed", "difference", "uncertainty", "differs", "required")
    return _structs_csv(names, row.terms)


def claims_csv(claims: Sequence[ClaimResult]) -> str:
    """Return the claims with every digit of their orders."""
    return _structs_csv(("scheme", "problem", *CLAIM), claims)


def table_csv(table: Table) -> str:
    """Return a table of text as CSV."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerows([table.headings, *table.rows])
    return out.getvalue()


def markdown(table: Table) -> str:
    """Return a table in Markdown, numbers to the right."""
    rule = ["---:" if n in table.numeric else "---" for n in range(len(table.headings))]
    lines = [[escape_markdown(cell) for cell in row] for row in (table.headings, *table.rows)]
    lines.insert(1, rule)
    return "".join(f"| {' | '.join(line)} |\n" for line in lines)


def latex(table: Table) -> str:
    """Return a table in LaTeX, with rules of the package booktabs; needs UTF-8."""
    columns = "".join("r" if n in table.numeric else "l" for n in range(len(table.headings)))
    head, *body = [
        " & ".join(escape_latex(numbers.typeset(cell)) for cell in row) + r" \\"
        for row in (table.headings, *table.rows)
    ]
    lines = [rf"\begin{{tabular}}{{{columns}}}", r"\toprule", head, r"\midrule", *body]
    return "\n".join([*lines, r"\bottomrule", r"\end{tabular}", ""])


def _structs_csv(names: Sequence[str], rows: Sequence[object]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(names)
    for row in rows:
        values = [getattr(row, name) for name in names]
        plain = [value.value if isinstance(value, Enum) else value for value in values]
        writer.writerow(["" if value is None else value for value in plain])
    return out.getvalue()


def escape_latex(text: str) -> str:
    """Return a text that LaTeX sets as it is; what it has no letter for is a question mark."""
    out, raised = [], ""
    for letter in f"{text}\0":
        if letter in SUPERSCRIPTS:
            raised += SUPERSCRIPTS[letter]
            continue
        if raised:
            out.append(f"$^{{{raised}}}$")
            raised = ""
        if letter in LATEX:
            out.append(LATEX[letter])
        elif letter in GREEK:
            out.append(rf"$\{GREEK[letter]}$")
        elif letter == "\0" or (not letter.isprintable()):
            out.append("" if letter == "\0" else " ")
        else:
            out.append(letter if ord(letter) < 0x180 else "?")
    return "".join(out)


def escape_markdown(text: str) -> str:
    """Return a text that Markdown shows as it is, on one line of a table."""
    plain = " ".join(numbers.typeset(text).split())
    return "".join(f"\\{letter}" if letter in r"\`*_[]<>|#~&!" else letter for letter in plain)
