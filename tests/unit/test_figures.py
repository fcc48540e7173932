"""Figures hold what the evidence does: each error where it belongs, told apart without colour."""

import dataclasses
import math

import msgspec
import pytest
from matplotlib.container import ErrorbarContainer
from sdebench.reports import figures, inline, render, style
from sdebench.reports.sections import sections

from tests.tolerance import round_off


@pytest.fixture(scope="module")
def section(supported_evidence):
    return sections([supported_evidence])[0]


@pytest.fixture(scope="module")
def convergence(section):
    return figures.convergence(section)


def drawn(figure):
    """Return the points of every row that has error bars."""
    bars = [c for c in figure.axes[0].containers if isinstance(c, ErrorbarContainer)]
    return [bar.lines[0] for bar in bars]


def test_every_error_that_counts_is_a_point(section, convergence):
    for line, row in zip(drawn(convergence), section.measured, strict=True):
        counting = [rung for rung in row.rungs if rung.counts]
        assert list(line.get_xdata()) == [rung.h for rung in counting]
        assert list(line.get_ydata()) == [abs(rung.error) for rung in counting]


def test_an_error_that_does_not_count_is_a_cross(section):
    row = section.measured[0]
    coarse, *rest = row.rungs
    row = msgspec.structs.replace(row, rungs=[msgspec.structs.replace(coarse, counts=False), *rest])
    figure = figures.convergence(type(section)(*_parts(section, [row])))
    crosses = [line for line in figure.axes[0].lines if line.get_marker() == "x"]
    assert [line.get_xdata()[0] for line in crosses] == [coarse.h]
    assert coarse.h not in drawn(figure)[0].get_xdata()


def _parts(section, rows):
    return section.scheme, section.problem, section.name, section.claims, rows


def test_strong_and_weak_are_told_apart_by_mark_and_filling(convergence):
    lines = drawn(convergence)
    assert len({line.get_marker() for line in lines}) == len(lines)
    assert [line.get_markerfacecolor() == "none" for line in lines] == [False, True, True, True]


def test_the_fitted_line_has_the_measured_slope(section, convergence):
    """Through the finest error; it would catch the claimed slope in its place."""
    row = section.measured[0]
    solid = [
        line
        for line in convergence.axes[0].lines
        if line.get_linestyle() == "-" and len(line.get_xdata()) == 2
    ]
    (x, y), order = (solid[0].get_data(), row.order)
    slope = math.log(y[0] / y[1]) / math.log(x[0] / x[1])
    assert abs(slope - order) <= round_off(order, 64)
    assert y[1] == abs(row.rungs[-1].error)


def test_the_claimed_slope_is_dotted_and_below_the_errors(section, convergence):
    dotted = [line for line in convergence.axes[0].lines if line.get_linestyle() == ":"]
    assert len(dotted) == 2  # of the strong and of the weak claim
    for line in dotted:
        (x, y) = line.get_data()
        assert abs(math.log(y[1] / y[0]) / math.log(x[1] / x[0]) - 1.0) <= round_off(1.0, 64)


def test_local_orders_are_those_of_the_evidence(section):
    axes = figures.local_orders(section).axes[0]
    found = [list(line.get_ydata()) for line in axes.lines if line.get_marker() in "os^D"]
    expected = [[r.local_order for r in row.rungs if r.local_order] for row in section.measured]
    assert [points for points in found if len(points) > 1] == expected


def test_a_bar_that_reaches_zero_stays_on_the_axes(section):
    row = section.measured[0]
    wide = [msgspec.structs.replace(r, uncertainty=2 * abs(r.error)) for r in row.rungs]
    row = msgspec.structs.replace(row, rungs=wide)
    figure = figures.convergence(type(section)(*_parts(section, [row])))
    (bars,) = [c for c in figure.axes[0].containers if isinstance(c, ErrorbarContainer)]
    (segments,) = [collection.get_segments() for collection in bars.lines[2]]
    assert all(segment[0][1] > 0 for segment in segments)


def test_a_scheme_that_is_exact_has_figures():
    import sdebench as sb

    evidence = sb.measure("exact-ou", on="ou", steps=(4, 8, 16), looks=1, threads=1)
    (exact,) = sections([evidence])
    for make in (figures.convergence, figures.local_orders):
        assert set(render.images(make(exact))) == {"svg", "pdf", "png"}
    for make in (figures.comparison, figures.cost):
        assert set(render.images(make([exact]))) == {"svg", "pdf", "png"}


def test_a_scheme_keeps_its_colour_and_mark_whichever_others_are_drawn(section):
    def looks_of(figure):
        return [(line.get_color(), line.get_marker()) for line in drawn(figure)]

    alone = looks_of(figures.comparison([section], ["another", section.scheme]))
    assert set(alone) == {style.SCHEMES[1]}
    assert set(looks_of(figures.comparison([section]))) == {style.SCHEMES[0]}


def test_errors_that_are_the_same_show_as_one_mark_inside_of_another(section):
    twin = dataclasses.replace(section, scheme="twin")
    sizes = [line.get_markersize() for line in drawn(figures.comparison([section, twin]))]
    assert sizes[0] == sizes[1] > sizes[2] == sizes[3]


def test_files_have_the_same_bits_each_time(section):
    first, second = (render.images(figures.convergence(section)) for _ in range(2))
    assert first == second


def test_a_figure_on_the_page_has_its_colours_and_its_own_ids(section, convergence):
    svg = render.images(convergence)["svg"].decode()
    shown = [inline.inline_svg(svg, name, 'it says "a < b"') for name in ("one", "two")]
    assert 'role="img"' in shown[0]
    assert "it says &quot;a &lt; b&quot;" in shown[0]
    assert not any(colour in shown[0] for colour in style.NAMES)
    assert "var(--accent)" in shown[0]
    ids = [{part.split('"')[0] for part in text.split(' id="')[1:]} for text in shown]
    assert ids[0]
    assert not ids[0] & ids[1]
    used = {part.split(")")[0] for part in shown[0].split("url(#")[1:]}
    assert used <= ids[0]


def test_grey_is_enough_to_tell_schemes_apart():
    """Neighbours differ in mark, and each of the first four in how dark it is (ITU-R BT.709)."""

    def lightness(colour):
        r, g, b = (int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5))
        return 0.2126 * r + 0.7152 * g + 0.0722 * b

    marks = [mark for _, mark in style.SCHEMES]
    assert len(set(marks)) == len(marks)
    assert len({round(lightness(colour), 2) for colour, _ in style.SCHEMES}) == len(style.SCHEMES)


def test_the_description_says_what_is_seen(section):
    said = figures.described(section)
    assert said.startswith("Errors of milstein on gbm against the step size. strong: from 0.0")
    assert "claimed order 1" in said
