from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st
from reportlab.graphics.shapes import Drawing, Group, Line, PolyLine, Rect, String

from safecheck.report.blocks import Bar, Bars, Bound, Chart, Point, Series
from safecheck.report.figures import bars_drawing, chart_drawing, log_ticks, nice_ticks, ratio_ticks

WIDTH, HEIGHT = 230.0, 186.0


@given(st.floats(1e-6, 1e7))
def test_ticks_start_at_zero_reach_the_largest_value_and_are_even(high: float) -> None:
    ticks = nice_ticks(high)
    steps = {round((b - a) / ticks[1], 6) for a, b in itertools.pairwise(ticks)}
    assert ticks[0] == 0
    assert high * (1 - 1e-9) <= ticks[-1]
    assert ticks[-2] < high * (1 + 1e-9)
    assert steps == {1.0}
    assert 2 <= len(ticks) <= 7


def test_nothing_changed_still_gives_an_axis() -> None:
    assert nice_ticks(0.0) == [0.0, 1.0]


@given(st.floats(1.1, 500), st.floats(1.05, 50))
def test_ratio_ticks_lie_inside_and_apart(low: float, factor: float) -> None:
    ticks = ratio_ticks(low, low * factor, 180)
    assert ticks == sorted(ticks)
    assert all(low <= tick <= low * factor for tick in ticks)


def series(name: str, scale: float) -> Series:
    return Series(name, tuple(Point(r, scale * r, scale * r / 2, scale * r * 2, scale * r * 3) for r in (5.0, 10.0)))


def chart(*curves: Series, bounds: tuple[Bound, ...] = ()) -> Chart:
    return Chart("RMSE, content", "Achieved ratio, to 1", "HU", curves, bounds)


def shapes(drawing: Drawing | Group) -> list[object]:
    found: list[object] = []
    for item in drawing.contents:
        found += shapes(item) if isinstance(item, Group) else [item]
    return found


def texts(drawing: Drawing) -> list[str]:
    return [item.text for item in shapes(drawing) if isinstance(item, String)]


def test_a_chart_names_its_measure_unit_axis_and_curves() -> None:
    found = texts(chart_drawing(chart(series("jpeg2000", 0.3), series("tiled", 0.4)), WIDTH, HEIGHT))
    assert {"RMSE, content", "HU", "Achieved ratio, to 1", "jpeg2000", "tiled", "5", "10"} <= set(found)


def test_curves_differ_by_dash_and_not_by_colour_alone() -> None:
    drawing = chart_drawing(chart(*(series(f"codec {n}", 0.1 * n) for n in range(1, 6))), WIDTH, HEIGHT)
    dashes = [str(item.strokeDashArray) for item in shapes(drawing) if isinstance(item, PolyLine)]
    assert len(dashes) == len(set(dashes)) == 5


def test_everything_is_drawn_inside_the_drawing() -> None:
    drawing = chart_drawing(chart(series("a", 0.001), series("b", 900.0)), WIDTH, HEIGHT)
    for item in shapes(drawing):
        if isinstance(item, Line):
            assert 0 <= min(item.x1, item.x2) <= max(item.x1, item.x2) <= WIDTH
            assert 0 <= min(item.y1, item.y2) <= max(item.y1, item.y2) <= HEIGHT


def test_a_declared_limit_is_named_on_its_line() -> None:
    near = chart_drawing(chart(series("a", 1.0), bounds=(Bound(20.0, "declared limit 20"),)), WIDTH, HEIGHT)
    far = chart_drawing(chart(series("a", 1.0), bounds=(Bound(5000.0, "declared limit 5000"),)), WIDTH, HEIGHT)
    assert "declared limit 20" in texts(near)
    assert "declared limit 5000" not in texts(far)


@pytest.mark.parametrize("value", [0.0, 7.0], ids=["nothing changed", "one point"])
def test_a_single_point_without_spread_can_be_drawn(value: float) -> None:
    one = Series("jpeg2000", (Point(10.0, value),))
    assert "jpeg2000" in texts(chart_drawing(chart(one), WIDTH, HEIGHT))


