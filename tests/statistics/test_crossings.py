"""First crossings of curves and percentiles of bounds, computed here again from their stated definitions."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.statistics.crossings import Crossings, first_crossings, percentile_between

RATIOS = (5.0, 8.0, 10.0, 15.0, 20.0)


def crossing(points: list[tuple[float, float]], wanted: float) -> tuple[float, float]:
    """Bounds of the crossing of one frame's curve."""
    found = first_crossings(
        np.full(len(points), 7),
        np.array([ratio for ratio, _ in points]),
        np.array([damage for _, damage in points]),
        np.array([7]),
        np.array([wanted]),
    )
    assert found.frames.tolist() == [7]
    return float(found.least[0]), float(found.most[0])


def told(points: list[tuple[float, float]], wanted: float) -> tuple[float, float]:
    """The same by the words of the definition, point by point."""
    ordered = sorted(points)
    if ordered[0][1] > wanted:
        return -math.inf, ordered[0][0]
    if ordered[0][1] == wanted:
        return ordered[0][0], ordered[0][0]
    for (r0, d0), (r1, d1) in itertools.pairwise(ordered):
        if d1 >= wanted:
            share = (math.log(wanted) - math.log(d0)) / (math.log(d1) - math.log(d0)) if d0 > 0 else None
            if share is None:
                share = (wanted - d0) / (d1 - d0)
            ratio = math.exp(math.log(r0) + share * (math.log(r1) - math.log(r0)))
            return ratio, ratio
    return ordered[-1][0], math.inf


@pytest.mark.parametrize("exponent", [0.4, 1.0, 1.7], ids=lambda value: f"exponent {value}")
@pytest.mark.parametrize("wanted", [6.3, 9.0, 19.9], ids=lambda value: f"the damage of {value}")
def test_the_crossing_of_a_power_law_is_exact(exponent: float, wanted: float) -> None:
    # Of damage = a ratio^b the ratio is (damage / a)^(1 / b): the curve is straight in both logarithms.
    points = [(ratio, 1.3 * ratio**exponent) for ratio in RATIOS]
    least, most = crossing(points, 1.3 * wanted**exponent)
    assert least == most == pytest.approx(wanted, rel=1e-12)


@pytest.mark.parametrize("index", range(5), ids=[f"{ratio:g} to 1" for ratio in RATIOS])
def test_the_damage_of_a_point_has_exactly_its_ratio(index: int) -> None:
    points = [(ratio, 0.37 * ratio**0.9) for ratio in RATIOS]
    assert crossing(points, points[index][1]) == (RATIOS[index], RATIOS[index])


def test_nothing_is_told_beyond_what_was_run() -> None:
    points = [(ratio, ratio) for ratio in RATIOS]
    assert crossing(points, 4.999) == (-math.inf, 5.0)
    assert crossing(points, 20.001) == (20.0, math.inf)
    assert crossing([(8.0, 3.0)], 3.0) == (8.0, 8.0)


def test_of_several_crossings_the_first_counts() -> None:
    points = [(5.0, 1.0), (10.0, 4.0), (15.0, 2.0), (20.0, 8.0)]
    # Between (5, 1) and (10, 4) in both logarithms, 2 lies half way: the ratio is the geometric mean.
    least, _ = crossing(points, 2.0)
    assert least == pytest.approx(math.sqrt(50), rel=1e-12)
    # 4 to 2 falls, and 2 to 8 passes 5 at log(5 / 2) / log(8 / 2) of the way.
    least, _ = crossing(points, 5.0)
    assert least == pytest.approx(15 * (20 / 15) ** (math.log(2.5) / math.log(4)), rel=1e-12)


def test_from_a_point_without_damage_the_line_is_straight_in_the_damage_itself() -> None:
    least, _ = crossing([(4.0, 0.0), (9.0, 8.0)], 4.0)
    assert least == pytest.approx(6.0, rel=1e-12)


