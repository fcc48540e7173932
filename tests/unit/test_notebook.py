"""Evidence as a table in a notebook."""

from html.parser import HTMLParser

import msgspec
import pytest
from sdebench.reports.notebook import evidence_html


class Seen(HTMLParser):
    """The tags and the text that a browser would see."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.text = ""

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)

    def handle_data(self, data):
        self.text += data


def seen(evidence) -> Seen:
    parser = Seen()
    parser.feed(evidence_html(evidence))
    parser.close()
    return parser


HOSTILE = '<script>alert("x")</script> & <b>'


@pytest.mark.parametrize("field", ["scheme", "problem", "sentence"])
def test_what_users_wrote_is_shown_as_text(refuted_evidence, field):
    replace = msgspec.structs.replace
    claims = [replace(c, **{field: HOSTILE}) for c in refuted_evidence.claims]
    rows = [replace(r, **{field: HOSTILE}) for r in refuted_evidence.results]
    found = seen(replace(refuted_evidence, claims=claims, results=rows))
    assert "script" not in found.tags
    assert HOSTILE in found.text


def test_there_is_a_row_for_every_claim_and_behind_a_click_for_every_rung(supported_evidence):
    found = seen(supported_evidence)
    assert found.tags[: found.tags.index("details")].count("tr") == 1 + 2
    measured = [row for row in supported_evidence.results if row.rungs and not row.check]
    assert found.tags.count("details") == len(measured)
    assert found.tags.count("tr") == 1 + 2 + sum(1 + len(row.rungs) for row in measured)


def test_the_verdict_is_told(supported_evidence):
    assert seen(supported_evidence).text.endswith("Verdict: supported")


def test_a_refuted_claim_is_told_with_its_sentence(refuted_evidence):
    assert refuted_evidence.claims[0].sentence in seen(refuted_evidence).text


def test_a_supported_claim_is_told_by_its_row_alone(supported_evidence):
    assert supported_evidence.claims[0].sentence not in seen(supported_evidence).text
