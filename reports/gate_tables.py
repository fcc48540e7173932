"""A gate's outcome as a sentence, tables and Markdown."""

from collections import Counter

from sdebench.reports.export import escape_markdown, markdown
from sdebench.reports.tables import Table

from sdebench.gate import Gated
from sdebench.regression import Change, worst

UNCHANGED = (Change.SAME_BITS, Change.WITHIN)
COLOURS = {0: "Green", 1: "Red", 3: "Undecided"}


def gate_sentence(gated: Gated) -> str:
    """Return the outcome in one sentence: the colour, and how many things stand how."""
    claims = Counter(str(each) for each in gated.claims)
    errors = Counter(each.change.value for each in gated.rungs)
    red = sum(each.red for each in gated.rungs)
    parts = [_listed("claim", claims), _listed("error", errors)]
    allowed = gated.project.guarded.allowed_change
    beyond = f" {red} beyond the {allowed:.2%} allowed." if red else ""
    return f"{COLOURS[gated.exit_code]}: {'; '.join(filter(None, parts))}; {gated.since}.{beyond}"


def gate_table(gated: Gated, all_rows: bool) -> Table:
    """Return one row a claim and one a kind of error: how it stands, at its worst step size."""
    rows = [
        (each.claim.scheme, each.claim.problem, f"{each.claim.kind} claim", str(each), "")
        for each in gated.claims
        if all_rows or each.red or each.doubtful
    ]
    for row, own in gated.rows:
        most = worst(own)
        what = " ".join(filter(None, (row.kind, row.functional, "error")))
        what += " on the grid" if row.at == "grid" else ""
        if all_rows or most.change not in UNCHANGED:
            mark = " (regression)" if most.red else ""
            rows.append((row.scheme, row.problem, what, f"{most}{mark}", str(most.steps)))
    headings = ("scheme", "problem", "what", "against the baseline", "steps")
    return Table("", headings, rows, frozenset({4}))


def gate_markdown(gated: Gated) -> str:
    """Return the outcome for a job's summary: the sentence, what is wrong, and every row."""
    lines = [f"**{escape_markdown(gate_sentence(gated))}**", ""]
    said = [*gated.sentences, *gated.notes]
    lines += [*(f"- {escape_markdown(sentence)}" for sentence in said), *([""] if said else [])]
    return "\n".join([*lines, markdown(gate_table(gated, all_rows=True))]).rstrip() + "\n"


def _listed(what: str, counts: Counter[str]) -> str:
    total = sum(counts.values())
    if not total:
        return ""
    several = "" if total == 1 else "s"
    return f"{total} {what}{several} ({', '.join(f'{n} {state}' for state, n in counts.items())})"
