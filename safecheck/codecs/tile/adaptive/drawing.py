"""Lettering and lines drawn into a frame: cells of 4 x 4 pixels of two values, told exactly beside the transform.

Burned-in text costs a transform more than all else and gains nothing from it. Where many cells hold the same two values
of high contrast and no other, these cells leave the transform as padding does, and their pixels are told one by one
under ten neighbours (after the templates of ITU-T T.82).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.adaptive.tree import CELL
from safecheck.codecs.tile.entropy import Coder, decode_bit, decode_raw, encode_bit, encode_raw, new_states
from safecheck.frames import Mask, PixelFormat, Raster, Samples

__all__ = ["Drawing", "find", "read", "restore", "write"]

Array: TypeAlias = npt.NDArray[Any]

FEWEST_CELLS: Final = 32
"""Fewer cells of two values are left to the transform."""
CONTRAST: Final = 4
"""The two values lie apart by at least the frame's range over this."""
_PIXEL: Final = 16
CONTEXTS: Final = _PIXEL + 1024
"""Contexts of the map of cells (0 to 15) and of the pixels."""


@dataclass(frozen=True, slots=True, eq=False)
class Drawing:
    """Cells that are drawn, and the two values of their pixels."""

    cells: npt.NDArray[np.uint8]
    """1 where a cell is drawn: (rows, columns) of cells, those cut by the frame's edge included."""
    ink: npt.NDArray[np.uint8]
    """1 where a pixel of a drawn cell holds the second value: (rows, columns)."""
    values: npt.NDArray[np.int32]
    """The two values, counted from the format's least: (2, channels)."""

    @property
    def covered(self) -> Mask:
        """Pixels of drawn cells."""
        whole = np.repeat(np.repeat(self.cells, CELL, axis=0), CELL, axis=1)
        covered: Mask = whole[: self.ink.shape[0], : self.ink.shape[1]].view(np.bool_)
        return covered


