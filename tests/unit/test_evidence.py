"""The evidence file: its schema, and how it is read and written."""

import json
from pathlib import Path

import jsonschema
import msgspec
import numpy as np
import pytest

import sdebench as sb
from sdebench.errors import BadEvidenceFile
from sdebench.evidence import FORMAT, Evidence
from sdebench.verdict import Verdict

BOTH = ["supported_evidence", "refuted_evidence"]


@pytest.fixture(params=BOTH)
def evidence(request) -> sb.Evidence:
    return request.getfixturevalue(request.param)


@pytest.fixture
def saved(evidence, tmp_path) -> Path:
    path = tmp_path / "evidence.json"
    evidence.save(path)
    return path


def test_what_was_saved_is_loaded_again(evidence, saved):
    assert sb.load(saved) == evidence


def test_a_path_may_be_a_string(evidence, saved):
    assert sb.load(str(saved)) == evidence


def test_a_saved_file_is_json_with_the_format_first(saved):
    assert next(iter(json.loads(saved.read_text()))) == "format"
    assert json.loads(saved.read_text())["format"] == FORMAT


def test_a_saved_file_ends_with_a_line(saved):
    assert saved.read_bytes().endswith(b"}\n")


def test_the_published_schema_is_a_schema():
    jsonschema.Draft202012Validator.check_schema(sb.schema())


def test_the_published_schema_accepts_real_evidence(saved):
    jsonschema.Draft202012Validator(sb.schema()).validate(json.loads(saved.read_text()))


def broken(content: dict, *where_and_value) -> dict:
    *where, last, value = where_and_value
    place = content
    for key in where:
        place = place[key]
    if value is KeyError:
        del place[last]
    else:
        place[last] = value
    return content


BREAKS = {
    "a verdict that there is not": ("verdict", "maybe"),
    "a claim without its verdict": ("claims", 0, "verdict", KeyError),
    "an order that is text": ("claims", 0, "order", "one"),
    "a kind that there is not": ("results", 0, "kind", "global"),
    "steps that are no whole number": ("results", -1, "rungs", 0, "steps", 4.5),
    "a negative count": ("results", -1, "rungs", 0, "non_finite", -1),
    "rungs that are no list": ("results", 0, "rungs", {}),
    "no provenance": ("provenance", KeyError),
}


@pytest.mark.parametrize("change", BREAKS.values(), ids=BREAKS)
def test_the_published_schema_rejects_broken_evidence(supported_evidence, tmp_path, change):
    supported_evidence.save(tmp_path / "e.json")
    content = broken(json.loads((tmp_path / "e.json").read_text()), *change)
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.Draft202012Validator(sb.schema()).validate(content)


PLACES = {
    "a verdict that there is not": ("`$.verdict`", ("verdict", "maybe")),
    "an order that is text": ("`$.claims[0].order`", ("claims", 0, "order", "one")),
    "steps that are no whole number": (
        "`$.results[0].cost.paths`",
        ("results", 0, "cost", "paths", 4.5),
    ),
    "a claim without its verdict": ("`$.claims[1]`", ("claims", 1, "verdict", KeyError)),
}


@pytest.mark.parametrize(("place", "change"), PLACES.values(), ids=PLACES)
def test_broken_evidence_is_refused_with_the_place_in_the_file(
    supported_evidence, tmp_path, place, change
):
    path = tmp_path / "e.json"
    supported_evidence.save(path)
    path.write_text(json.dumps(broken(json.loads(path.read_text()), *change)))
    with pytest.raises(BadEvidenceFile) as caught:
        sb.load(path)
    assert place in str(caught.value)
    assert str(path) in str(caught.value)


def test_a_missing_file_is_told(tmp_path):
    with pytest.raises(BadEvidenceFile, match="No such file"):
        sb.load(tmp_path / "none.json")


def test_a_directory_is_told(tmp_path):
    with pytest.raises(BadEvidenceFile, match="directory"):
        sb.load(tmp_path)


@pytest.mark.parametrize(
    "content",
    [b"", b"not json", b'"text"', b"[]", b"null", b"\xff\xfe", b'{"format": 1}', b"{}"],
    ids=["empty", "words", "a string", "a list", "null", "no text", "format a number", "no format"],
)
def test_what_is_no_evidence_is_told(tmp_path, content):
    path = tmp_path / "e.json"
    path.write_bytes(content)
    with pytest.raises(BadEvidenceFile, match="not a readable evidence file"):
        sb.load(path)


