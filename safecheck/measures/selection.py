"""Percentiles: linear interpolation between order statistics (NumPy's default; type 7 of Hyndman and Fan 1996)."""

from __future__ import annotations

import math

import numpy as np

from safecheck.measures.planes import Vector

__all__ = ["interpolate", "percentile", "rank_of"]


def rank_of(count: int, percent: float) -> tuple[int, float]:
    """Rank from 0 below the percentile of that many values, and how far it lies towards the next, 0 to under 1."""
    position = (count - 1) * (percent / 100)
    rank = math.floor(position)
    return rank, position - rank


def interpolate(lower: float, upper: float, part: float) -> float:
    """Go from one order statistic towards the next; monotone, and exact at both ends."""
    step = upper - lower
    return upper - step * (1 - part) if part >= 0.5 else lower + step * part


def percentile(values: Vector, percent: float) -> float | None:
    """Percentile of values, or None of none.

    Parameters
    ----------
    values
        Finite values in any order; not changed.
    percent
        0 to 100.

    Raises
    ------
    ValueError
        If `percent` is out of range.
    """
    from safecheck.measures.selection_kernels import select_pair

    if not 0 <= percent <= 100:
        raise ValueError(f"percent is {percent}, expected 0 to 100")
    if values.size == 0:
        return None
    rank, part = rank_of(values.size, percent)
    lower, upper = select_pair(np.ascontiguousarray(values, dtype=np.float64).ravel(), rank)
    return interpolate(float(lower), float(upper), part)
