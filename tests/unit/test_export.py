"""Tables as CSV, Markdown and LaTeX: what comes out is what went in."""

import csv
import io
import shutil
import subprocess

import pytest
from sdebench.reports import export
from sdebench.reports.tables import Table, terms_table

HOSTILE = (
    "a & b % c $ d # e _ f {g} ~h ^i \\j",
    "<script>alert('x')</script> | `pipe` * star",
    "σ√h → 0, 3.2 × 10⁻⁵ ± 1, −1, “quoted”, 中文, \x07",
    "\\input{secret} \\write18{ls}",
)
TABLE = Table(
    "hostile & co_", ("of", "n_1"), [(text, "-1.5e-05") for text in HOSTILE], frozenset({1})
)


def test_every_digit_of_every_rung_reads_back_from_csv(supported_evidence):
    rows = [row for row in supported_evidence.results if row.kind in ("strong", "weak")]
    read = list(csv.DictReader(io.StringIO(export.rungs_csv(rows))))
    rungs = [(row, rung) for row in rows for rung in row.rungs]
    assert len(read) == len(rungs) > 20
    for line, (row, rung) in zip(read, rungs, strict=True):
        assert (line["kind"], line["functional"]) == (row.kind, row.functional or "")
        assert int(line["steps"]) == rung.steps
        for name in ("h", "error", "uncertainty", "local_order"):
            value = getattr(rung, name)
            assert (float(line[name]) if line[name] else None) == value


def test_every_digit_of_every_term_reads_back_from_csv(refuted_evidence):
    (row, *_) = [row for row in refuted_evidence.results if row.terms]
    read = list(csv.DictReader(io.StringIO(export.terms_csv(row))))
    assert [float(line["yours"]) for line in read] == [term.yours for term in row.terms]
    assert [line["differs"] for line in read] == [str(term.differs) for term in row.terms]


def test_every_digit_of_every_claim_reads_back_from_csv(refuted_evidence):
    read = list(csv.DictReader(io.StringIO(export.claims_csv(refuted_evidence.claims))))
    assert [float(line["order"]) for line in read] == [c.order for c in refuted_evidence.claims]
    assert [line["verdict"] for line in read] == [c.verdict.value for c in refuted_evidence.claims]


def test_text_with_commas_quotes_and_lines_reads_back_from_csv():
    table = Table("", ("a", "b"), [('say "x", then\ny', "1")], frozenset())
    assert list(csv.reader(io.StringIO(export.table_csv(table)))) == [["a", "b"], [*table.rows[0]]]


def test_markdown_has_a_line_a_row_and_as_many_cells_whatever_they_hold():
    lines = export.markdown(TABLE).splitlines()
    assert len(lines) == 2 + len(HOSTILE)
    assert lines[1] == "| --- | ---: |"
    for line in lines:
        assert line.replace("\\|", "").count("|") == 3


@pytest.mark.parametrize("letter", list("|*_<>`[]#\\"))
def test_no_letter_of_a_text_is_markup_in_markdown(letter):
    assert f"\\{letter}" in export.escape_markdown(f"a {letter} b")


def test_powers_of_ten_are_powers_in_latex():
    assert export.escape_latex("3.2 × 10⁻¹²") == r"3.2 $\times$ 10$^{-12}$"


@pytest.mark.parametrize("letter", list("&%$#_{}~^\\"))
def test_no_letter_of_a_text_is_a_command_in_latex(letter):
    """It would catch one that is left as it is: each has a command of its own."""
    escaped = export.escape_latex(letter)
    assert escaped != letter
    assert escaped.startswith("\\")


@pytest.mark.skipif(shutil.which("pdflatex") is None, reason="no LaTeX here; .ci/run installs one")
def test_latex_tables_compile(refuted_evidence, tmp_path):
    """Of terms, and of text that is all specials; an error ends LaTeX with 1."""
    terms = next(row for row in refuted_evidence.results if row.terms)
    tables = "\n\n".join(export.latex(table) for table in (TABLE, terms_table(terms)))
    (tmp_path / "page.tex").write_text(
        "\\documentclass{article}\n\\usepackage[utf8]{inputenc}\n\\usepackage[T1]{fontenc}\n"
        "\\usepackage{booktabs,textcomp}\n\\begin{document}\n" + tables + "\n\\end{document}\n",
        "utf-8",
    )
    done = subprocess.run(
        ["pdflatex", "-interaction=nonstopmode", "-halt-on-error", "page.tex"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        timeout=120,
    )
    assert done.returncode == 0, done.stdout[-2000:]
    assert (tmp_path / "page.pdf").stat().st_size > 0
    assert "script" in export.latex(TABLE)