@njit(cache=True, nogil=True)
def _two_valued(keys: Array, first: Array, second: Array) -> None:
    """Least and largest value of each whole cell that holds no third; -1 elsewhere."""
    for r in range(keys.shape[0] // CELL):
        for c in range(keys.shape[1] // CELL):
            low = keys[r * CELL, c * CELL]
            high = low
            for k in range(1, CELL * CELL):
                value = keys[r * CELL + k // CELL, c * CELL + k % CELL]
                if low != high and value not in (low, high):
                    low = high = -1
                    break
                low, high = min(low, value), max(high, value)
            first[r, c], second[r, c] = low, high


def _keys(raster: Raster, rows: slice | npt.NDArray[np.intp]) -> npt.NDArray[np.int64]:
    """One number a pixel of some rows, equal where all channels are; -1 for padding."""
    samples = raster.samples[rows].reshape(-1, raster.shape[1], raster.format.channels)
    keys: npt.NDArray[np.int64] = samples[..., 0].astype(np.int64)
    keys -= raster.format.lowest
    for channel in range(1, raster.format.channels):
        keys <<= 16
        keys += samples[..., channel]
        keys -= raster.format.lowest
    if raster.padding is not None:
        np.copyto(keys, -1, where=raster.padding[rows])
    return keys


def _of_contrast(first: Array, second: Array, keys: Array, channels: int) -> Mask:
    """Cells of two values; of grey ones those that lie far enough apart."""
    two: Mask = first < second
    if channels == 1:
        two &= CONTRAST * (second - first) >= keys.max() - max(int(keys.min()), 0)
    return two


def _promising(raster: Raster) -> bool:
    """Whether every eighth row of cells holds at least an eighth of the fewest cells of two values, for a quick no."""
    rows, columns = raster.shape[0] // CELL, raster.shape[1] // CELL
    if rows < 64:
        return True
    chosen = np.concatenate([np.arange(CELL * row, CELL * (row + 1)) for row in range(0, rows, 8)])
    keys = _keys(raster, chosen)
    first, second = np.full((2, len(chosen) // CELL, columns), -1, np.int64)
    _two_valued(keys, first, second)
    found = _of_contrast(first, second, keys, raster.format.channels)
    return 8 * int(np.count_nonzero(found)) >= FEWEST_CELLS


def find(raster: Raster) -> Drawing | None:
    """Cells drawn in the two values that most cells of two values hold; None where they are few or of low contrast."""
    grid = (-(-raster.shape[0] // CELL), -(-raster.shape[1] // CELL))
    if not _promising(raster):
        return None
    first, second = np.full((2, *grid), -1, np.int64)
    keys = _keys(raster, slice(None))
    _two_valued(keys, first, second)
    two = _of_contrast(first, second, keys, raster.format.channels)
    if np.count_nonzero(two) < FEWEST_CELLS:
        return None
    pairs, counts = np.unique(np.stack([first[two], second[two]], axis=1), axis=0, return_counts=True)
    low, high = pairs[np.argmax(counts)]
    channels = raster.format.channels
    values = np.array(
        [[(int(key) >> (16 * k)) & 0xFFFF for k in range(channels)[::-1]] for key in (low, high)], np.int32
    )
    spread = int(raster.samples.max()) - int(raster.samples.min())
    if counts.max() < FEWEST_CELLS or CONTRAST * int(np.abs(values[1] - values[0]).max()) < spread:
        return None
    cells = (first == low) & (second == high) | (first == high) & (second == high)
    drawn = Drawing(cells.view(np.uint8), np.zeros(raster.shape, np.uint8), values)
    return Drawing(drawn.cells, ((keys == high) & drawn.covered).view(np.uint8), values)


@njit(cache=True, nogil=True, _nrt=False)
def _cell_context(cells: Array, r: int, c: int) -> int:
    """Cells to the left, above, above left and above right; zero outside."""
    context: Any = np.int64(cells[r, c - 1]) if c else 0
    for k in range(-1, 2):
        if r and 0 <= c + k < cells.shape[1]:
            context += np.int64(cells[r - 1, c + k]) << (k + 2)
    return int(context)


@njit(cache=True, nogil=True, _nrt=False)
def _pixel_context(ink: Array, r: int, c: int) -> int:
    """Three pixels to the left, five above and two above those; zero outside and beyond drawn cells."""
    context: Any = _PIXEL
    for k in range(1, 4):
        if c >= k:
            context += np.int64(ink[r, c - k]) << (k - 1)
    for k in range(-2, 3):
        if r and 0 <= c + k < ink.shape[1]:
            context += np.int64(ink[r - 1, c + k]) << (k + 5)
    for k in range(2):
        if r > 1 and c + k < ink.shape[1]:
            context += np.int64(ink[r - 2, c + k]) << (k + 8)
    return int(context)


@njit(cache=True, nogil=True)
def _write(cells: Array, ink: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    for r in range(cells.shape[0]):
        for c in range(cells.shape[1]):
            coder = encode_bit(buffer, coder, states, _cell_context(cells, r, c), int(cells[r, c]))
    for r in range(ink.shape[0]):
        for c in range(ink.shape[1]):
            if cells[r // CELL, c // CELL]:
                coder = encode_bit(buffer, coder, states, _pixel_context(ink, r, c), int(ink[r, c]))
    return coder


@njit(cache=True, nogil=True)
def _read(cells: Array, ink: Array, states: Array, buffer: Array, coder: Coder) -> Coder:
    for r in range(cells.shape[0]):
        for c in range(cells.shape[1]):
            coder, bit = decode_bit(buffer, coder, states, _cell_context(cells, r, c))
            cells[r, c] = bit
    for r in range(ink.shape[0]):
        if coder[0] > buffer.shape[0] + 6:
            break
        for c in range(ink.shape[1]):
            if cells[r // CELL, c // CELL]:
                coder, bit = decode_bit(buffer, coder, states, _pixel_context(ink, r, c))
                ink[r, c] = bit
    return coder


def write(drawing: Drawing, bits: int, buffer: npt.NDArray[np.uint8], coder: Coder) -> Coder:
    """Write a drawing; the buffer has room for two bytes a pixel and 64 more."""
    for value in drawing.values.ravel():
        coder = encode_raw(buffer, coder, int(value), bits)
    position, low, width = _write(drawing.cells, drawing.ink, new_states(CONTEXTS), buffer, coder)
    return position, low, width


def read(
    shape: tuple[int, int],
    format: PixelFormat,  # noqa: A002
    buffer: npt.NDArray[np.uint8],
    coder: Coder,
) -> tuple[Coder, Drawing]:
    """Read a drawing."""
    values = np.zeros((2, format.channels), np.int32)
    for k in range(values.size):
        coder, values.flat[k] = decode_raw(buffer, coder, format.bits_stored)
    cells = np.zeros((-(-shape[0] // CELL), -(-shape[1] // CELL)), np.uint8)
    ink = np.zeros(shape, np.uint8)
    coder = _read(cells, ink, new_states(CONTEXTS), buffer, coder)
    return coder, Drawing(cells, ink, values)


def restore(samples: Samples, drawing: Drawing, format: PixelFormat) -> None:  # noqa: A002
    """Put the pixels of drawn cells in their places."""
    exact = (drawing.values + format.lowest).astype(samples.dtype)
    covered = drawing.covered
    chosen = exact[drawing.ink[covered]]
    samples[covered] = chosen[:, 0] if samples.ndim == 2 else chosen
