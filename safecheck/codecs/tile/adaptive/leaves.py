"""Coefficients of chosen tiles: taken together, quantised, turned back into samples."""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.quantise import OFFSET
from safecheck.codecs.tile.settings import SIZES
from safecheck.codecs.tile.transform import TOGETHER, backward_tables, scan_order, turn_back

__all__ = ["dequantise_tiles", "gather", "inverse_tiles", "neighbour_table", "quantise_tiles"]

Array: TypeAlias = npt.NDArray[Any]

THIN_FROM: Final = 256
"""Of so many tiles and more the shifts are measured on every fourth."""
LONE: Final = 1.05
"""A magnitude of 1 is dropped below this, in steps, where all around is zero."""
COMPANY: Final = 0.04
"""How much less it takes for each step of weighted magnitudes around."""


@njit(cache=True, nogil=True)
def _gather(coefficients: Array, tiles: Array, kind: int, across: int, values: Array) -> None:
    count = 16 << (2 * kind)
    for tile in range(tiles.shape[0]):
        if tiles[tile, 0] == kind:
            source = (tiles[tile, 1] >> kind) * across + (tiles[tile, 2] >> kind)
            values[tiles[tile, 3] : tiles[tile, 3] + count] = coefficients[source]


def gather(
    coefficients: tuple[npt.NDArray[np.int32], ...], tiles: npt.NDArray[np.int32], cells_across: int
) -> npt.NDArray[np.int32]:
    """Coefficients of the tiles of a partition, tile after tile, each in `scan_order`.

    `coefficients` are (tiles, size * size) of each size in `SIZES`.
    """
    last = tiles[-1] if len(tiles) else (0, 0, 0, -16)
    values = np.empty(int(last[3]) + (16 << (2 * int(last[0]))), np.int32)
    for kind, own in enumerate(coefficients):
        _gather(own, tiles, kind, cells_across >> kind, values)
    return values


def neighbour_table() -> npt.NDArray[np.int32]:
    """For each size and place in `scan_order`: places of the eight coefficients around it, -1 beyond the tile.

    (5, 4096, 8); the four that share a side first.
    """
    around = ((-1, 0), (0, -1), (1, 0), (0, 1), (-1, 1), (1, -1), (-1, -1), (1, 1))
    table = np.full((len(SIZES), SIZES[-1] ** 2, len(around)), -1, np.int32)
    for kind, size in enumerate(SIZES):
        order = scan_order(size)
        index = np.full((size + 2, size + 2), -1, np.int32)
        index[1:-1, 1:-1].flat[order] = np.arange(size * size)
        rows, columns = order // size + 1, order % size + 1
        for k, (down, right) in enumerate(around):
            table[kind, : size * size, k] = index[rows + down, columns + right]
    return table


@njit(cache=True, nogil=True, _nrt=False)
def _is_lone(own: Array, steps: Array, near: Array, k: int) -> bool:
    """Whether a level of 1 costs more than it is worth: small itself, and little around it.

    Magnitudes around are summed in steps, those that share a side twice.
    """
    fine = abs(own[k]) / steps[k]
    if fine >= LONE:
        return False
    total = 0.0
    for j in range(8):
        other = near[j]
        if other > 0:
            total += (2.0 if j < 4 else 1.0) * (abs(own[other]) / steps[other])
    return bool(fine < LONE - COMPANY * total)