def test_each_frame_has_its_own_curve_and_frames_not_wanted_take_no_part() -> None:
    found = first_crossings(
        np.array([3, 1, 3, 1, 2, 9]),
        np.array([20.0, 10.0, 5.0, 5.0, 8.0, 8.0]),
        np.array([4.0, 8.0, 1.0, 2.0, math.nan, 1.0]),
        np.array([1, 2, 3, 4]),
        np.array([4.0, 1.0, 2.0, 1.0]),
    )
    assert found.frames.tolist() == [1, 3]
    assert found.least == pytest.approx([math.sqrt(50), 10.0])
    assert (found.below, found.above) == (0, 0)


def test_without_points_there_is_nothing() -> None:
    none = np.empty(0)
    found = first_crossings(none.astype(np.int64), none, none, np.array([1]), np.array([1.0]))
    assert (len(found.frames), found.below, found.above) == (0, 0, 0)


DAMAGES = st.floats(0, 100).map(lambda value: round(value, 3))
CURVES = st.lists(st.tuples(st.floats(1.5, 60).map(lambda value: round(value, 2)), DAMAGES), min_size=1, max_size=7)


@given(CURVES, st.floats(0.001, 120))
def test_a_crossing_is_what_its_definition_says(points: list[tuple[float, float]], wanted: float) -> None:
    assert crossing(points, wanted) == pytest.approx(told(points, wanted), rel=1e-9)


@given(CURVES, st.floats(0.001, 120), st.floats(0.001, 120))
def test_a_larger_damage_never_has_a_smaller_ratio(points: list[tuple[float, float]], one: float, other: float) -> None:
    small, large = crossing(points, min(one, other)), crossing(points, max(one, other))
    # The last digit of a logarithm may differ.
    assert small[0] <= large[0] * (1 + 1e-12)
    assert small[1] <= large[1] * (1 + 1e-12)


@given(st.lists(st.tuples(CURVES, st.floats(0.01, 100)), min_size=1, max_size=5), st.randoms(use_true_random=False))
def test_frames_together_and_in_any_order_give_what_each_gives_alone(
    frames: list[tuple[list[tuple[float, float]], float]], random: object
) -> None:
    rows = [(10 * number, *point) for number, (points, _) in enumerate(frames) for point in points]
    random.shuffle(rows)  # type: ignore[attr-defined]
    found: Crossings = first_crossings(
        np.array([row[0] for row in rows]),
        np.array([row[1] for row in rows]),
        np.array([row[2] for row in rows]),
        np.array([10 * number for number in range(len(frames))]),
        np.array([wanted for _, wanted in frames]),
    )
    alone = [crossing(points, wanted) for points, wanted in frames]
    assert list(zip(found.least.tolist(), found.most.tolist(), strict=True)) == alone


BOUNDS = st.lists(st.tuples(st.floats(1, 50), st.floats(0, 10)), min_size=1, max_size=20)


@given(st.lists(st.floats(1, 50), min_size=1, max_size=30), st.sampled_from([5, 50, 95]))
def test_a_percentile_of_known_numbers_is_that_of_numpy(values: list[float], percent: float) -> None:
    known = np.array(values)
    least, most = percentile_between(known, known, percent)
    assert least == most == pytest.approx(np.percentile(known, percent), rel=1e-12)


@given(BOUNDS, st.floats(0, 1), st.sampled_from([5, 50, 95]))
def test_a_percentile_lies_between_its_bounds(bounds: list[tuple[float, float]], share: float, percent: float) -> None:
    least = np.array([low for low, _ in bounds])
    most = least + np.array([width for _, width in bounds])
    low, high = percentile_between(least, most, percent)
    true = float(np.percentile(least + share * (most - least), percent))
    assert low <= true * (1 + 1e-12)
    assert true <= high * (1 + 1e-12)


def test_a_percentile_that_rests_on_what_lies_beyond_is_open_on_that_side() -> None:
    least = np.array([-math.inf, 9.0, 10.0, 11.0, 20.0])
    most = np.array([5.0, 9.0, 10.0, 11.0, math.inf])
    assert percentile_between(least, most, 50) == (10.0, 10.0)
    assert percentile_between(least, most, 5) == (-math.inf, 5.0 + 0.2 * 4.0)
    low, high = percentile_between(least, most, 95)
    assert low == pytest.approx(11.0 + 0.8 * 9.0)
    assert high == math.inf
