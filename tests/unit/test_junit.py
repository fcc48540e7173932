"""JUnit XML of a gate: well-formed whatever users wrote, a case for each claim and each row."""

from pathlib import Path
from xml.etree import ElementTree

import msgspec
import pytest
from sdebench.reports.gate_tables import gate_markdown, gate_sentence, gate_table
from sdebench.reports.junit import junit

from sdebench.acceptance import baseline_of
from sdebench.gate import Gated
from sdebench.project import Guarded, Project
from sdebench.verdict import Verdict

EVIL = "<a>&\"'\x00\x1b\ud800]]>\uffff`|*"


def gated(evidence, then=None, **names):
    replace = msgspec.structs.replace
    evidence = replace(
        evidence,
        claims=[replace(c, **names) for c in evidence.claims],
        results=[replace(r, **names) for r in evidence.results],
    )
    now = baseline_of(evidence, ("strong", "weak"), 1, None, "")
    project = Project(Guarded(schemes=["milstein"]), Path("pyproject.toml"))
    return Gated(project, evidence, now, then or now)


def cases(found):
    suite = ElementTree.fromstring(junit(found)).find("testsuite")
    return suite, suite.findall("testcase")


def test_every_claim_and_every_row_is_a_case(supported_evidence):
    suite, found = cases(gated(supported_evidence))
    assert [case.get("name") for case in found] == [
        "strong claim",
        "weak claim",
        "strong error",
        "weak cos error",
        "weak mean error",
        "weak second-moment error",
    ]
    assert {suite.get(name) for name in ("failures", "errors", "skipped")} == {"0"}
    assert suite.get("tests") == "6"


@pytest.mark.parametrize("field", ["scheme", "problem"])
def test_what_users_wrote_leaves_it_well_formed(refuted_evidence, field):
    replace = msgspec.structs.replace
    found = gated(refuted_evidence, **{field: EVIL.replace("\ud800", "")})
    claims = [replace(c, verdict=Verdict.SUPPORTED) for c in found.then.claims]
    _, shown = cases(gated(found.evidence, replace(found.then, claims=claims)))
    (failure,) = [case.find("failure") for case in shown if case.find("failure") is not None]
    assert "<a>&" in shown[0].get("classname")
    assert "is missing" in failure.text


def test_what_is_no_longer_decided_is_an_error_and_no_failure(supported_evidence):
    replace = msgspec.structs.replace
    undecided = replace(
        supported_evidence,
        claims=[replace(c, verdict=Verdict.UNDECIDED) for c in supported_evidence.claims],
    )
    found = gated(undecided, gated(supported_evidence).now)
    suite, _ = cases(found)
    assert (suite.get("failures"), suite.get("errors")) == ("0", "2")
    assert found.exit_code == 3
    assert gate_sentence(found).startswith("Undecided: 2 claims (2 undecided (accepted as ")


def test_the_summary_shows_every_row_and_escapes_what_users_wrote(supported_evidence):
    text = gate_markdown(gated(supported_evidence, scheme="<b>|x"))
    assert text.startswith("**Green: ")
    assert text.count("\n| ") == 2 + 6
    assert "<b>" not in text.replace("\\<b", "")


def test_the_short_table_is_empty_where_nothing_moved(supported_evidence):
    assert gate_table(gated(supported_evidence), all_rows=False).rows == []
