"""Where values moved most: patches on a fixed grid, and the band on both sides of the content's edge."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.measures.planes import Mask, Places, Plane, check_mask, check_plane, spread
from safecheck.measures.selection import percentile

__all__ = [
    "BAND_PIXELS",
    "PATCH_SIDE",
    "WINDOW_MM",
    "BandFigures",
    "EdgeBand",
    "PatchFigures",
    "PatchGrid",
    "count_patches",
    "find_edge_band",
    "lay_grid",
    "lay_grid_mm",
    "measure_band",
    "measure_patches",
]

PATCH_SIDE = 8
"""Rows and columns of a patch."""
WINDOW_MM = 10.0
"""Side of the larger patch, to the nearest whole number of pixels each way."""
BAND_PIXELS = 4
"""How far the edge band reaches on either side of the content's edge, rows and columns alike."""


@dataclass(frozen=True, slots=True, eq=False)
class PatchGrid:
    """Complete patches side by side from (0, 0), those with half content or more counted."""

    height: int
    """Rows of a patch."""
    width: int
    """Columns of a patch."""
    content: Mask
    counts: npt.NDArray[np.float64]
    """(patch rows, patch columns): content pixels of each."""
    counted: npt.NDArray[np.bool_]
    """(patch rows, patch columns): patches with half content or more."""
    clear: npt.NDArray[np.bool_]
    """(patch rows, patch columns): patches that no drawn region touches."""


@dataclass(frozen=True, slots=True)
class PatchFigures:
    """Root mean square errors of the counted patches, over their content pixels; None where there is none."""

    worst_rmse: float | None = None
    row: int | None = None
    """First row of the worst patch; of several, the first row by row."""
    column: int | None = None
    """First column of it."""
    median_rmse: float | None = None
    p95_rmse: float | None = None
    outside_rmse: float | None = None
    """Largest of the patches clear of every drawn region."""
    outside_row: int | None = None
    outside_column: int | None = None


@dataclass(frozen=True, slots=True, eq=False)
class EdgeBand:
    """Places within `BAND_PIXELS` of the content's edge, on both sides, without padding."""

    places: Places
    """Row times columns plus column, in order."""


@dataclass(frozen=True, slots=True)
class BandFigures:
    """Errors in the edge band; None where there is none."""

    rmse: float | None = None
    max: float | None = None
    row: int | None = None
    column: int | None = None


def lay_grid(content: Mask, height: int, width: int, covered: Mask | None = None) -> PatchGrid:
    """Lay a grid of patches from (0, 0).

    Parameters
    ----------
    content
        (rows, columns), boolean.
    height, width
        Rows and columns of a patch, at least 1.
    covered
        (rows, columns), boolean: pixels that a drawn region covers in part or whole; None where none is drawn.

    Raises
    ------
    ValueError
        If a side is below 1, or the shapes differ.
    """
    if height < 1 or width < 1:
        raise ValueError(f"a patch of {height} by {width} pixels does not exist")
    content = check_mask(content, content.shape)
    counts = count_patches(content, height, width)
    touched = (
        np.zeros(counts.shape) if covered is None else count_patches(check_mask(covered, content.shape), height, width)
    )
    return PatchGrid(height, width, content, counts, 2 * counts >= height * width, touched == 0)


def lay_grid_mm(content: Mask, spacing_mm: tuple[float, float] | None, covered: Mask | None = None) -> PatchGrid | None:
    """Lay the grid of larger patches, `WINDOW_MM` on each side.

    Parameters
    ----------
    content, covered
        As for `lay_grid`.
    spacing_mm
        (between rows, between columns), above 0; None where it is not known.

    Returns
    -------
    PatchGrid or None
        None without a spacing, or where such a patch is no larger than the 8x8 one.
    """
    if spacing_mm is None:
        return None
    height, width = (max(1, round(WINDOW_MM / spacing)) for spacing in spacing_mm)
    if height * width <= PATCH_SIDE * PATCH_SIDE:
        return None
    return lay_grid(content, height, width, covered)


def measure_patches(grid: PatchGrid, before: Plane, after: Plane) -> PatchFigures:
    """Measure the patches of a grid.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    from safecheck.measures.local_kernels import sum_patches

    before = check_plane(before, grid.content.shape)
    after = check_plane(after, grid.content.shape)
    if not grid.counted.any():
        return PatchFigures()
    squares = np.empty(grid.counts.shape)
    sum_patches(before, after, grid.content, grid.height, grid.width, squares)
    rmse = np.sqrt(squares / np.maximum(grid.counts, 1))
    worst, row, column = _worst(grid, rmse, grid.counted)
    outside, outside_row, outside_column = _worst(grid, rmse, grid.counted & grid.clear)
    found = rmse[grid.counted]
    return PatchFigures(
        worst, row, column, percentile(found, 50), percentile(found, 95), outside, outside_row, outside_column
    )


def count_patches(mask: Mask, height: int, width: int) -> npt.NDArray[np.float64]:
    """Count the True pixels of each complete patch of the grid from (0, 0): (patch rows, patch columns)."""
    from safecheck.measures import local_kernels

    counts = np.zeros((mask.shape[0] // height, mask.shape[1] // width))
    local_kernels.count_patches(mask, height, width, counts)
    return counts


def find_edge_band(content: Mask, padding: Mask | None = None) -> EdgeBand:
    """Find the places near the content's edge: the frame's own border is no edge.

    Parameters
    ----------
    content, padding
        (rows, columns), boolean; padding is left out of the band.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    content = check_mask(content, content.shape)
    near = spread(content, BAND_PIXELS) & spread(~content, BAND_PIXELS)
    if padding is not None:
        near &= ~check_mask(padding, content.shape)
    return EdgeBand(np.flatnonzero(near).astype(np.int64))


def measure_band(band: EdgeBand, before: Plane, after: Plane) -> BandFigures:
    """Measure errors in the edge band.

    Raises
    ------
    ValueError
        If the shapes differ, or the band was found in a larger frame.
    """
    from safecheck.measures.local_kernels import sum_places

    before = check_plane(before)
    after = check_plane(after, before.shape)
    if band.places.size == 0:
        return BandFigures()
    if band.places[-1] >= before.size:
        raise ValueError("the band was found in a larger frame")
    square, largest, at = sum_places(before, after, band.places)
    row, column = divmod(int(at), before.shape[1])
    return BandFigures(math.sqrt(square / band.places.size), float(largest), row, column)


def _worst(grid: PatchGrid, rmse: Plane, among: npt.NDArray[np.bool_]) -> tuple[float | None, int | None, int | None]:
    """Largest of some patches, and the first row and column of the first such patch."""
    if not among.any():
        return None, None, None
    index = int(np.where(among, rmse, -1.0).argmax())
    row, column = divmod(index, rmse.shape[1])
    return float(rmse[row, column]), row * grid.height, column * grid.width
