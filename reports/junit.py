"""A gate's outcome as JUnit XML, which pipelines read: a case for each claim and each row."""

import re
from xml.etree import ElementTree

from sdebench.reports.gate_tables import gate_table

from sdebench.gate import Gated

# What XML 1.0 can hold (section 2.2); anything else in a user's text becomes a space.
UNFIT = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def junit(gated: Gated) -> bytes:
    """Return the document; what is red fails, what is no longer decided is an error."""
    said = [gated.on_claim(each) for each in gated.claims]
    said += [gated.on_row(row, own) for row, own in gated.rows]
    in_doubt = [each.doubtful and not each.red for each in gated.claims]
    in_doubt += [False] * len(gated.rows)
    rows = gate_table(gated, all_rows=True).rows
    n_told = sum(sentence is not None for sentence in said)
    suite = ElementTree.Element(
        "testsuite",
        name="sdebench gate",
        tests=str(len(rows)),
        failures=str(n_told - sum(in_doubt)),
        errors=str(sum(in_doubt)),
        skipped="0",
        time=f"{gated.evidence.provenance.seconds:.3f}",
        timestamp=gated.evidence.provenance.created,
    )
    for row, sentence, doubtful in zip(rows, said, in_doubt, strict=True):
        scheme, problem, what, state, _ = map(_fit, row)
        case = ElementTree.SubElement(
            suite, "testcase", classname=f"{scheme} on {problem}", name=what
        )
        if sentence is not None:
            outcome = "error" if doubtful else "failure"
            ElementTree.SubElement(case, outcome, message=state).text = _fit(sentence)
    document = ElementTree.Element("testsuites")
    document.append(suite)
    ElementTree.indent(document)
    text: str = ElementTree.tostring(document, encoding="unicode")
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'.encode()


def _fit(text: str) -> str:
    return UNFIT.sub(" ", text)
