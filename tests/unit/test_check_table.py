"""A sample beside the propagated errors that were held against it."""

import msgspec
from sdebench.reports.check_table import check_table
from sdebench.reports.sections import sections

from tests.tolerance import round_off


def test_a_difference_is_told_in_half_widths_where_both_were_measured(supported_evidence):
    """It would catch an error of another functional or rung beside the sample."""
    (section,) = sections([supported_evidence])
    table = check_table(section.checks, section.measured)
    lines = iter(table.rows)
    for check, row in zip(section.checks, section.measured, strict=True):
        assert (check.kind, check.functional) == (row.kind, row.functional)
        propagated = {rung.steps: rung.error for rung in row.rungs}
        for rung in check.rungs:
            _, steps, sampled, _, other, apart = next(lines)
            assert int(steps) == rung.steps
            if rung.steps not in propagated:
                assert (other, apart) == ("", "")
                continue
            expected = (rung.error - propagated[rung.steps]) / rung.uncertainty
            assert abs(float(apart) - expected) <= 0.005 + round_off(expected, 4), "two decimals"
            assert abs(float(sampled) - float(other)) <= abs(expected) * rung.uncertainty + 1.01 * (
                10.0 ** -len(sampled.partition(".")[2])
            ), "each is cut at the same digit"
    assert next(lines, None) is None


def test_a_sample_that_ran_into_nan_says_so(supported_evidence):
    (section,) = sections([supported_evidence])
    check = section.checks[0]
    lost = msgspec.structs.replace(check.rungs[0], error=None, uncertainty=None)
    table = check_table([msgspec.structs.replace(check, rungs=[lost])], section.measured)
    assert table.rows == [("strong", "4", "NaN or infinity", "", "", "")]
