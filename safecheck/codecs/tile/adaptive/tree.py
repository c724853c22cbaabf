"""Which tile covers what: each block of 64 x 64 pixels is cut into four, and each of these again, down to 4 x 4.

A partition is a map of cells of 4 x 4 pixels: the place in `SIZES` of the tile that covers each, `EMPTY` where nothing
is coded. Tiles are taken block by block in raster order, in each block upper left, upper right, lower left, lower
right.
"""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.adaptive.contexts import LARGEST, SPLIT
from safecheck.codecs.tile.entropy import Coder, decode_bit, encode_bit
from safecheck.codecs.tile.settings import SIZES

__all__ = ["CELL", "EMPTY", "decode_tree", "encode_tree", "tiles_of"]

Array: TypeAlias = npt.NDArray[Any]

CELL: Final = SIZES[0]
"""Side of a cell in pixels."""
EMPTY: Final = 255
TOP: Final = len(SIZES) - 1
BLOCK: Final = LARGEST // CELL
DEEPEST: Final = 3 * TOP + 1


@njit(cache=True, nogil=True, _nrt=False)
def _holds(cells: Array, kind: int, row: int, column: int) -> bool:
    """Whether a node holds a cell that is coded."""
    side = 1 << kind
    for r in range(row, row + side):
        for c in range(column, column + side):
            if cells[r, c] != EMPTY:
                return True
    return False


@njit(cache=True, nogil=True, _nrt=False)
def _smallest(cells: Array, kind: int, row: int, column: int) -> int:
    side = 1 << kind
    least = EMPTY
    for r in range(row, row + side):
        for c in range(column, column + side):
            least = min(least, cells[r, c])
    return least


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _row(cells: Array, kind: int, row: int, column: int) -> int:
    """Context of a node: how many of the cells to the left and above belong to smaller tiles."""
    smaller = 0
    if column > 0 and cells[row, column - 1] < kind:
        smaller += 1
    if row > 0 and cells[row - 1, column] < kind:
        smaller += 1
    return SPLIT + kind * 3 + smaller


@njit(cache=True, nogil=True, _nrt=False)
def _push(stack: Array, depth: int, kind: int, row: int, column: int) -> int:
    """Put the four quarters of a node on the stack, the first on top."""
    side = 1 << (kind - 1)
    for k in range(3, -1, -1):
        stack[depth, 0] = kind - 1
        stack[depth, 1] = row + side * (k // 2)
        stack[depth, 2] = column + side * (k % 2)
        depth += 1
    return depth


@njit(cache=True, nogil=True)
def encode_tree(cells: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Write a partition; at most a byte and a half for each cell."""
    stack = np.empty((DEEPEST + 4, 3), np.int64)
    for block in range(cells.shape[0] // BLOCK * (cells.shape[1] // BLOCK)):
        across = cells.shape[1] // BLOCK
        stack[0, 0], stack[0, 1], stack[0, 2] = TOP, block // across * BLOCK, block % across * BLOCK
        depth = 1
        while depth:
            depth -= 1
            kind, row, column = stack[depth, 0], stack[depth, 1], stack[depth, 2]
            least = _smallest(cells, kind, row, column)
            if kind and least != EMPTY:
                split = 1 if least < kind else 0
                coder = encode_bit(buffer, coder, states, _row(cells, kind, row, column), split)
                if split:
                    depth = _push(stack, depth, kind, row, column)
    return coder


@njit(cache=True, nogil=True)
def decode_tree(cells: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Read a partition into a map that is 0 where cells are coded, `EMPTY` elsewhere."""
    stack = np.empty((DEEPEST + 4, 3), np.int64)
    for block in range(cells.shape[0] // BLOCK * (cells.shape[1] // BLOCK)):
        across = cells.shape[1] // BLOCK
        stack[0, 0], stack[0, 1], stack[0, 2] = TOP, block // across * BLOCK, block % across * BLOCK
        depth = 1
        while depth:
            depth -= 1
            kind, row, column = stack[depth, 0], stack[depth, 1], stack[depth, 2]
            if not kind or not _holds(cells, kind, row, column):
                continue
            coder, split = decode_bit(buffer, coder, states, _row(cells, kind, row, column))
            if split:
                depth = _push(stack, depth, kind, row, column)
                continue
            for r in range(row, row + (1 << kind)):
                for c in range(column, column + (1 << kind)):
                    if cells[r, c] != EMPTY:
                        cells[r, c] = kind
    return coder


@njit(cache=True, nogil=True)
def _list(cells: Array, tiles: Array) -> int:
    stack = np.empty((DEEPEST + 4, 3), np.int64)
    count = 0
    start = 0
    for block in range(cells.shape[0] // BLOCK * (cells.shape[1] // BLOCK)):
        across = cells.shape[1] // BLOCK
        stack[0, 0], stack[0, 1], stack[0, 2] = TOP, block // across * BLOCK, block % across * BLOCK
        depth = 1
        while depth:
            depth -= 1
            kind, row, column = stack[depth, 0], stack[depth, 1], stack[depth, 2]
            least = _smallest(cells, kind, row, column)
            if least == EMPTY:
                continue
            if least < kind:
                depth = _push(stack, depth, kind, row, column)
                continue
            tiles[count, 0], tiles[count, 1], tiles[count, 2], tiles[count, 3] = kind, row, column, start
            start += 1 << (2 * kind + 4)
            count += 1
    return count


def tiles_of(cells: npt.NDArray[np.uint8]) -> npt.NDArray[np.int32]:
    """Tiles of a partition in their order: (tiles, 4) place in `SIZES`, row and column of the first cell, first level.

    `cells` is (rows, columns), both multiples of 16.
    """
    tiles = np.empty((cells.size, 4), np.int32)
    return tiles[: _list(cells, tiles)]
