"""The rungs of the evidence file, and the parts of a sample that they keep."""

import math

import numpy as np
import pytest
from scipy import stats

from sdebench.sample import PARTS
from tests.tolerance import FALSE_ALARM, round_off


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
    """Both are variances of the same mean: Fisher's F, of 31 degrees or more each, by SciPy.

    It would catch parts that are sums, or weak ones that are not adjusted.
    """
    row = next(r for r in sampled_evidence.results if r.kind == kind and r.route == "sampled")
    low, high = stats.f.ppf([FALSE_ALARM / 2, 1 - FALSE_ALARM / 2], PARTS - 1, PARTS - 1)
    quantile = stats.t.isf(0.025, PARTS - 1)
    for rung in row.rungs:
        variance = np.var(rung.parts, ddof=1) / PARTS
        width = 2 * rung.error * rung.uncertainty if kind == "strong" else rung.uncertainty
        assert low < variance / (width / quantile) ** 2 < high
