"""From samples to planes of numbers that tile without a rest, and back.

Grey is one plane. Colour is turned onto three orthogonal axes (the three-point cosine transform of R, G, B up to the
length of its axes): Y = (R + G + B) / 4, U = (R - B) / 2, V = (R - 2G + B) / 4, all exact. The axes' lengths scale the
step, so that an error in any plane weighs the same in R, G and B together.

Pixels that need not be coded, padding and those beyond the frame's edge, are filled from their neighbours and smoothed;
they cost next to nothing and are never read back.
"""

from __future__ import annotations

import math
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.frames import Mask, PixelFormat, Samples

__all__ = ["PLANE_SCALES", "centre", "from_planes", "padded_shape", "to_planes", "used_tiles"]

Array: TypeAlias = npt.NDArray[Any]

PLANE_SCALES = {1: (1.0,), 3: (math.sqrt(3.0) / 4, math.sqrt(2.0) / 2, math.sqrt(6.0) / 4)}
"""Lengths of the planes' axes, by number of channels."""
SWEEPS = 16
"""How often what is filled is smoothed."""


def padded_shape(shape: tuple[int, int], size: int) -> tuple[int, int]:
    """(rows, columns) rounded up to whole tiles."""
    return -(-shape[0] // size) * size, -(-shape[1] // size) * size


def centre(samples: Samples, padding: Mask | None) -> tuple[int, ...]:
    """Mean of each channel, rounded down, over every fourth pixel of every fourth row that is not padding.

    So a constant frame becomes zero, whatever its value. 0 where no such pixel is found.
    """
    pixels = samples[::4, ::4].reshape(-(-samples.shape[0] // 4), -(-samples.shape[1] // 4), -1)
    chosen = pixels.reshape(-1, pixels.shape[2]) if padding is None else pixels[~padding[::4, ::4]]
    return tuple(int(total) // max(len(chosen), 1) for total in chosen.sum(axis=0, dtype=np.int64))


@njit(cache=True, nogil=True)
def _nearest_in_line(line: Array, known: Array) -> bool:
    """Fill unknown entries from the nearest known one, the earlier on a tie; False where none is known."""
    size = line.shape[0]
    last = -1
    for k in range(size):
        if known[k]:
            for j in range(last + 1, k):
                line[j] = line[k] if last < 0 or k - j < j - last else line[last]
            last = k
    for j in range(last + 1, size):
        if last >= 0:
            line[j] = line[last]
    return last >= 0


@njit(cache=True, nogil=True)
def _fill_tile(tile: Array, known: Array, sweeps: int) -> None:
    """Extend along rows, then whole rows up and down, then smooth by means of four neighbours in quarters."""
    size = tile.shape[0]
    rows = np.zeros(size, np.uint8)
    for r in range(size):
        rows[r] = _nearest_in_line(tile[r], known[r])
    for c in range(size):
        _nearest_in_line(tile[:, c], rows)
    unknown = np.empty(size * size, np.int64)
    count = 0
    for k in range(size * size):
        if not known[k // size, k % size]:
            unknown[count] = k
            count += 1
    for _ in range(sweeps):
        for at in range(count):
            r, c = unknown[at] // size, unknown[at] % size
            total = tile[max(r - 1, 0), c] + tile[min(r + 1, size - 1), c]
            total += tile[r, max(c - 1, 0)] + tile[r, min(c + 1, size - 1)]
            tile[r, c] = np.floor(total + 0.5) / 4.0


@njit(cache=True, nogil=True)
def _fill(plane: Array, known: Array, size: int, mixed: Array, sweeps: int) -> None:
    """Fill each tile of which some pixels are known and some are not."""
    across = plane.shape[1] // size
    for tile in range(mixed.shape[0]):
        if mixed[tile]:
            top = tile // across * size
            left = tile % across * size
            _fill_tile(plane[top : top + size, left : left + size], known[top : top + size, left : left + size], sweeps)


def _known(shape: tuple[int, int], padding: Mask | None, size: int) -> npt.NDArray[np.uint8]:
    known = np.zeros(padded_shape(shape, size), dtype=np.uint8)
    known[: shape[0], : shape[1]] = 1 if padding is None else ~padding
    return known


def _over_tiles(reduce: np.ufunc, known: npt.NDArray[np.uint8], size: int) -> npt.NDArray[np.uint8]:
    """Reduce zeros and ones over each tile: (tiles,)."""
    rows, columns = known.shape
    strips = reduce.reduce(known.reshape(rows // size, size, columns), axis=1)
    found: npt.NDArray[np.uint8] = reduce.reduce(strips.reshape(rows // size, columns // size, size), axis=2).ravel()
    return found


def used_tiles(shape: tuple[int, int], padding: Mask | None, size: int) -> npt.NDArray[np.uint8]:
    """1 for each tile in raster order that holds a pixel that is not padding: (tiles,)."""
    rows, columns = padded_shape(shape, size)
    if padding is None:
        return np.ones(rows // size * (columns // size), dtype=np.uint8)
    return _over_tiles(np.bitwise_or, _known(shape, padding, size), size)


def to_planes(
    samples: Samples, padding: Mask | None, centres: tuple[int, ...], size: int, sweeps: int = SWEEPS
) -> list[npt.NDArray[np.float64]]:
    """Planes of whole tiles, filled where there is nothing to code, less each channel's centre."""
    shape = (samples.shape[0], samples.shape[1])
    channels = []
    for k, value in enumerate(centres):
        plane = np.zeros(padded_shape(shape, size))
        channel = samples if samples.ndim == 2 else samples[..., k]
        np.subtract(channel, float(value), out=plane[: shape[0], : shape[1]])
        channels.append(plane)
    if len(channels) == 3:
        red, green, blue = channels
        channels = [(red + green + blue) / 4, (red - blue) / 2, (red - 2 * green + blue) / 4]
    if padding is not None or channels[0].shape != shape:
        known = _known(shape, padding, size)
        mixed = _over_tiles(np.bitwise_or, known, size) - _over_tiles(np.bitwise_and, known, size)
        for plane in channels:
            _fill(plane, known, size, mixed, sweeps)
    return channels


@njit(cache=True, nogil=True)
def _round_into(values: Array, centre_value: int, lowest: int, highest: int, target: Array) -> None:
    for r in range(target.shape[0]):
        for c in range(target.shape[1]):
            value = np.floor(values[r, c] + 0.5) + centre_value
            target[r, c] = np.int32(min(max(value, lowest), highest))


def from_planes(
    planes: list[npt.NDArray[np.float64]],
    centres: tuple[int, ...],
    format: PixelFormat,  # noqa: A002
    shape: tuple[int, int],
) -> Samples:
    """Undo `to_planes`: round to whole numbers and clip to the format's range."""
    channels = planes
    if len(planes) == 3:
        y, u, v = planes
        channels = [(4 * y + 3 * u + 2 * v) / 3, (4 * y - 4 * v) / 3, (4 * y - 3 * u + 2 * v) / 3]
    out = np.empty((*shape, len(channels)), dtype=np.int32)
    for k, plane in enumerate(channels):
        _round_into(plane, centres[k], format.lowest, format.highest, out[..., k])
    samples = out.astype(format.dtype)
    return samples[..., 0] if len(channels) == 1 else samples
