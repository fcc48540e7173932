"""Evidence survives its file, whatever it holds; parameters survive their text."""

import os
import tempfile
from pathlib import Path

import jsonschema
import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import sdebench as sb
from sdebench import evidence as types
from sdebench.discovery import problems
from sdebench.verdict import Verdict

numbers = st.floats(allow_nan=False, allow_infinity=False)
maybe = st.none() | numbers
text = st.text(st.characters(exclude_categories=["Cs"]), max_size=20)
counts = st.integers(0, 2**63 - 1)


rungs = st.builds(
    types.Rung,
    steps=st.integers(1, 2**40),
    h=numbers,
    error=maybe,
    uncertainty=maybe,
    counts=st.booleans(),
    mean_absolute=maybe,
    local_order=maybe,
    largest_share=maybe,
    non_finite=counts,
)
terms = st.builds(
    types.Term,
    term=text,
    at=text,
    yours=numbers,
    needed=numbers,
    difference=numbers,
    uncertainty=numbers,
    differs=st.booleans(),
    required=st.booleans(),
)
costs = st.builds(
    types.Cost, sample=text, seconds=numbers, normals=counts, paths=counts, looks=counts
)
limits = st.builds(types.DetectionLimit, plateau=numbers, drift=maybe, diffusion=maybe)
results = st.builds(
    types.Result,
    scheme=text,
    problem=text,
    kind=st.sampled_from(["contract", "one-step", "strong", "weak"]),
    route=st.sampled_from([None, "quadrature", "propagated", "sampled"]),
    functional=st.none() | text,
    claimed=maybe,
    order=maybe,
    low=maybe,
    high=maybe,
    exact=st.booleans(),
    verdict=st.sampled_from(Verdict),
    sentence=text,
    rungs=st.lists(rungs, max_size=3),
    cost=costs,
    bears_on=st.sampled_from([None, "strong", "weak"]),
    extrapolated=maybe,
    at=st.sampled_from([None, "horizon", "grid"]),
    reference=maybe,
    trusted=st.booleans(),
    detection_limit=st.none() | limits,
    terms=st.lists(terms, max_size=2),
)
claims = st.builds(
    types.ClaimResult,
    scheme=text,
    problem=text,
    kind=st.sampled_from(["contract", "strong", "weak"]),
    claimed=maybe,
    order=maybe,
    low=maybe,
    high=maybe,
    exact=st.booleans(),
    verdict=st.sampled_from(Verdict),
    sentence=text,
)
provenances = st.builds(
    types.Provenance,
    sdebench=text,
    numpy=text,
    python=text,
    platform=text,
    created=text,
    command=text,
    seed=st.integers(0, 2**64 - 1),
    confidence=numbers,
    tolerance=numbers,
    steps=st.lists(st.integers(1, 2**40), max_size=5),
    looks=st.none() | st.integers(0, 60),
    budget=maybe,
    threads=st.integers(1, 256),
    seconds=numbers,
)
evidences = st.builds(
    types.Evidence,
    verdict=st.sampled_from(Verdict),
    provenance=provenances,
    claims=st.lists(claims, max_size=2),
    results=st.lists(results, max_size=2),
)


@settings(max_examples=60, deadline=None)
@given(evidences)
def test_evidence_survives_its_file(evidence):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "evidence.json"
        evidence.save(path)
        assert sb.load(path) == evidence
        assert os.listdir(folder) == ["evidence.json"]


@settings(max_examples=40, deadline=None)
@given(evidences)
def test_all_evidence_is_valid_by_the_published_schema(evidence):
    content = msgspec.json.decode(msgspec.json.encode(evidence))
    jsonschema.Draft202012Validator(sb.schema()).validate(content)


@settings(max_examples=40, deadline=None)
@given(evidences, st.data())
def test_a_file_cut_anywhere_is_refused_and_never_half_read(evidence, data):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "evidence.json"
        evidence.save(path)
        content = path.read_bytes().rstrip()
        path.write_bytes(content[: data.draw(st.integers(0, len(content) - 1))])
        with pytest.raises(sb.SdebenchError):
            sb.load(path)


@settings(max_examples=30, deadline=None)
@given(st.binary(max_size=60) | st.text(max_size=60).map(str.encode))
def test_what_is_no_evidence_is_refused_by_one_error(content):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "evidence.json"
        path.write_bytes(content)
        with pytest.raises(sb.SdebenchError):
            sb.load(path)


def admitted(parameter: sb.Parameter):
    return numbers.filter(lambda value: parameter.above < value < parameter.below)


@settings(max_examples=60, deadline=None)
@given(st.data())
@pytest.mark.parametrize("name", list(problems()))
def test_parameters_survive_their_text(name, data):
    declared = problems()[name].declared
    chosen = data.draw(st.lists(st.sampled_from(sorted(declared)), unique=True))
    values = {parameter: data.draw(admitted(declared[parameter])) for parameter in chosen}
    typed = name + ":" + ",".join(f"{n}={v!r}" for n, v in values.items())
    found = sb.problem(typed)
    assert found.label == typed
    assert {n: found.params[n] for n in values} == values


@settings(max_examples=60, deadline=None)
@given(st.floats(0.0, exclude_min=True, allow_infinity=False))
def test_the_label_of_a_problem_gives_the_problem_again(value):
    problem = sb.problem("gbm", sigma=value)
    assert dict(sb.problem(problem.label).params) == dict(problem.params)
