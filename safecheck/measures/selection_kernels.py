"""Order statistics of many values without sorting them all."""

from __future__ import annotations

import numpy as np

from safecheck.measures.compiled import INDEX, VECTOR, compiled
from safecheck.measures.planes import Vector

_BINS = 4096
_FEW = 2048


@compiled()
def _fill(values: Vector, low: float, scale: float, counts: np.ndarray) -> None:
    """Count values by bin; a bin is a monotone function of the value, so bins never change the order."""
    for value in values:
        counts[min(int((value - low) * scale), _BINS - 1)] += 1


@compiled()
def _ends(values: Vector) -> tuple[float, float]:
    """Least and largest value."""
    low = high = values[0]
    for value in values:
        if value < low:
            low = value
        if value > high:
            high = value
    return low, high


@compiled()
def _take(values: Vector, low: float, scale: float, first: int, last: int, size: int) -> Vector:
    """Values of the bins first to last."""
    kept = np.empty(size)
    found = 0
    for value in values:
        bin_ = min(int((value - low) * scale), _BINS - 1)
        if first <= bin_ <= last:
            kept[found] = value
            found += 1
    return kept


@compiled(VECTOR, INDEX)
def select_pair(values: Vector, rank: int) -> tuple[float, float]:
    """Value of the given rank (0 for the least) and the next one, or the same where there is no next."""
    kept = values
    while kept.size > _FEW:
        low, high = _ends(kept)
        if low == high:
            return low, low
        scale = (_BINS - 1) / (high - low)
        if not scale < 1e300:
            break
        counts = np.zeros(_BINS, np.int64)
        _fill(kept, low, scale, counts)
        first = 0
        below = 0
        while below + counts[first] <= rank:
            below += counts[first]
            first += 1
        last = first
        reached = below + counts[first]
        while reached <= rank + 1 and last < _BINS - 1:
            last += 1
            reached += counts[last]
        if reached - below == kept.size:
            break
        kept = _take(kept, low, scale, first, last, reached - below)
        rank -= below
    ordered = np.sort(kept)
    return ordered[rank], ordered[min(rank + 1, ordered.size - 1)]
