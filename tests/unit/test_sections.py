"""What a report has a section on, and what its files are named."""

import msgspec
import pytest
from sdebench.reports.sections import by_problem, sections, slug


def renamed(evidence, scheme):
    """Return evidence of which every row and claim is of another scheme."""
    replace = msgspec.structs.replace
    return replace(
        evidence,
        claims=[replace(c, scheme=scheme) for c in evidence.claims],
        results=[replace(r, scheme=scheme) for r in evidence.results],
    )


def test_a_section_holds_its_own_rows(supported_evidence):
    both = [supported_evidence, renamed(supported_evidence, "other")]
    first, second = sections(both)
    assert (first.title, second.title) == ("milstein on gbm", "other on gbm")
    assert {row.scheme for row in second.rows} == {"other"}
    assert len(first.rows) == len(supported_evidence.results)


def test_errors_checks_and_terms_are_told_apart(supported_evidence):
    (section,) = sections([supported_evidence])
    assert [row.route for row in section.measured] == ["propagated"] * 4
    assert [row.kind for row in section.measured] == ["strong", "weak", "weak", "weak"]
    assert [row.check for row in section.checks] == [True] * 4
    assert [row.kind for row in section.one_step] == ["one-step"] * 2


def test_what_was_sampled_says_why_and_what_was_checked_says_by_what(supported_evidence):
    """And a check of which some rows have too heavy a tail says how many are held to it."""
    (section,) = sections([supported_evidence])
    problem, scheme, contract, check = section.notes
    assert contract == "The step keeps every law of its contract."
    assert problem.startswith(
        "gbm: geometric Brownian motion, dX = mu X dt + sigma X dW (Itô), with "
    )
    assert scheme.startswith("milstein: Milstein")
    assert check.startswith("Propagated errors agree with a check on 32768 sampled paths (4 rows, ")
    replace = msgspec.structs.replace
    first = next(row for row in supported_evidence.results if row.check)
    rows = [replace(row, trusted=row is not first) for row in supported_evidence.results]
    (section,) = sections([replace(supported_evidence, results=rows)])
    assert section.notes[-1].endswith("; 1 row with too heavy a tail was not compared.")
    rows = [replace(row, why_sampled="it is so") for row in supported_evidence.results]
    (section,) = sections([replace(supported_evidence, results=rows, about={})])
    assert section.notes[1].endswith("since it is so: milstein on gbm.")


def test_two_sections_never_share_a_file_name(supported_evidence):
    """Not of one pair in two files, and not of names that differ in what a file name leaves out."""
    several = [supported_evidence] * 2 + [renamed(supported_evidence, n) for n in ("a:b", "a/b")]
    names = [section.name for section in sections(several)]
    assert names == ["milstein--gbm", "milstein--gbm-2", "a-b--gbm", "a-b--gbm-2"]


def test_problems_hold_the_sections_on_them(supported_evidence, refuted_evidence):
    found = by_problem(sections([supported_evidence, refuted_evidence]))
    assert {problem: len(own) for problem, own in found.items()} == {"gbm": 2}


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("gbm:mu=1.5,sigma=0.5", "gbm-mu-1.5-sigma-0.5"),
        ("../../etc/passwd", "etc-passwd"),
        ("Größe<x>", "groe-x"),
        ("日本", "unnamed"),
        ("..", "unnamed"),
    ],
)
def test_a_file_name_is_plain(text, name):
    assert slug(text) == name
