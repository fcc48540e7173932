"""The accepted baseline: what it keeps, how it is laid out, and what is refused."""

import json

import msgspec
import pytest

from sdebench.acceptance import baseline_of
from sdebench.baseline import load, save
from sdebench.errors import BadBaseline


@pytest.fixture
def baseline(sampled_evidence):
    return baseline_of(sampled_evidence, ("strong", "weak"), 1, None, "as first measured")


@pytest.fixture
def file(baseline, tmp_path):
    path = tmp_path / "b.json"
    save(baseline, path)
    return path


def test_it_is_read_as_it_was_written(baseline, file):
    assert load(file) == baseline


def test_it_keeps_every_error_to_the_last_bit(baseline, sampled_evidence):
    kept = {(r.kind, r.functional): [x.error for x in r.rungs] for r in baseline.rows}
    rows = [r for r in sampled_evidence.results if r.kind in ("strong", "weak")]
    assert kept == {(r.kind, r.functional): [x.error for x in r.rungs] for r in rows}


def test_checks_and_what_is_not_guarded_are_left_out(supported_evidence):
    kept = baseline_of(supported_evidence, ("strong",), 1, None, "")
    assert [(r.kind, r.route) for r in kept.rows] == [("strong", "propagated")]
    assert [c.kind for c in kept.claims] == ["strong"]
    assert {t.kind for t in kept.terms} == {"strong"}


def test_a_claim_a_term_and_a_rung_stand_on_a_line_each(baseline, file):
    lines = file.read_text().splitlines()
    n_rungs = sum(len(row.rungs) for row in baseline.rows)
    assert sum(line.lstrip().startswith('{"steps": ') for line in lines) == n_rungs
    assert sum('"claimed": ' in line for line in lines) == len(baseline.claims)
    assert sum('"coefficient": ' in line for line in lines) == len(baseline.terms)


def test_what_is_measured_in_another_order_gives_the_same_file(sampled_evidence, baseline):
    turned = msgspec.structs.replace(
        sampled_evidence,
        claims=sampled_evidence.claims[::-1],
        results=sampled_evidence.results[::-1],
    )
    again = baseline_of(turned, ("weak", "strong"), 1, None, "as first measured")
    assert (again.claims, again.rows) == (baseline.claims, baseline.rows)


def edited(file, edit):
    content = json.loads(file.read_text())
    edit(content)
    file.write_text(json.dumps(content))


EDITS = {
    "a row twice": (lambda c: c["rows"].append(c["rows"][0]), "twice"),
    "a claim twice": (lambda c: c["claims"].append(c["claims"][0]), "twice"),
    "steps that fall": (lambda c: c["rows"][0]["rungs"].reverse(), "do not rise"),
    "an error that its parts do not give": (
        lambda c: c["rows"][0]["rungs"][0].update(error=9.0),
        "do not give its error",
    ),
    "a negative strong error": (
        lambda c: c["rows"][0]["rungs"][0].update(error=-0.1, parts=[]),
        "negative error",
    ),
    "a negative uncertainty": (
        lambda c: c["rows"][0]["rungs"][0].update(uncertainty=-1.0),
        "uncertainty",
    ),
    "text for an error": (lambda c: c["rows"][0]["rungs"][0].update(error="small"), "error"),
    "no steps at all": (lambda c: c["rows"][0]["rungs"][0].update(steps=0), "steps"),
    "a verdict that is none": (lambda c: c["claims"][0].update(verdict="fine"), "verdict"),
    "an unknown key": (lambda c: c["claims"][0].update(note="x"), "note"),
    "no rows": (lambda c: c.pop("rows"), "rows"),
    "a newer format": (lambda c: c.update(format="sdebench-baseline/2"), "this version reads"),
    "another's": (lambda c: c.update(format="sdebench-evidence/1"), "this version reads"),
}


@pytest.mark.parametrize(("edit", "told"), EDITS.values(), ids=EDITS)
def test_what_no_measurement_wrote_is_refused_in_one_sentence(file, edit, told):
    edited(file, edit)
    with pytest.raises(BadBaseline) as caught:
        load(file)
    assert told in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("content", ["", "null", "[1]", '{"format": 1}', "[" * 100_000, "NaN"])
def test_what_is_no_baseline_at_all_is_refused(file, content):
    file.write_text(content)
    with pytest.raises(BadBaseline, match="no baseline to hold anything against"):
        load(file)


def test_cut_off_anywhere_it_is_refused(file):
    content = file.read_bytes().rstrip()
    for end in range(0, len(content), len(content) // 40):
        file.write_bytes(content[:end])
        with pytest.raises(BadBaseline):
            load(file)


def test_without_one_the_sentence_says_how_to_make_it(tmp_path):
    with pytest.raises(BadBaseline, match="there is none yet; `sdebench accept` makes it"):
        load(tmp_path / "none.json")