@pytest.mark.parametrize("kept", [0.1, 0.5, 0.99], ids="{:.0%}".format)
def test_a_truncated_file_is_told(saved, kept):
    content = saved.read_bytes()
    saved.write_bytes(content[: int(kept * len(content))])
    with pytest.raises(BadEvidenceFile, match="truncated"):
        sb.load(saved)


def test_a_newer_format_is_told_by_its_name(saved):
    saved.write_text(saved.read_text().replace(FORMAT, "sdebench-evidence/2"))
    with pytest.raises(BadEvidenceFile, match=r"'sdebench-evidence/2'.*'sdebench-evidence/1'"):
        sb.load(saved)


def test_a_newer_format_is_told_even_where_nothing_else_is_known(tmp_path):
    path = tmp_path / "e.json"
    path.write_text('{"format": "sdebench-evidence/2", "verdict": {"all": "new"}}')
    with pytest.raises(BadEvidenceFile, match="this version reads"):
        sb.load(path)


@pytest.mark.parametrize("literal", ["NaN", "Infinity", "-Infinity"])
def test_a_literal_that_json_does_not_have_is_refused(saved, literal):
    content = json.loads(saved.read_text())
    content["claims"][0]["order"] = float(literal.replace("Infinity", "inf"))
    saved.write_text(json.dumps(content))
    assert literal in saved.read_text()
    with pytest.raises(BadEvidenceFile, match="malformed"):
        sb.load(saved)


def test_evidence_on_a_step_that_fails_on_other_parameters_is_loaded_again(tmp_path):
    """Such a step has no finite limit of its terms, and the file must say so readably."""

    @sb.scheme(strong=0.5)
    def narrow(sde, t, x, h, noise):
        inside = (
            0 * (0.45 - sde.params["sigma"]) ** 0.5 if sde.params["sigma"] < 0.45 else float("nan")
        )
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw + inside

    evidence = sb.measure(narrow, on="gbm", looks=1, threads=1)
    evidence.save(tmp_path / "e.json")
    assert sb.load(tmp_path / "e.json").verdict is Verdict.REFUTED


def test_evidence_on_a_step_whose_terms_have_no_finite_limit_is_loaded_again(tmp_path):
    """It keeps its contract, at h near T and near 0, and fails between."""

    @sb.scheme(strong=0.5)
    def fails_on_short_steps(sde, t, x, h, noise):
        whole = x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
        return whole * (np.nan if 1e-30 < h < 1e-4 else 1.0)

    evidence = sb.measure(fails_on_short_steps, on="gbm", looks=1, threads=1)
    evidence.save(tmp_path / "e.json")
    loaded = sb.load(tmp_path / "e.json")
    assert loaded == evidence
    assert None in {term.yours for row in loaded.results for term in row.terms}
    content = json.loads((tmp_path / "e.json").read_text())
    jsonschema.Draft202012Validator(sb.schema()).validate(content)


def test_a_file_nested_too_deeply_is_told(tmp_path):
    path = tmp_path / "e.json"
    path.write_text('{"format": "x", "further": ' + "[" * 100_000)
    with pytest.raises(BadEvidenceFile, match="nested too deeply"):
        sb.load(path)


def test_further_fields_are_read_over(evidence, saved):
    content = json.loads(saved.read_text()) | {"later": {"addition": [1, 2]}}
    saved.write_text(json.dumps(content))
    assert sb.load(saved) == evidence


def test_evidence_cannot_be_changed(supported_evidence):
    with pytest.raises(AttributeError):
        supported_evidence.verdict = Verdict.REFUTED


def test_the_exit_code_is_that_of_the_verdict(refuted_evidence):
    assert refuted_evidence.exit_code == Verdict.REFUTED.exit_code


def test_a_notebook_shows_a_table(supported_evidence):
    assert supported_evidence._repr_html_().startswith("<table>")


def test_the_types_are_the_schema():
    assert sb.schema()["$schema"].startswith("https://json-schema.org/")
    names = set(sb.schema()["$defs"])
    assert {"Evidence", "Result", "Rung", "Term", "ClaimResult", "Provenance", "Cost"} <= names
    assert msgspec.json.schema(Evidence)["$defs"] == sb.schema()["$defs"]
