"""Exact area of each pixel under a closed ring, by summing what each edge leaves to one side of it."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from numba import njit

__all__ = ["accumulate_ring", "toggle_ring"]


@njit(cache=True, nogil=True)
def _accumulate_segment(
    sums: npt.NDArray[np.float64], row0: float, column0: float, row1: float, column1: float
) -> None:
    """Add one piece of an edge that lies within one row of pixels.

    `sums[r, c]` takes the signed area to the right of the piece inside pixel (r, c), and `sums[r, c + 1]` the rest of
    the piece's height, so that a running sum along the row gives the area of every pixel to the right of it.
    """
    rows, columns = sums.shape[0], sums.shape[1] - 1
    row = math.floor((row0 + row1) / 2)
    if row < 0 or row >= rows:
        return
    height = row1 - row0
    if height == 0.0:
        return
    left, right = (column0, column1) if column0 <= column1 else (column1, column0)
    if right <= 0.0:
        sums[row, 0] += height
        return
    if left >= columns:
        return
    slope = (right - left) / abs(height)
    first, last = math.floor(left), math.ceil(right)
    covered = 0.0
    for column in range(first, max(last, first + 1)):
        start, end = max(left, float(column)), min(right, float(column + 1))
        part = height if slope == 0.0 else math.copysign(1.0, height) * (end - start) / slope
        if right == left:
            part, start, end = height, left, left
        inside = part * (column + 1 - (start + end) / 2)
        if column < 0:
            sums[row, 0] += part
        elif column < columns:
            sums[row, column] += inside
            sums[row, column + 1] += part - inside
        covered += part
        if right == left:
            break


@njit(cache=True, nogil=True)
def accumulate_ring(sums: npt.NDArray[np.float64], ring: npt.NDArray[np.float64]) -> None:
    """Add the signed area of a ring to the running sums.

    Parameters
    ----------
    sums
        (rows, columns + 1), float64; a cumulative sum along columns gives signed area per pixel.
    ring
        (n, 2) vertices as (row, column) from the corner of the first pixel, closed by joining the last to the first.
    """
    count = ring.shape[0]
    rows = sums.shape[0]
    for index in range(count):
        row0, column0 = ring[index, 0], ring[index, 1]
        row1, column1 = ring[(index + 1) % count, 0], ring[(index + 1) % count, 1]
        if row0 == row1:
            continue
        low, high = (row0, row1) if row0 < row1 else (row1, row0)
        first, last = max(0, math.floor(low)), min(rows, math.ceil(high))
        for row in range(first, last):
            start, end = max(low, float(row)), min(high, float(row + 1))
            if row0 > row1:
                start, end = end, start
            at_start = column0 + (start - row0) / (row1 - row0) * (column1 - column0)
            at_end = column0 + (end - row0) / (row1 - row0) * (column1 - column0)
            _accumulate_segment(sums, start, at_start, end, at_end)


@njit(cache=True, nogil=True)
def toggle_ring(toggles: npt.NDArray[np.bool_], ring: npt.NDArray[np.float64]) -> None:
    """Toggle, in each row of pixel centres, the first centre to the right of every edge that crosses the row.

    Parameters
    ----------
    toggles
        (rows, columns + 1), boolean; an exclusive-or along columns gives the centres inside by the even-odd rule.
    ring
        (n, 2) vertices as (row, column), pixel centres on whole numbers.
    """
    count = ring.shape[0]
    rows, columns = toggles.shape[0], toggles.shape[1] - 1
    for index in range(count):
        row0, column0 = ring[index, 0], ring[index, 1]
        row1, column1 = ring[(index + 1) % count, 0], ring[(index + 1) % count, 1]
        low, high = (row0, row1) if row0 < row1 else (row1, row0)
        # Half open, so that a vertex on a row of centres counts once.
        for row in range(max(0, math.ceil(low)), min(rows, math.ceil(high))):
            crossing = column0 + (row - row0) / (row1 - row0) * (column1 - column0)
            column = min(max(math.ceil(crossing), 0), columns)
            toggles[row, column] = not toggles[row, column]
