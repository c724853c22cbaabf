"""Which tile sizes cover a plane best at a step: the least sum of squared error and of bits, at the step's own price.

The bits of a tile are told as in `rate`: each coefficient by the magnitudes next to it, over the step, from one table.
All sums are of whole numbers, so every processor makes the same choice.
"""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.adaptive.tree import EMPTY
from safecheck.codecs.tile.rate import BINS, COSTS, FIRST_BIN, FIRST_COST, tile_magnitudes

__all__ = ["bit_table", "choose", "tile_costs", "tile_counts"]

Array: TypeAlias = npt.NDArray[Any]

PRICE: Final = 24
"""Cost of 1/256 bit where an error of 1/64 step costs 10 times its square: about 0.15 squared steps a bit."""
EMPTY_TILE: Final = 256
"""Bits, in 1/256, of a tile of which the constant alone may differ from zero, beside that constant's."""
FULL_TILE: Final = 1536
"""Bits, in 1/256, of the end of block and the tree of other tiles."""
FINE: Final = 64
ROUNDED_UP: Final = 21
"""Offset of the quantiser in 1/64 step."""


def bit_table() -> npt.NDArray[np.int64]:
    """1/256 bits of a coefficient by quarter octaves of expected magnitude over step, from `rate.COSTS`: (`BINS`,)."""
    bits = []
    for quarter in range(BINS):
        knot, part = divmod(quarter, 2)
        low = int(COSTS[min(knot, len(COSTS) - 1)]) + 129 * max(knot - len(COSTS) + 1, 0)
        high = int(COSTS[min(knot + 1, len(COSTS) - 1)]) + 129 * max(knot + 2 - len(COSTS), 0)
        bits.append((low * (2 - part) + high * part) // 2)
    return np.array(bits, dtype=np.int64)


LOWEST_QUARTER: Final = FIRST_COST // 32
"""Where `bit_table` begins, in quarter octaves."""


@njit(cache=True, nogil=True)
def tile_costs(
    coefficients: Array, coded: Array, across: int, places: Array, scale: Array, bits: Array, costs: Array
) -> None:
    """Add to each tile's cost what this plane's coefficients take.

    Parameters
    ----------
    coefficients
        (tiles, size * size) whole numbers of 1/256 stored units.
    coded
        (tiles,), 0 where nothing of a tile is coded.
    across
        Tiles in a row.
    places
        Of `context.place_table`.
    scale
        (size * size,) one over the step of each coefficient.
    bits
        Of `bit_table`.
    costs
        (tiles,) int64.
    """
    count = coefficients.shape[1]
    side = 4
    while side * side < count:
        side *= 2
    side += 4
    magnitudes = np.zeros(side * side)
    expected = np.empty(count)
    quarters = expected.view(np.int64)
    for tile in range(coefficients.shape[0]):
        if not coded[tile]:
            continue
        own = coefficients[tile]
        tile_magnitudes(own, places, side, magnitudes, expected)
        column = tile % across
        before: Any = 0
        if column and coded[tile - 1]:
            before = coefficients[tile - 1, 0]
        elif tile >= across and coded[tile - across]:
            before = coefficients[tile - across, 0]
        expected[0] = 8 * abs(own[0] - before) + 1
        for k in range(count):
            expected[k] *= scale[k]
        spent: Any = 0
        error: Any = 0
        largest: Any = 0
        for k in range(count):
            quarter = (quarters[k] >> 50) - (1023 << 2) - LOWEST_QUARTER
            spent += bits[np.uintp(min(max(quarter, 0), BINS - 1))]
            fine = np.int64(abs(np.float64(own[k])) * scale[k] * FINE)
            level = (fine + ROUNDED_UP) >> 6
            if k:
                largest |= level
            rest = fine - (level << 6)
            error += rest * rest
        spent += FULL_TILE if largest else EMPTY_TILE
        costs[tile] += 10 * error + PRICE * spent


@njit(cache=True, nogil=True)
def choose(
    costs4: Array, costs8: Array, costs16: Array, costs32: Array, costs64: Array, coded: Array, cells: Array
) -> None:
    """Fill the map of cells with the partition of least cost.

    Costs are (rows, columns) of tiles of each size, `coded` and `cells` of cells of 4 x 4 pixels.
    """
    for r in range(cells.shape[0]):
        for c in range(cells.shape[1]):
            cells[r, c] = 0 if coded[r, c] else EMPTY
    for kind in range(1, 5):
        below = costs4 if kind == 1 else costs8 if kind == 2 else costs16 if kind == 3 else costs32
        own = costs8 if kind == 1 else costs16 if kind == 2 else costs32 if kind == 3 else costs64
        side = 1 << kind
        for r in range(own.shape[0]):
            for c in range(own.shape[1]):
                parts = below[2 * r, 2 * c] + below[2 * r, 2 * c + 1]
                parts += below[2 * r + 1, 2 * c] + below[2 * r + 1, 2 * c + 1]
                if parts < own[r, c]:
                    own[r, c] = parts
                    continue
                for y in range(r * side, (r + 1) * side):
                    for x in range(c * side, (c + 1) * side):
                        if cells[y, x] != EMPTY:
                            cells[y, x] = kind


@njit(cache=True, nogil=True)
def tile_counts(values: Array, tiles: Array, places: Array, relative: Array, counts: Array) -> None:
    """Count expected magnitudes of the chosen tiles in quarter octaves, as `rate.magnitude_counts` does.

    `values` are coefficients tile after tile, `tiles` of `tree.tiles_of`; `places` of `context.place_table`, `relative`
    (5, 4096) by size. Into the first row of `counts` (2, `BINS`) go all tiles, into the second every fourth.
    """
    magnitudes = np.zeros(68 * 68)
    expected = np.empty(4096)
    quarters = expected.view(np.int64)
    mean: Any = 0
    for tile in range(tiles.shape[0]):
        kind, start = tiles[tile, 0], tiles[tile, 3]
        count = 16 << (2 * kind)
        own = values[start : start + count]
        side = (4 << kind) + 4
        magnitudes[: side * side] = 0
        tile_magnitudes(own, places[kind], side, magnitudes, expected)
        expected[0] = 8 * abs(own[0] - ((mean << kind) >> 4)) + 1
        mean = (np.int64(own[0]) << 4) >> kind
        for k in range(count):
            expected[k] /= relative[kind, k]
        sampled = 0 if tile & 3 else 1
        for k in range(count):
            place = np.uintp(min(max((quarters[k] >> 50) - (1023 << 2) + FIRST_BIN, 0), BINS - 1))
            counts[0, place] += 1
            counts[1, place] += sampled
