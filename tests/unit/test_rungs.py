"""The rungs of the evidence file, and the parts of a sample that they keep."""

import math

import pytest

from sdebench.sample import PARTS
from tests.tolerance import round_off


def test_the_parts_of_a_sample_give_its_error(sampled_evidence):
    """Each is kept to eight digits; it would catch parts that are not adjusted as the error is."""
    rows = [row for row in sampled_evidence.results if row.route == "sampled"]
    assert len(rows) == 4
    for row in rows:
        for rung in row.rungs:
            assert len(rung.parts) == PARTS
            measure = rung.error**2 if row.kind == "strong" else rung.error
            kept = 0.5e-7 * max(map(abs, rung.parts)) + round_off(measure, 1000)
            assert abs(math.fsum(rung.parts) / PARTS - measure) <= kept


def test_what_is_propagated_or_a_check_keeps_no_parts(supported_evidence):
    assert all(not rung.parts for row in supported_evidence.results for rung in row.rungs)


@pytest.mark.parametrize("kind", ["strong", "weak"])
def test_the_parts_scatter_as_the_uncertainty_says(sampled_evidence, kind):
    """Of 32 parts against 64 batches of the same paths: within a factor that chance never has."""
    row = next(r for r in sampled_evidence.results if r.kind == kind and r.route == "sampled")
    for rung in row.rungs:
        mean = math.fsum(rung.parts) / PARTS
        spread = math.sqrt(math.fsum((p - mean) ** 2 for p in rung.parts) / (PARTS - 1) / PARTS)
        width = 2 * rung.error * rung.uncertainty if kind == "strong" else rung.uncertainty
        assert 0.5 < 2 * spread / width < 2