@njit(cache=True, nogil=True)
def quantise_tiles(
    values: Array, tiles: Array, steps: Array, neighbours: Array, levels: Array, ends: Array
) -> tuple[int, int]:
    """Fill levels and ends of block; return the two shifts in 1/256 steps.

    A dead-zone quantiser as in `quantise`, but a lone magnitude of 1, which costs more bits than its error is worth,
    becomes 0.
    """
    total_one = 0
    count_one = 0
    total_more = 0
    count_more = 0
    for tile in range(tiles.shape[0]):
        kind, start = tiles[tile, 0], tiles[tile, 3]
        count = 16 << (2 * kind)
        own = values[start : start + count]
        target = levels[start : start + count]
        step = steps[kind]
        for k in range(count):
            # From a double, since 64-bit whole numbers would keep this loop from being vectorised.
            value = np.float64(own[k])
            level = np.int32(abs(value) / step[k] + OFFSET)
            target[k] = -level if value < 0 else level
        level = np.int32(abs(np.float64(own[0])) / step[0] + 0.5)
        target[0] = -level if own[0] < 0 else level
        end = 0
        measured = tile & 3 == 0 or tiles.shape[0] < THIN_FROM
        for k in range(1, count):
            size = abs(target[k])
            if size == 0:
                continue
            if size == 1 and _is_lone(own, step, neighbours[kind, k], k):
                target[k] = 0
                continue
            end = k
            if measured:
                part = int(np.floor((abs(own[k]) / step[k] - size) * 256.0))
                if size == 1:
                    total_one += part
                    count_one += 1
                else:
                    total_more += part
                    count_more += 1
        ends[tile] = end
    one = min(max(total_one // max(count_one, 1), -127), 127)
    return one, min(max(total_more // max(count_more, 1), -127), 127)


@njit(cache=True, nogil=True)
def dequantise_tiles(levels: Array, tiles: Array, ends: Array, steps: Array, shift_one: int, shift_more: int) -> None:
    """Turn levels into coefficients in 1/256 stored units, in place, kept within 2**30."""
    for tile in range(tiles.shape[0]):
        kind, start = tiles[tile, 0], tiles[tile, 3]
        for k in range(ends[tile] + 1):
            level = int(levels[start + k])
            if level:
                size = abs(level)
                shift = shift_one if size == 1 else shift_more
                fine = size * 256 + (shift if k else 0)
                value = min(np.floor(fine * steps[kind, k] / 256.0 + 0.5), 1073741824.0)
                levels[start + k] = np.int32(-value if level < 0 else value)


@njit(cache=True, nogil=True)
def _inverse_tiles(
    values: Array, tiles: Array, ends: Array, chosen: Array, even: Array, odd: Array, places: Array, plane: Array
) -> None:
    """Turn the tiles of one size back and put them in their place."""
    size = even.shape[1] + odd.shape[1]
    together = TOGETHER // (size * size)
    for first in range(0, chosen.shape[0], together):
        across = min(together, chosen.shape[0] - first)
        work, turned = np.zeros((size, across * size)), np.empty((size, across * size))
        halves = np.empty((size, across * size))
        starts, lines = (places[:, 0] * across).astype(np.uint64), places[:, 1].astype(np.uint64)
        for t in range(across):
            start = tiles[chosen[first + t], 3]
            for k in range(ends[chosen[first + t]] + 1):
                work[lines[k], starts[k] + np.uint64(t)] = values[start + k] / 256.0
        turn_back(work, even, odd, turned, halves)
        for t in range(across):
            top, left = 4 * tiles[chosen[first + t], 1], 4 * tiles[chosen[first + t], 2]
            for u in range(size):
                for k in range(size):
                    plane[top + u, left + k] = turned[u, t * size + k]


def inverse_tiles(
    values: npt.NDArray[np.int32],
    tiles: npt.NDArray[np.int32],
    ends: npt.NDArray[np.int32],
    tables: tuple[npt.NDArray[np.float64], ...],
    shape: tuple[int, int],
) -> npt.NDArray[np.float64]:
    """Undo `gather` and the transform: (rows, columns), zero where no tile lies; `tables` of `basis`, by size."""
    plane = np.zeros(shape)
    for kind in range(len(SIZES)):
        chosen = np.flatnonzero(tiles[:, 0] == kind)
        _inverse_tiles(values, tiles, ends, chosen, *backward_tables(tables[kind]), plane)
    return plane
