"""Dead-zone quantiser, its steps per coefficient, and the grid on which steps lie.

A coefficient c becomes the level sign(c) floor(|c| / step + offset), with the offset `OFFSET` = 1/3 (a dead zone 4/3
steps wide, common practice for intra coding) and 1/2 for the constant of a tile. A level q is read as
sign(q) (|q| + shift) step, where the two shifts, for |q| = 1 and above, are measured by the encoder and stand in the
code: the means of the coefficients that became these levels.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

__all__ = ["OFFSET", "dequantise", "quantise"]

Array: TypeAlias = npt.NDArray[Any]

OFFSET = 1.0 / 3.0
"""Rounding offset of all coefficients but the constant."""
THIN_FROM = 1024
"""In planes of at least so many tiles the shifts are measured on every fourth."""


@njit(cache=True, nogil=True)
def _quantise_tile(coefficients: Array, steps: Array, levels: Array) -> int:
    """Fill one tile's levels; return the place of the last that is not zero, the constant not counted."""
    count = coefficients.shape[0]
    for k in range(count):
        level = np.int32(np.floor(abs(coefficients[k]) / steps[k] + OFFSET))
        levels[k] = -level if coefficients[k] < 0 else level
    level = np.int32(np.floor(abs(coefficients[0]) / steps[0] + 0.5))
    levels[0] = -level if coefficients[0] < 0 else level
    end = count - 1
    while end > 0 and levels[end] == 0:
        end -= 1
    return int(end)


@njit(cache=True, nogil=True)
def quantise(coefficients: Array, steps: Array, used: Array, levels: Array, ends: Array) -> tuple[int, int]:
    """Fill levels (tiles, size * size) and ends of block (tiles,); return the two shifts in 1/256 steps."""
    total_one = 0
    count_one = 0
    total_more = 0
    count_more = 0
    for tile in range(coefficients.shape[0]):
        if not used[tile]:
            continue
        ends[tile] = _quantise_tile(coefficients[tile], steps, levels[tile])
        if tile & 3 and coefficients.shape[0] >= THIN_FROM:
            continue
        for k in range(1, ends[tile] + 1):
            level = abs(levels[tile, k])
            if level:
                part = int(np.floor((abs(coefficients[tile, k]) / steps[k] - level) * 256.0))
                if level == 1:
                    total_one += part
                    count_one += 1
                else:
                    total_more += part
                    count_more += 1
    one = min(max(total_one // max(count_one, 1), -127), 127)
    return one, min(max(total_more // max(count_more, 1), -127), 127)


@njit(cache=True, nogil=True)
def dequantise(levels: Array, ends: Array, steps: Array, shift_one: int, shift_more: int) -> None:
    """Turn levels (tiles, size * size) into coefficients in 1/256 stored units, in place, kept within 2**30."""
    for tile in range(levels.shape[0]):
        for k in range(ends[tile] + 1):
            level = int(levels[tile, k])
            if level:
                size = abs(level)
                shift = shift_one if size == 1 else shift_more
                fine = size * 256 + (shift if k else 0)
                value = min(np.floor(fine * steps[k] / 256.0 + 0.5), 1073741824.0)
                levels[tile, k] = np.int32(-value if level < 0 else value)
