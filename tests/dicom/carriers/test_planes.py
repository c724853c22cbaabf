"""Contours sorted by plane, and the slab of each plane: expected values computed from the stated rules."""

from __future__ import annotations

import itertools

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.dicom.carriers.planes import TIE_MM, slabs_mm, stack
from safecheck.errors import RegionError


@pytest.mark.parametrize(
    ("positions", "expected"),
    [
        ([7.0], [(6.75, 7.25)]),
        ([0.0, 3.0, 6.0], [(-1.5, 1.5), (1.5, 4.5), (4.5, 7.5)]),
        ([0.0, 1.0, 3.0, 4.5], [(-0.5, 0.5), (0.5, 2.0), (2.0, 3.75), (3.75, 5.25)]),
        ([0.0, 2.0, 4.0, 14.0, 16.0], [(-1, 1), (1, 3), (3, 5), (13, 15), (15, 17)]),
        ([0.0, 30.0], [(-5, 5), (25, 35)]),
    ],
    ids=["single", "regular", "irregular", "interrupted", "far apart"],
)
def test_a_slab_reaches_half_way_to_the_neighbours(positions: list[float], expected: list[tuple[float, float]]) -> None:
    shift = 0.0 if len(positions) == 1 else TIE_MM
    assert np.allclose(slabs_mm(positions), np.array(expected) + shift, rtol=0, atol=1e-12)


@given(st.lists(st.floats(1.0, 3.0), min_size=2, max_size=30), st.floats(-500, 500))
def test_neighbouring_slabs_leave_nothing_between_and_share_nothing(gaps: list[float], first: float) -> None:
    slabs = slabs_mm(np.cumsum([first, *gaps]).tolist())
    for (_, high), (low, _) in itertools.pairwise(slabs):
        assert high == pytest.approx(low, abs=1e-9)


SQUARE = np.array([(0.0, 0.0), (0.0, 10.0), (10.0, 10.0), (10.0, 0.0)])


def at(flat: npt.NDArray[np.float64], z: float) -> npt.NDArray[np.float64]:
    return np.column_stack([flat, np.full(len(flat), z)])


def test_contours_of_one_plane_come_together_in_spite_of_rounding() -> None:
    found = stack([at(SQUARE, 5.0), at(SQUARE + 20, 5.03), at(SQUARE, 8.0)])
    assert [len(plane.rings) for plane in found.planes] == [2, 1]


def test_a_keyhole_becomes_outline_and_hole() -> None:
    hole = np.array([(4.0, 4.0), (6.0, 4.0), (6.0, 6.0), (4.0, 6.0)])
    for inner in (hole, hole[[0, 3, 2, 1]]):
        keyhole = np.vstack([SQUARE, SQUARE[:1], inner, inner[:1]])
        (plane,) = stack([at(keyhole, 1.0)]).planes
        assert sorted(len(ring) for ring in plane.rings) == [4, 4]


def test_contours_without_area_are_counted_and_left_aside() -> None:
    line = np.array([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)])
    found = stack([at(SQUARE, 0.0), at(line, 0.0), at(SQUARE[:2], 3.0)])
    assert found.without_area == 2
    assert len(found.planes) == 1


@pytest.mark.parametrize(
    ("contours", "message"),
    [
        ([at(SQUARE[:2], 0.0)], "no contour encloses an area"),
        ([np.column_stack([SQUARE, [0.0, 0.0, 0.0, 1.0]])], "not flat"),
        ([at(SQUARE, 0.0), np.column_stack([SQUARE[:, 0], np.zeros(4), SQUARE[:, 1]])], "not parallel"),
        ([at(SQUARE[[0, 2, 1, 3]], 0.0)], "cross themselves or each other"),
        ([at(SQUARE, 0.0), at(SQUARE + 5, 0.0)], "cross themselves or each other"),
    ],
    ids=["line", "bent", "two directions", "bow tie", "overlapping"],
)
def test_contours_that_enclose_no_clear_area_are_refused(contours: list[npt.NDArray[np.float64]], message: str) -> None:
    with pytest.raises(RegionError, match=message):
        stack(contours)


def test_contours_that_touch_are_taken() -> None:
    found = stack([at(SQUARE, 0.0), at(SQUARE + np.array([0.0, 10.0]), 0.0), at(SQUARE + 10, 0.0)])
    assert [len(plane.rings) for plane in found.planes] == [3]
