"""Which pixels are padding, and the values they hold: coded without loss, at next to no cost where they form areas.

The frame is cut into cells of 8 x 8 pixels. Each is empty, full or mixed, told under the state of the cells to the left
and above; only pixels of mixed cells are told one by one, under six neighbours already known.
"""

from __future__ import annotations

from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.entropy import Coder, decode_bit, decode_raw, encode_bit, encode_raw

__all__ = [
    "CELL",
    "MASK_CONTEXTS",
    "decode_mask",
    "decode_padding_values",
    "encode_mask",
    "encode_padding_values",
]

Array: TypeAlias = npt.NDArray[Any]

CELL: Final = 8
"""Side of a mask cell in pixels, whatever the tile size."""
EMPTY, FULL, MIXED = 0, 1, 2
_UNIFORM: Final = 9
_PIXEL: Final = 18
_SAME: Final = 82
MASK_CONTEXTS: Final = 85
"""Contexts of the mask (0 to 81) and of the padding values (82 to 84, one a channel)."""


@njit(cache=True, nogil=True, _nrt=False)
def _cell_state(mask: Array, row: int, column: int) -> int:
    part = mask[row * CELL : (row + 1) * CELL, column * CELL : (column + 1) * CELL]
    found = 0
    for r in range(part.shape[0]):
        for c in range(part.shape[1]):
            found += part[r, c]
    if found == 0:
        return EMPTY
    return FULL if found == part.size else MIXED


@njit(cache=True, nogil=True, _nrt=False)
def _neighbour_cells(cells: Array, row: int, column: int) -> int:
    left = cells[row, column - 1] if column else 0
    above = cells[row - 1, column] if row else left
    return 3 * left + above


@njit(cache=True, nogil=True, _nrt=False)
def _neighbour_pixels(mask: Array, row: int, column: int) -> int:
    """Context of a pixel: west, west of it, north, north west, north east, north of north; zero outside."""
    context = 0
    if column:
        context |= mask[row, column - 1]
        context |= (mask[row, column - 2] if column > 1 else 0) << 1
    if row:
        context |= mask[row - 1, column] << 2
        context |= (mask[row - 1, column - 1] if column else 0) << 3
        context |= (mask[row - 1, column + 1] if column + 1 < mask.shape[1] else 0) << 4
        context |= (mask[row - 2, column] if row > 1 else 0) << 5
    return context


@njit(cache=True, nogil=True)
def encode_mask(mask: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Write a mask of zeros and ones (rows, columns); at most 2 bytes a pixel."""
    cells = np.zeros(((mask.shape[0] + CELL - 1) // CELL, (mask.shape[1] + CELL - 1) // CELL), np.uint8)
    for row in range(cells.shape[0]):
        for column in range(cells.shape[1]):
            state = _cell_state(mask, row, column)
            context = _neighbour_cells(cells, row, column)
            coder = encode_bit(buffer, coder, states, context, 1 if state == MIXED else 0)
            if state != MIXED:
                coder = encode_bit(buffer, coder, states, _UNIFORM + context, state)
            cells[row, column] = state
    for row in range(mask.shape[0]):
        for cell in range(cells.shape[1]):
            if cells[row // CELL, cell] == MIXED:
                for column in range(cell * CELL, min((cell + 1) * CELL, mask.shape[1])):
                    context = _PIXEL + _neighbour_pixels(mask, row, column)
                    coder = encode_bit(buffer, coder, states, context, mask[row, column])
    return coder


@njit(cache=True, nogil=True)
def decode_mask(mask: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Read a mask into a zeroed array."""
    cells = np.zeros(((mask.shape[0] + CELL - 1) // CELL, (mask.shape[1] + CELL - 1) // CELL), np.uint8)
    for row in range(cells.shape[0]):
        for column in range(cells.shape[1]):
            context = _neighbour_cells(cells, row, column)
            coder, mixed = decode_bit(buffer, coder, states, context)
            state = MIXED
            if not mixed:
                coder, state = decode_bit(buffer, coder, states, _UNIFORM + context)
            cells[row, column] = state
            if state == FULL:
                mask[row * CELL : (row + 1) * CELL, column * CELL : (column + 1) * CELL] = 1
    for row in range(mask.shape[0]):
        if coder[0] > buffer.shape[0] + 6:
            break
        for cell in range(cells.shape[1]):
            if cells[row // CELL, cell] == MIXED:
                for column in range(cell * CELL, min((cell + 1) * CELL, mask.shape[1])):
                    context = _PIXEL + _neighbour_pixels(mask, row, column)
                    coder, bit = decode_bit(buffer, coder, states, context)
                    mask[row, column] = bit
    return coder


@njit(cache=True, nogil=True)
def encode_padding_values(values: Array, bits: int, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Write values (pixels, channels) counted from the format's least: equal to the one before, or all bits."""
    for channel in range(values.shape[1]):
        previous = 0
        for k in range(values.shape[0]):
            value = values[k, channel]
            coder = encode_bit(buffer, coder, states, _SAME + channel, 1 if value == previous else 0)
            if value != previous:
                coder = encode_raw(buffer, coder, value, bits)
            previous = value
    return coder


@njit(cache=True, nogil=True)
def decode_padding_values(values: Array, bits: int, states: Array, buffer: Array, coder: Coder) -> Coder:
    """Read values (pixels, channels) counted from the format's least."""
    for channel in range(values.shape[1]):
        previous = 0
        for k in range(values.shape[0]):
            coder, same = decode_bit(buffer, coder, states, _SAME + channel)
            if not same:
                coder, previous = decode_raw(buffer, coder, bits)
            values[k, channel] = previous
    return coder
