"""The trend of a history: one line a kind of error, and what its figures hold."""

import pytest
from sdebench.reports import trend

from sdebench.history import Point
from tests.tolerance import round_off


def point(run, constant, kind="strong", **more):
    width = 0.01 if constant is not None else None
    names = {"scheme": "desk.py:step", "problem": "gbm", "functional": None, "at": None}
    made = {"run": run, "created": "2026-12-01", "revision": f"{run}" * 40, "exit_code": 0}
    return Point(
        **(made | names | {"kind": kind, "exponent": 1.0, "step_seconds": 1e-8 * run} | more),
        constant=constant,
        low=None if constant is None else constant - width,
        high=None if constant is None else constant + width,
    )


POINTS = [point(1, 1.0), point(1, None, "weak"), point(2, 1.25), point(2, None, "weak")]


def test_a_row_says_how_far_the_constant_has_moved_since_the_first_run():
    strong, weak = trend.trend_table(POINTS).rows
    assert strong[2:7] == ("strong", "2", "1.000 ± 0.010", "1.250 ± 0.010", "+25.00%")
    assert strong[8] == "222222222222"
    assert weak[4:7] == ("none", "none", "")


def test_the_figure_of_constants_holds_them_with_their_bounds():
    axes = trend.constants([p for p in POINTS if p.kind == "strong"]).axes[0]
    (bars,) = axes.containers
    assert list(bars.lines[0].get_ydata()) == [1.0, 1.25]
    (segments,) = [collection.get_segments() for collection in bars.lines[2]]
    assert [abs(s[1][1] - s[0][1] - 0.02) <= round_off(1.25, 8) for s in segments] == [True, True]


def test_the_figure_of_costs_holds_the_times():
    axes = trend.costs([p for p in POINTS if p.kind == "strong"]).axes[0]
    assert list(axes.lines[0].get_ydata()) == [1e6 * 1e-8, 1e6 * 2e-8]


def test_the_page_has_a_figure_of_each_constant_that_there_is(tmp_path):
    page = trend.write_trend(POINTS, tmp_path / "out")
    names = {p.name for p in (tmp_path / "out" / "figures").iterdir()}
    kinds = {f"trend--desk.py-step-on-gbm-strong--{what}" for what in ("constant", "cost")}
    assert names == {f"{kind}.{ending}" for kind in kinds for ending in ("svg", "pdf", "png")}
    assert page.read_text().count("<figure>") == 2


@pytest.mark.parametrize("points", [[], [point(1, None, step_seconds=None)]], ids=["none", "bare"])
def test_a_history_without_anything_to_draw_has_a_page(tmp_path, points):
    assert "<figure>" not in trend.write_trend(points, tmp_path / "out").read_text()


def test_what_users_wrote_is_shown_as_text(tmp_path):
    hostile = [point(1, 1.0, scheme="<script>alert(1)</script>")]
    page = trend.write_trend(hostile, tmp_path / "out").read_text()
    assert "<script>" not in page
    assert "&lt;script&gt;" in page
