import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.ndimage import distance_transform_cdt

from safecheck.measures.local import (
    BandFigures,
    PatchFigures,
    find_edge_band,
    lay_grid,
    lay_grid_mm,
    measure_band,
    measure_patches,
)
from safecheck.measures.planes import Mask, Plane
from tests.measures.planes import two_planes


def _by_hand(before: Plane, after: Plane, content: Mask, height: int, width: int, covered: Mask) -> PatchFigures:
    """The same figures patch by patch."""
    found: list[tuple[float, int, int, bool]] = []
    for row in range(0, before.shape[0] - height + 1, height):
        for column in range(0, before.shape[1] - width + 1, width):
            piece = np.s_[row : row + height, column : column + width]
            error = (after - before)[piece][content[piece]]
            if 2 * error.size >= height * width:
                found.append((float(np.sqrt(np.mean(error**2))), row, column, not covered[piece].any()))
    if not found:
        return PatchFigures()
    sizes = [size for size, _, _, _ in found]
    # Of equal ones the first: max() keeps it.
    worst = max(found, key=lambda patch: patch[0])
    clear = max((patch for patch in found if patch[3]), key=lambda patch: patch[0], default=None)
    return PatchFigures(
        *worst[:3], float(np.median(sizes)), float(np.percentile(sizes, 95)), *(clear[:3] if clear else (None,) * 3)
    )


def _close(found: PatchFigures | BandFigures, expected: PatchFigures | BandFigures) -> None:
    for name in expected.__slots__:
        got, value = getattr(found, name), getattr(expected, name)
        assert got is None if value is None else got == pytest.approx(value, rel=1e-9, abs=1e-12), name


@given(two_planes(), st.integers(1, 9), st.integers(1, 9), st.integers(0, 2**32 - 1))
def test_patches_are_those_counted_by_hand(
    planes: tuple[Plane, Plane, Mask], height: int, width: int, seed: int
) -> None:
    before, after, content = planes
    covered = np.random.default_rng(seed).random(before.shape) < 0.01
    grid = lay_grid(content, height, width, covered)
    _close(measure_patches(grid, before, after), _by_hand(before, after, content, height, width, covered))


def test_patches_of_a_real_pair_are_those_counted_by_hand(ct_pair: tuple[Plane, Plane]) -> None:
    before, after = ct_pair
    content = before > np.median(before)
    covered = np.zeros(before.shape, np.bool_)
    covered[: before.shape[0] // 2] = True
    _close(
        measure_patches(lay_grid(content, 8, 8, covered), before, after),
        _by_hand(before, after, content, 8, 8, covered),
    )


def test_a_displacement_planted_in_one_patch_comes_back_with_its_size_and_place() -> None:
    before = np.zeros((64, 96))
    after = before.copy()
    after[24:32, 40:48] += 7.5
    after[40:44, 3] += 7
    figures = measure_patches(lay_grid(np.ones(before.shape, np.bool_), 8, 8), before, after)
    assert (figures.worst_rmse, figures.row, figures.column) == (7.5, 24, 40)


def test_air_in_a_patch_does_not_dilute_it() -> None:
    content = np.zeros((8, 8), np.bool_)
    content[:, :4] = True
    after = np.where(content, 3.0, 100.0)
    figures = measure_patches(lay_grid(content, 8, 8), np.zeros((8, 8)), after)
    assert figures.worst_rmse == 3
    content[0, 0] = False
    assert measure_patches(lay_grid(content, 8, 8), np.zeros((8, 8)), after) == PatchFigures()


def test_without_regions_every_patch_is_clear_of_them() -> None:
    after = np.arange(256.0).reshape(16, 16)
    figures = measure_patches(lay_grid(np.ones((16, 16), np.bool_), 8, 8), np.zeros((16, 16)), after)
    assert (figures.outside_rmse, figures.outside_row) == (figures.worst_rmse, figures.row)


@pytest.mark.parametrize(
    ("spacing", "side"),
    [((0.5, 0.5), (20, 20)), ((0.7, 0.9), (14, 11)), ((1.3, 1.0), (8, 10)), ((2.0, 2.0), None), (None, None)],
    ids=str,
)
def test_the_larger_patch_is_ten_millimetres(spacing: tuple[float, float] | None, side: tuple[int, int] | None) -> None:
    grid = lay_grid_mm(np.ones((64, 64), np.bool_), spacing)
    assert side == (None if grid is None else (grid.height, grid.width))


def test_a_patch_larger_than_the_frame_does_not_exist() -> None:
    before = np.zeros((16, 16))
    grid = lay_grid(np.ones((16, 16), np.bool_), 20, 20)
    assert measure_patches(grid, before, before + 1) == PatchFigures()


def test_a_patch_without_pixels_is_refused() -> None:
    with pytest.raises(ValueError, match="does not exist"):
        lay_grid(np.ones((16, 16), np.bool_), 0, 8)


def _near_edge(content: Mask) -> Mask:
    """Chessboard distance to the other side at most 4, the frame's border being none."""
    if content.all() or not content.any():
        return np.zeros(content.shape, np.bool_)
    inner = distance_transform_cdt(content, "chessboard")
    outer = distance_transform_cdt(~content, "chessboard")
    return np.asarray(np.where(content, inner <= 4, outer <= 4))


@given(two_planes())
def test_the_edge_band_is_that_of_chessboard_distance(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, content = planes
    padding = np.zeros(before.shape, np.bool_)
    padding[::3, ::2] = True
    near = _near_edge(content) & ~padding
    error = (after - before)[near]
    expected = BandFigures()
    if error.size:
        largest = np.abs(error).max()
        row, column = np.argwhere(near & (np.abs(after - before) == largest))[0]
        expected = BandFigures(float(np.sqrt(np.mean(error**2))), float(largest), int(row), int(column))
    _close(measure_band(find_edge_band(content, padding), before, after), expected)


def test_a_band_of_a_larger_frame_is_refused() -> None:
    content = np.zeros((32, 32), np.bool_)
    content[8:24, 8:24] = True
    with pytest.raises(ValueError, match="larger frame"):
        measure_band(find_edge_band(content), np.zeros((8, 8)), np.zeros((8, 8)))


@given(two_planes(), st.integers(-3000, 3000))
def test_a_constant_added_to_both_changes_nothing(planes: tuple[Plane, Plane, Mask], constant: int) -> None:
    before, after, content = planes
    grid, band = lay_grid(content, 4, 4), find_edge_band(content)
    assert measure_patches(grid, before + constant, after + constant) == measure_patches(grid, before, after)
    assert measure_band(band, before + constant, after + constant) == measure_band(band, before, after)
