"""Coverage: which fraction of each pixel a shape covers, exactly."""

from __future__ import annotations

from collections.abc import Sequence

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

    sums = np.zeros((rows, columns + 1))
    for index, ring in enumerate(rings):
        # A ring whose left side runs down the rows counts positive; its shoelace area is then negative.
        sense = -1.0 if signed_area(ring) > 0 else 1.0
        sense *= -1.0 if _depth(index, rings) % 2 else 1.0
        one = np.zeros_like(sums)
        # From pixel centres on whole numbers to pixel corners on whole numbers.
        accumulate_ring(one, np.ascontiguousarray(ring) + 0.5)
        sums += sense * one
    covered = np.clip(np.cumsum(sums, axis=1)[:, :columns], 0.0, 1.0)
    # What the sums leave by rounding beside a shape is not coverage.
    covered[covered < _LEAST] = 0.0
    covered[covered > 1 - _LEAST] = 1.0
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

    toggles = np.zeros((rows, columns + 1), dtype=np.bool_)
    for ring in rings:
        toggle_ring(toggles, np.ascontiguousarray(ring))
    return np.asarray(np.logical_xor.accumulate(toggles, axis=1)[:, :columns])


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
