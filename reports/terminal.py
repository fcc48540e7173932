"""Evidence on a terminal: a table of claims, then what the reader must know about each.

Plain text where the output is no terminal; colours are left out where NO_COLOR is set.
"""

import os
import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from itertools import groupby
from time import monotonic
from typing import TextIO

from rich.console import Console
from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn
from rich.table import Table as Grid
from rich.text import Text
from sdebench.reports.advice import advice_table, comparison_table
from sdebench.reports.gate_tables import gate_sentence, gate_table
from sdebench.reports.tables import (
    Table,
    checks,
    claims_table,
    reasons_for_sampling,
    refuted_by_terms,
    rungs_table,
    terms_table,
)

from sdebench.advise import Advice
from sdebench.compare import Comparison
from sdebench.evidence import ClaimResult, Evidence, Result
from sdebench.gate import Gated
from sdebench.verdict import Verdict

Report = Callable[[str, int, int], None]
STYLES = {"supported": "green", "refuted": "bold red", "undecided": "yellow"}
PLAIN_WIDTH = 10_000  # columns where the output is no terminal: rows are not folded


class Page(Console):
    """A console whose reader may leave: the process then ends as if by the signal."""

    def on_broken_pipe(self) -> None:
        """End quietly, with the exit code of a process that a closed pipe ends."""
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise SystemExit(141)


def console(stream: TextIO | None = None) -> Console:
    """Return a console on `stream` (standard output by default)."""
    found = Page(file=stream or sys.stdout, highlight=False, emoji=False, markup=False)
    if not found.is_terminal:
        found.width = PLAIN_WIDTH
    return found


def show_sentences(evidence: Evidence, on: Console) -> None:
    """Print a sentence on each claim that is not supported."""
    for claim in evidence.claims:
        if claim.verdict is not Verdict.SUPPORTED:
            _show_sentence(claim, on)


def show_claim(evidence: Evidence, claim: ClaimResult, on: Console) -> None:
    """Print the sentence on a claim, and the errors and terms that bear on it."""
    _show_sentence(claim, on)
    pair = claim.scheme, claim.problem
    for row in evidence.results:
        if (row.scheme, row.problem) != pair or row.bears_on != claim.kind or row.check:
            continue
        if refuted_by_terms(row):
            on.print()
            show_table(terms_table(row), on)
        elif row.rungs and row.kind != "one-step":
            on.print()
            show_table(rungs_table(row), on)


def show_evidence(evidence: Evidence, on: Console) -> None:
    """Print the claims, a sentence on each that is not supported, and the tables behind it."""
    _show_claims(claims_table(evidence), on)
    single = len({(claim.scheme, claim.problem) for claim in evidence.claims}) == 1
    if any(claim.verdict is not Verdict.SUPPORTED for claim in evidence.claims):
        on.print()
        show_sentences(evidence, on)
    shown = [
        row for row in evidence.results if (single and not row.check) or _explains(row, evidence)
    ]
    for row in shown:
        if row.terms and (single or refuted_by_terms(row)):
            on.print()
            show_table(terms_table(row), on)
        if row.rungs and row.kind != "one-step":
            on.print()
            show_table(rungs_table(row), on)
            if row.verdict is Verdict.SUPPORTED:
                on.print(Text(row.sentence), soft_wrap=True)
    notes = [*reasons_for_sampling(evidence.results), checks(evidence.results)]
    on.print()
    for note in filter(None, notes):
        on.print(Text(note), soft_wrap=True)
    on.print(_summary(evidence), soft_wrap=True)


def show_advice(advice: Sequence[Advice], on: Console) -> None:
    """Print the steps that each scheme needs, with a sentence on what was not measured itself."""
    show_table(advice_table(advice), on)
    for each in advice:
        if each.how != "measured":
            on.print(Text(f"{each.scheme}: {each.sentence}"), soft_wrap=True)


def show_comparisons(comparisons: Sequence[Comparison], on: Console) -> None:
    """Print every comparison as a table with the sentence that sums it up."""
    for comparison in comparisons:
        show_table(comparison_table(comparison), on)
        on.print(Text(comparison.sentence), soft_wrap=True)
        on.print()


