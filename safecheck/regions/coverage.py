"""Coverage: which fraction of each pixel a shape covers, exactly."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.regions.shapes import Ring, signed_area

__all__ = ["Centres", "Coverage", "cover", "find_centres"]

Coverage = npt.NDArray[np.float64]
"""(rows, columns); fraction of each pixel covered, 0 to 1."""
Centres = npt.NDArray[np.bool_]
"""(rows, columns); pixels whose centre is inside."""

_LEAST = 1e-11


def cover(rings: Sequence[Ring], rows: int, columns: int) -> Coverage:
    """Fraction of each pixel inside a set of rings, by the even-odd rule.

    Parameters
    ----------
    rings
        Each (n, 2) vertices (row, column), pixel centres on whole numbers; no ring crosses itself or another.
    rows, columns
        Size of the image; what lies outside it is cut off.

    Returns
    -------
    numpy.ndarray
        (rows, columns), 0 to 1; sums to the area inside the image.

    Notes
    -----
    Exact for polygons: each edge adds the area to one side of it, row by row, and a running sum collects them; the
    method of exact-area scan conversion with signed areas. A ring at an odd depth inside others counts negative.
    """
    from safecheck.regions.coverage_kernels import accumulate_ring

    box = _box(rings, rows, columns)
    sums = np.zeros((box.rows, box.columns + 1))
    one = np.empty_like(sums)
    for index, ring in enumerate(rings):
        # A ring whose left side runs down the rows counts positive; its shoelace area is then negative.
        sense = -1.0 if signed_area(ring) > 0 else 1.0
        sense *= -1.0 if _depth(index, rings) % 2 else 1.0
        one[:] = 0.0
        # From pixel centres on whole numbers to pixel corners on whole numbers.
        accumulate_ring(one, np.ascontiguousarray(ring) - (box.row - 0.5, box.column - 0.5))
        sums += sense * one
    inside = np.clip(np.cumsum(sums, axis=1)[:, : box.columns], 0.0, 1.0)
    # What the sums leave by rounding beside a shape is not coverage.
    inside[inside < _LEAST] = 0.0
    inside[inside > 1 - _LEAST] = 1.0
    covered = np.zeros((rows, columns))
    covered[box.place] = inside
    return covered


def find_centres(rings: Sequence[Ring], rows: int, columns: int) -> Centres:
    """Pixels whose centre is inside a set of rings, by the even-odd rule.

    Parameters
    ----------
    rings
        Each (n, 2) vertices (row, column), pixel centres on whole numbers.
    rows, columns
        Size of the image.

    Returns
    -------
    numpy.ndarray
        (rows, columns), boolean; a centre on an edge belongs to the side of larger row and column.
    """
    from safecheck.regions.coverage_kernels import toggle_ring

    box = _box(rings, rows, columns)
    toggles = np.zeros((box.rows, box.columns + 1), dtype=np.bool_)
    for ring in rings:
        toggle_ring(toggles, np.ascontiguousarray(ring) - (box.row, box.column))
    centres = np.zeros((rows, columns), dtype=np.bool_)
    centres[box.place] = np.logical_xor.accumulate(toggles, axis=1)[:, : box.columns]
    return centres


@dataclass(frozen=True, slots=True)
class _Box:
    """The part of an image in which rings lie: the work is done there alone."""

    row: int
    column: int
    rows: int
    columns: int

    @property
    def place(self) -> tuple[slice, slice]:
        """Index of the part in the image."""
        return np.s_[self.row : self.row + self.rows, self.column : self.column + self.columns]


def _box(rings: Sequence[Ring], rows: int, columns: int) -> _Box:
    """All pixels that rings touch, cut at the image's borders; empty where they lie outside or there are none."""
    vertices = np.concatenate([np.zeros((0, 2)), *rings])
    if not len(vertices):
        return _Box(0, 0, 0, 0)
    size = np.array([rows, columns])
    first = np.clip(np.floor(vertices.min(axis=0) - 0.5), 0, size).astype(int)
    last = np.clip(np.ceil(vertices.max(axis=0) + 0.5) + 1, first, size).astype(int)
    return _Box(int(first[0]), int(first[1]), int(last[0] - first[0]), int(last[1] - first[1]))


def _depth(index: int, rings: Sequence[Ring]) -> int:
    """In how many other rings a ring lies."""
    point = rings[index].mean(axis=0) if len(rings) == 1 else rings[index][0]
    return sum(_contains(ring, point) for other, ring in enumerate(rings) if other != index)


def _contains(ring: Ring, point: npt.NDArray[np.float64]) -> bool:
    """Whether a point lies inside a ring: a ray along columns crosses the boundary an odd number of times."""
    row, column = point
    rows, columns = ring[:, 0], ring[:, 1]
    next_rows, next_columns = np.roll(rows, -1), np.roll(columns, -1)
    crosses = (rows > row) != (next_rows > row)
    with np.errstate(divide="ignore", invalid="ignore"):
        at = columns + (row - rows) / (next_rows - rows) * (next_columns - columns)
    return bool(np.count_nonzero(crosses & (at > column)) % 2)
