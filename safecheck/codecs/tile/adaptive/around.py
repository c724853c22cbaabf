"""What the tiles to the left and above tell of a tile, whatever their size."""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.adaptive.contexts import LARGEST, STRIDE
from safecheck.codecs.tile.context import MAGNITUDE_CAP
from safecheck.codecs.tile.levels import bit_length

__all__ = ["Work", "expected_mean", "look_around", "new_work", "note", "own", "pass_by", "reach", "survey"]

Array: TypeAlias = npt.NDArray[Any]
Work: TypeAlias = tuple[Array, Array, Array, Array, Array, Array]

SHARE: Final = 16
"""Weight of a neighbour along a whole side."""


def new_work(cells: tuple[int, int], tiles: int, levels: int) -> Work:
    """Work space: tile of each cell, magnitudes in raster order, inside one tile and around it; facts of each tile."""
    return (
        np.full(cells, -1, np.int32),
        np.zeros(levels, np.uint16),
        np.zeros((LARGEST + 4) ** 2, np.int64),
        np.zeros(STRIDE * STRIDE, np.int64),
        np.zeros((tiles, 3), np.int64),
        np.zeros(4, np.int64),
    )


@njit(cache=True, nogil=True, _nrt=False)
def survey(tiles: Array, tile: int, owner: Array, facts: Array, found: Array) -> None:
    """Predict the constant from the tiles to the left and above, and sum up their ends and differences.

    `facts` of a tile: its mean in 1/64 step, the difference of its constant in the scale of a 64 x 64 tile, and the bit
    length of its end. `found` becomes the predicted mean, weighted differences and weighted lengths.
    """
    kind, row, column = tiles[tile, 0], tiles[tile, 1], tiles[tile, 2]
    side = 1 << kind
    found[:] = 0
    means = (0, 0)
    shared = (0, 0)
    for above in range(2):
        along = 0
        total = 0
        weight = 0
        while along < side:
            r = row - 1 if above else row + along
            c = column + along if above else column - 1
            if r < 0 or c < 0:
                break
            other = owner[r, c]
            if other < 0:
                along += 1
                continue
            length = 1 << tiles[other, 0]
            first = tiles[other, 2] if above else tiles[other, 1]
            part = min(first + length - (c if above else r), side - along)
            total += part * facts[other, 0]
            weight += part
            found[1] += part * facts[other, 1]
            found[2] += part * facts[other, 2]
            along += part
        means = (means[1], total // weight if weight else 0)
        shared = (shared[1], weight)
    found[1] = (found[1] * SHARE) >> kind
    found[2] = (found[2] * SHARE) >> kind
    left, up = means
    if shared[0] and shared[1]:
        corner = owner[row - 1, column - 1]
        slope = left + up - facts[corner, 0] if corner >= 0 else (left + up) >> 1
        found[0] = max(min(left, up), min(max(left, up), slope))
    else:
        found[0] = left + up


@njit(cache=True, nogil=True, _nrt=False)
def _add(around: Array, magnitudes: Array, start: int, kind: int, other: int, weight: int, limit: int) -> None:
    """Add a neighbour's magnitudes, read at a tile's frequencies, up to a sum of row and column frequency."""
    size = 4 << kind
    for u in range(min(size, limit + 1)):
        end = min(size, limit + 1 - u)
        if other == kind:
            for v in range(end):
                around[u * STRIDE + v] += weight * magnitudes[start + u * size + v]
        elif other < kind:
            shift = kind - other
            line = start + (u >> shift) * (4 << other)
            for v in range(end):
                around[u * STRIDE + v] += weight * magnitudes[line + (v >> shift)]
        else:
            shift = other - kind
            side = 4 << other
            for v in range(end):
                total = 0
                for r in range(1 << shift):
                    line = start + ((u << shift) + r) * side + (v << shift)
                    for c in range(1 << shift):
                        total += magnitudes[line + c]
                around[u * STRIDE + v] += (weight * total) >> (2 * shift)


@njit(cache=True, nogil=True, _nrt=False)
def look_around(tiles: Array, tile: int, owner: Array, magnitudes: Array, around: Array, limit: int) -> None:
    """Sum the magnitudes of the tiles to the left and above, each weighted by its share of the side, in 1/16."""
    kind, row, column = tiles[tile, 0], tiles[tile, 1], tiles[tile, 2]
    side = 1 << kind
    size = 4 << kind
    for u in range(min(size, limit) + 1):
        around[u * STRIDE : u * STRIDE + min(size, limit - u) + 1] = 0
    for above in range(2):
        along = 0
        while along < side:
            r = row - 1 if above else row + along
            c = column + along if above else column - 1
            if r < 0 or c < 0:
                break
            other = owner[r, c]
            if other < 0:
                along += 1
                continue
            length = 1 << tiles[other, 0]
            first = tiles[other, 2] if above else tiles[other, 1]
            part = min(first + length - (c if above else r), side - along)
            _add(around, magnitudes, tiles[other, 3], kind, tiles[other, 0], (SHARE * part) >> kind, limit)
            along += part


@njit(cache=True, nogil=True, _nrt=False)
def reach(places: Array, kind: int, k: int) -> int:
    """One more than row plus column frequency of a coefficient."""
    raster = places[4 * ((kind << 12) + k)]
    return int((raster >> (kind + 2)) + (raster & ((4 << kind) - 1)) + 1)


@njit(cache=True, nogil=True, _nrt=False)
def own(tiles: Array, tile: int, owner: Array) -> None:
    """Enter a tile as the one that covers its cells."""
    side = 1 << tiles[tile, 0]
    row, column = tiles[tile, 1], tiles[tile, 2]
    for r in range(row, row + side):
        for c in range(column, column + side):
            owner[r, c] = tile


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def expected_mean(found: Array, kind: int) -> int:
    """Level of a constant that the mean around it gives."""
    return int((found[0] + ((16 >> kind) >> 1)) >> (4 - kind))


@njit(cache=True, nogil=True, _nrt=False)
def note(facts: Array, tile: int, kind: int, level: int, size: int, end: int) -> None:
    """Keep what later tiles ask of this one."""
    facts[tile, 0] = level << (4 - kind)
    facts[tile, 1] = size << (4 - kind)
    facts[tile, 2] = bit_length(end)


@njit(cache=True, nogil=True, _nrt=False)
def pass_by(levels: Array, tiles: Array, tile: int, end: int, places: Array, work: Work) -> None:
    """Know a tile as if it had been written."""
    owner, magnitudes, _, _, facts, found = work
    kind, start = tiles[tile, 0], tiles[tile, 3]
    for k in range(1, end + 1):
        magnitudes[start + places[4 * ((kind << 12) + k)]] = min(abs(levels[start + k]), MAGNITUDE_CAP)
    level = levels[start]
    size = abs(level - expected_mean(found, kind))
    magnitudes[start] = min(size, MAGNITUDE_CAP)
    note(facts, tile, kind, level, size, end)
    own(tiles, tile, owner)
