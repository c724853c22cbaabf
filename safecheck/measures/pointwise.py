"""How far values moved: bias, RMSE, mean absolute, largest and 99.9th percentile of the error, over frame and content.

Error is after minus before, in the unit of the values.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from safecheck.measures.planes import Mask, Plane, check_mask, check_plane
from safecheck.measures.selection import interpolate, rank_of

__all__ = ["PERCENTILE_FROM", "ErrorFigures", "measure_errors"]

PERCENTILE_FROM = 1000
"""Fewest pixels of which a 99.9th percentile is taken."""
_PERCENT = 99.9


@dataclass(frozen=True, slots=True)
class ErrorFigures:
    """Errors over one set of pixels; each None where the set is empty."""

    pixels: int
    """Pixels of the set."""
    bias: float | None = None
    """Mean error."""
    rmse: float | None = None
    """Root mean square error."""
    mean_absolute: float | None = None
    """Mean absolute error."""
    max: float | None = None
    """Largest absolute error."""
    row: int | None = None
    """Row of that pixel; of several, the first row by row."""
    column: int | None = None
    """Column of that pixel."""
    p999: float | None = None
    """99.9th percentile of the absolute error; None under `PERCENTILE_FROM` pixels."""


def measure_errors(before: Plane, after: Plane, content: Mask) -> tuple[ErrorFigures, ErrorFigures]:
    """Measure errors over the whole frame and over content, in one pass.

    Parameters
    ----------
    before, after
        (rows, columns), finite, in one unit.
    content
        (rows, columns), boolean.

    Returns
    -------
    tuple of ErrorFigures
        Over the frame, and over content.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    from safecheck.measures.pointwise_kernels import GROUP, accumulate, add_up

    before = check_plane(before)
    after = check_plane(after, before.shape)
    content = check_mask(content, before.shape)
    rows, columns = before.shape
    sums = np.zeros((6, columns))
    tops = np.zeros((-(-rows // GROUP), columns))
    content_tops = np.full_like(tops, -1.0)
    accumulate(before, after, content, sums, tops, content_tops)
    totals = add_up(sums)
    everywhere = np.ones(before.shape, np.bool_)
    frame = _figures(before, after, everywhere, totals[:3], tops, before.size)
    count = int(np.count_nonzero(content))
    if count == before.size:
        return frame, frame
    return frame, _figures(before, after, content, totals[3:], content_tops, count)


def _figures(before: Plane, after: Plane, mask: Mask, totals: np.ndarray, tops: Plane, count: int) -> ErrorFigures:
    """Turn sums and the largest errors of groups into figures."""
    from safecheck.measures.pointwise_kernels import find_first

    if count == 0:
        return ErrorFigures(0)
    largest = float(tops.max())
    row, column = find_first(before, after, mask, tops, largest)
    return ErrorFigures(
        pixels=count,
        bias=float(totals[0]) / count,
        rmse=math.sqrt(float(totals[2]) / count),
        mean_absolute=float(totals[1]) / count,
        max=largest,
        row=int(row),
        column=int(column),
        p999=_upper_percentile(before, after, mask, tops, count) if count >= PERCENTILE_FROM else None,
    )


def _upper_percentile(before: Plane, after: Plane, mask: Mask, tops: Plane, count: int) -> float:
    """99.9th percentile of the absolute error, from few pixels.

    Of n groups that reach a bound each holds a pixel that does: so the n-th largest top is a lower bound of the n-th
    largest error, and only groups above it need be looked into.
    """
    from safecheck.measures.pointwise_kernels import GROUP, collect_above
    from safecheck.measures.selection_kernels import select_pair

    rank, part = rank_of(count, _PERCENT)
    needed = count - rank
    bound, _ = select_pair(tops.ravel(), tops.size - needed)
    above = collect_above(before, after, mask, tops, bound, GROUP * needed)
    lower = float(above[needed - 1]) if above.size >= needed else bound
    upper = float(above[needed - 2]) if above.size >= needed - 1 else bound
    return interpolate(lower, upper, part) if needed > 1 else lower