def test_bars_share_one_scale_and_carry_their_figures() -> None:
    bars = Bars((Bar("now", 100.0, "100 MB", before=True), Bar("jpeg2000 10:1", 25.0, "25 MB"), Bar("none", 0.0, "0")))
    drawing = bars_drawing(bars, 400.0)
    widths = [item.width for item in shapes(drawing) if isinstance(item, Rect)]
    assert widths[1] == pytest.approx(widths[0] / 4)
    assert {"100 MB", "25 MB", "0", "now", "jpeg2000 10:1", "none"} == set(texts(drawing))


@pytest.mark.parametrize("curves", [2, 6, 9])
def test_curves_stand_within_2_5_points_of_their_ratio(curves: int) -> None:
    one = [Series(f"codec {n}", (Point(5.0, 1.0 + n), Point(10.0, 2.0 + n))) for n in range(curves)]
    drawing = chart_drawing(chart(*one), WIDTH, HEIGHT)
    lines = [item.points for item in shapes(drawing) if isinstance(item, PolyLine)]
    ends = [points[0] for points in lines]
    assert len(ends) == curves
    assert max(ends) - min(ends) <= 5.0 + 1e-9
    assert (max(ends) + min(ends)) / 2 == pytest.approx(sum(ends) / curves)


def test_small_medians_beside_large_ones_stand_on_a_logarithmic_axis_that_says_so() -> None:
    wide = chart(Series("a", (Point(5.0, 0.1), Point(10.0, 1.0), Point(20.0, 10.0))))
    drawing = chart_drawing(wide, WIDTH, HEIGHT)
    assert "HU, logarithmic axis" in texts(drawing)
    (line,) = [item.points for item in shapes(drawing) if isinstance(item, PolyLine)]
    assert line[3] - line[1] == pytest.approx(line[5] - line[3])


@pytest.mark.parametrize("least", [0.0, 2.0], ids=["a median of nothing", "medians alike"])
def test_other_charts_start_at_zero(least: float) -> None:
    found = texts(chart_drawing(chart(Series("a", (Point(5.0, least), Point(10.0, 10.0)))), WIDTH, HEIGHT))
    assert "HU" in found
    assert "0" in found


@given(st.floats(1e-6, 1e5), st.floats(8.0, 1e6))
def test_logarithmic_ticks_are_few_round_and_inside(low: float, factor: float) -> None:
    ticks = log_ticks(low, low * factor)
    assert 1 <= len(ticks) <= 7
    assert ticks == sorted(set(ticks))
    assert all(low <= tick <= low * factor for tick in ticks)
    assert {f"{tick:.6e}".split("e")[0] for tick in ticks} <= {f"{digit:.6f}" for digit in (1, 2, 3, 5)}


@pytest.mark.parametrize("values", [(5.2, 5.6, 6.4), (12.0, 6.0, 4.0), (1.0, 4.9, 5.1)], ids=str)
def test_the_name_of_a_limit_stands_on_white_away_from_the_curve(values: tuple[float, ...]) -> None:
    curve = Series("a", tuple(Point(ratio, value) for ratio, value in zip((4.0, 8.0, 16.0), values, strict=True)))
    drawing = chart_drawing(chart(curve, bounds=(Bound(5.0, "limit 5"),)), WIDTH, HEIGHT)
    (name,) = [item for item in shapes(drawing) if isinstance(item, String) and item.text == "limit 5"]
    (white,) = [item for item in shapes(drawing) if isinstance(item, Rect)]
    (line,) = [item.points for item in shapes(drawing) if isinstance(item, PolyLine)]
    assert white.x < name.x
    assert white.y < name.y
    for index in (0, 2):
        for part in (number / 100 for number in range(101)):
            x = line[index] + part * (line[index + 2] - line[index])
            y = line[index + 1] + part * (line[index + 3] - line[index + 1])
            assert not (white.x < x < white.x + white.width and white.y < y < white.y + white.height)


def test_further_lines_of_the_key_take_no_height_of_the_curves() -> None:
    few = chart_drawing(chart(series("a", 1.0)), WIDTH, HEIGHT)
    many = chart_drawing(chart(*(series(f"a codec of a long name {n}", 1.0) for n in range(6))), WIDTH, HEIGHT)
    assert many.height > few.height == HEIGHT
