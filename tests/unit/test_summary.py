"""The verdict in a sentence, the matrix of claims, the Markdown for a CI job."""

import msgspec
import pytest
from sdebench.reports.sections import sections
from sdebench.reports.summary import cells, faults, matrix, summary, verdict_sentence

from sdebench.verdict import Verdict


def judged(evidence, *verdicts):
    """Return evidence whose claims have these verdicts."""
    claims = [
        msgspec.structs.replace(claim, verdict=verdict)
        for claim, verdict in zip(evidence.claims, verdicts, strict=True)
    ]
    return sections([msgspec.structs.replace(evidence, claims=claims)])


@pytest.mark.parametrize(
    ("verdicts", "sentence"),
    [
        ("supported supported", "All 2 claims of 1 scheme on 1 problem are supported."),
        (
            "refuted supported",
            "Of 2 claims of 1 scheme on 1 problem, 1 is refuted and 1 is supported.",
        ),
        ("undecided undecided", "Of 2 claims of 1 scheme on 1 problem, 2 are undecided."),
        ("not-applicable supported", "The claim of 1 scheme on 1 problem is supported."),
        ("not-applicable not-applicable", "No claim applies to any of these problems."),
    ],
)
def test_the_verdict_is_one_sentence(supported_evidence, verdicts, sentence):
    found = judged(supported_evidence, *map(Verdict, verdicts.split()))
    assert verdict_sentence(found) == sentence


def test_what_is_refuted_comes_before_what_is_undecided(supported_evidence):
    found = judged(supported_evidence, Verdict.UNDECIDED, Verdict.REFUTED)
    assert [claim.verdict.value for _, claim in faults(found)] == ["refuted", "undecided"]


def test_a_cell_has_the_order_its_claim_and_the_verdict(supported_evidence):
    (section,) = sections([supported_evidence])
    (cell,) = cells(section, "strong")
    order = supported_evidence.claims[0].order
    assert (cell.measured[:6], cell.claimed, cell.mark) == (f"{order:.4f}", "1", "✓")
    assert str(cell) in matrix([section]).rows[0]


def test_the_summary_is_the_verdict_and_one_table(supported_evidence):
    lines = summary(sections([supported_evidence])).splitlines()
    assert lines[0] == "**All 2 claims of 1 scheme on 1 problem are supported.**"
    assert sum(line.startswith("| ---") for line in lines) == 1
    assert lines[-1].startswith("| milstein | gbm |")


def test_the_summary_tells_what_is_refuted_and_why(refuted_evidence):
    text = summary(sections([refuted_evidence]))
    assert "refuted" in text.splitlines()[0]
    (told,) = [line for line in text.splitlines() if line.startswith("- **")]
    assert "One-step evidence" in told
    assert "dw²" in told
