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
    claims = [msgspec.structs.replace(c, **{field: HOSTILE}) for c in refuted_evidence.claims]
    found = seen(msgspec.structs.replace(refuted_evidence, claims=claims))
    assert "script" not in found.tags
    assert HOSTILE in found.text


def test_there_is_a_row_for_the_headings_and_for_every_claim(supported_evidence):
    assert seen(supported_evidence).tags.count("tr") == 1 + len(supported_evidence.claims)


def test_the_verdict_is_told(supported_evidence):
    assert seen(supported_evidence).text.endswith("Verdict: supported")


def test_a_refuted_claim_is_told_with_its_sentence(refuted_evidence):
    assert refuted_evidence.claims[0].sentence in seen(refuted_evidence).text


def test_a_supported_claim_is_told_by_its_row_alone(supported_evidence):
    assert supported_evidence.claims[0].sentence not in seen(supported_evidence).text