def show_gate(gated: Gated, on: Console) -> None:
    """Print what is red or in doubt, what else moved, and the outcome."""
    for sentence in (*gated.sentences, *gated.notes):
        on.print(Text(sentence), soft_wrap=True)
    table = gate_table(gated, all_rows=False)
    if table.rows:
        on.print()
        show_table(table, on)
        on.print()
    on.print(Text(gate_sentence(gated)), soft_wrap=True)


def show_table(table: Table, on: Console) -> None:
    """Print a table without rules: headings, then aligned rows."""
    if table.title:
        on.print(Text(table.title, style="bold"), soft_wrap=True)
    on.print(_grid(table))


def _show_claims(table: Table, on: Console) -> None:
    """Print the claims as one table; where it is too wide, under a heading for each pair."""
    widths = [max(map(len, column)) + 2 for column in zip(table.headings, *table.rows, strict=True)]
    if sum(widths) <= on.width:
        show_table(table, on)
        return
    for pair, rows in groupby(table.rows, key=lambda row: row[:2]):
        own = [row[2:] for row in rows]
        numeric = frozenset(i - 2 for i in table.numeric)
        show_table(Table(" on ".join(pair), table.headings[2:], own, numeric), on)


def _grid(table: Table) -> Grid:
    grid = Grid(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for i, heading in enumerate(table.headings):
        grid.add_column(
            Text(heading), justify="right" if i in table.numeric else "left", overflow="fold"
        )
    for row in table.rows:
        grid.add_row(*(Text(cell, style=STYLES.get(cell, "")) for cell in row))
    return grid


@contextmanager
def progress_bar(on: Console, quiet: bool) -> Iterator[Report | None]:
    """Yield a progress report that draws a bar once the work has taken over a second."""
    if quiet or not on.is_terminal:
        yield None
        return
    begin = monotonic()
    columns = (TextColumn("{task.description}", markup=False), BarColumn(), TaskProgressColumn())
    bar = Progress(*columns, console=on, transient=True)
    task = bar.add_task("", total=None)

    def report(what: str, done: int, total: int) -> None:
        if not bar.live.is_started and monotonic() - begin > 1.0:
            bar.start()
        bar.update(task, description=what, completed=done, total=total)

    try:
        yield report
    finally:
        if bar.live.is_started:
            bar.stop()


def _explains(row: Result, evidence: Evidence) -> bool:
    """Whether a row's table says why a claim is not supported."""
    if refuted_by_terms(row):
        return True
    if row.kind not in ("strong", "weak") or not row.counts:
        return False
    return row.verdict in (Verdict.REFUTED, Verdict.UNDECIDED) and not any(
        other.scheme == row.scheme
        and other.problem == row.problem
        and other.bears_on == row.kind
        and refuted_by_terms(other)
        for other in evidence.results
    )


def _show_sentence(claim: ClaimResult, on: Console) -> None:
    head = f"{claim.scheme} on {claim.problem}, {claim.kind}: "
    verdict = Text(claim.verdict.value, style=STYLES.get(claim.verdict.value, ""))
    on.print(Text(head) + verdict + Text(f". {claim.sentence}"), soft_wrap=True)


def _summary(evidence: Evidence) -> Text:
    counts = _counted(claim.verdict.value for claim in evidence.claims)
    p = evidence.provenance
    verdict = Text(evidence.verdict.value, style=STYLES.get(evidence.verdict.value, ""))
    tail = (
        f" ({counts}). {p.confidence:.0%} confidence over the whole run, tolerance "
        f"{p.tolerance:g}, seed {p.seed}, {p.seconds:.1f} s."
    )
    return Text("Verdict: ") + verdict + Text(tail)


def _counted(words: Iterable[str]) -> str:
    found: dict[str, int] = {}
    for word in words:
        found[word] = found.get(word, 0) + 1
    return ", ".join(f"{n} {word}" for word, n in found.items()) or "no claims"
