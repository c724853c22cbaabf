"""Coding of the quantised coefficients (levels) of one plane, and reading them back.

Per tile: the constant's difference from its prediction, the end of block (place of the last level that is not zero),
then the levels up to there, low frequencies first. A magnitude is written as its bit length in unary and the bits below
the leading one; the first decisions carry contexts, signs and low bits have even odds.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.context import (
    CLASSES,
    END,
    END_LENGTHS,
    END_PLACE,
    LENGTH,
    LENGTHS,
    MAGNITUDE_CAP,
    MANTISSA,
    ONE,
    ZERO,
)
from safecheck.codecs.tile.entropy import (
    Coder,
    decode_bit,
    decode_raw,
    decode_sign,
    encode_bit,
    encode_raw,
)

__all__ = [
    "LARGEST_LEVEL",
    "WORST_BYTES",
    "bit_length",
    "decode_levels",
    "decode_rest",
    "encode_levels",
    "encode_rest",
    "new_scratch",
]

Array: TypeAlias = npt.NDArray[Any]

WORST_BYTES = 64
"""No level takes more bytes than this: at most 34 decisions of at most 11 bits, and 28 raw bits."""
LARGEST_LEVEL = 1 << 29


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def bit_length(value: int) -> int:
    """Tell how many bits a whole number from 0 on has."""
    length = 0
    while value:
        value >>= 1
        length += 1
    return length


@njit(cache=True, nogil=True, _nrt=False)
def _predict(levels: Array, used: Array, tile: int, across: int) -> int:
    """Predict the constant's level from its neighbours: the median of left, above and left + above - corner."""
    has_left = tile % across > 0 and used[tile - 1]
    has_above = tile >= across and used[tile - across]
    left = int(levels[tile - 1, 0]) if has_left else 0
    above = int(levels[tile - across, 0]) if has_above else 0
    if not (has_left and has_above):
        return left + above
    corner = int(levels[tile - across - 1, 0]) if used[tile - across - 1] else (left + above) >> 1
    return max(min(left, above), min(max(left, above), left + above - corner))


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def encode_rest(buffer: Array, coder: Coder, states: Array, row: int, value: int, length: int) -> Coder:
    """Write what stands below the leading bit of a magnitude above 1."""
    first = (value >> (length - 2)) & 1
    coder = encode_bit(buffer, coder, states, row, first)
    if length > 2:
        coder = encode_bit(buffer, coder, states, row + 1 + first, (value >> (length - 3)) & 1)
        low = length - 3
        if low > 16:
            coder = encode_raw(buffer, coder, value >> 16, low - 16)
            low = 16
        if low > 0:
            coder = encode_raw(buffer, coder, value, low)
    return coder


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def decode_rest(buffer: Array, coder: Coder, states: Array, row: int, length: int) -> tuple[Coder, int]:
    """Read a magnitude above 1 of so many bits."""
    coder, first = decode_bit(buffer, coder, states, row)
    value = 2 | first
    if length > 2:
        coder, bit = decode_bit(buffer, coder, states, row + 1 + first)
        value = (value << 1) | bit
        low = length - 3
        if low > 16:
            coder, part = decode_raw(buffer, coder, low - 16)
            value = (value << (low - 16)) | part
            low = 16
        if low > 0:
            coder, part = decode_raw(buffer, coder, low)
            value = (value << low) | part
    return coder, value


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _encode_magnitude(buffer: Array, coder: Coder, states: Array, zone: int, grade: int, value: int) -> Coder:
    """Write a magnitude above zero; that it is above zero is written by the caller."""
    coder = encode_bit(buffer, coder, states, ONE + zone * CLASSES + grade, 1 if value > 1 else 0)
    if value > 1:
        kind = (CLASSES if zone else 0) + grade
        row = LENGTH + kind * LENGTHS
        length = 2
        while value >> length:
            coder = encode_bit(buffer, coder, states, row + length, 1)
            length += 1
        if length < LENGTHS - 1:
            coder = encode_bit(buffer, coder, states, row + length, 0)
        coder = encode_rest(buffer, coder, states, MANTISSA + (kind * LENGTHS + length) * 3, value, length)
    return coder


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _decode_magnitude(buffer: Array, coder: Coder, states: Array, zone: int, grade: int) -> tuple[Coder, int]:
    coder, bit = decode_bit(buffer, coder, states, ONE + zone * CLASSES + grade)
    if not bit:
        return coder, 1
    kind = (CLASSES if zone else 0) + grade
    row = LENGTH + kind * LENGTHS
    length = 2
    while length < LENGTHS - 1:
        coder, bit = decode_bit(buffer, coder, states, row + length)
        if not bit:
            break
        length += 1
    coder, value = decode_rest(buffer, coder, states, MANTISSA + (kind * LENGTHS + length) * 3, length)
    return coder, value


@njit(cache=True, nogil=True, _nrt=False)
def _encode_end(buffer: Array, coder: Coder, states: Array, around: int, end: int, limit: int) -> Coder:
    """Write the place of a tile's last level that is not zero; 0 where only the constant may differ from zero."""
    length = bit_length(end)
    row = END + around * END_LENGTHS
    for k in range(length):
        coder = encode_bit(buffer, coder, states, row + k, 1)
    if length < limit:
        coder = encode_bit(buffer, coder, states, row + length, 0)
    node = 1
    row = END_PLACE + length * 8
    for k in range(length - 2, max(length - 5, -1), -1):
        bit = (end >> k) & 1
        coder = encode_bit(buffer, coder, states, row + node, bit)
        node = 2 * node + bit
    if length > 4:
        coder = encode_raw(buffer, coder, end, length - 4)
    return coder


@njit(cache=True, nogil=True, _nrt=False)
def _decode_end(buffer: Array, coder: Coder, states: Array, around: int, limit: int) -> tuple[Coder, int]:
    row = END + around * END_LENGTHS
    length = 0
    while length < limit:
        coder, bit = decode_bit(buffer, coder, states, row + length)
        if not bit:
            break
        length += 1
    if length < 2:
        return coder, length
    node = 1
    row = END_PLACE + length * 8
    for _ in range(min(length - 1, 3)):
        coder, bit = decode_bit(buffer, coder, states, row + node)
        node = 2 * node + bit
    if length < 5:
        return coder, node
    coder, low = decode_raw(buffer, coder, length - 4)
    return coder, (node << (length - 4)) | low


@njit(cache=True, nogil=True, _nrt=False)
def _around(ends: Array, residuals: Array, used: Array, tile: int, across: int) -> tuple[int, int]:
    """Bit lengths of the ends of the tiles to the left and above, summed; and their constants' differences."""
    lengths = 0
    residual = 0
    if tile % across > 0 and used[tile - 1]:
        lengths += bit_length(ends[tile - 1])
        residual += residuals[tile - 1]
    if tile >= across and used[tile - across]:
        lengths += bit_length(ends[tile - across])
        residual += residuals[tile - across]
    return lengths, min(2 * residual, MAGNITUDE_CAP)


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _expected(magnitudes: Array, place: int, side: int, before: Array, k: int) -> int:
    """Weighted sum of the magnitudes around a place that are known."""
    at = np.uintp(place)
    one = np.uintp(1)
    row = np.uintp(side)
    near = magnitudes[at - row] + magnitudes[at - one] + magnitudes[at - row + one]
    far = magnitudes[at - row - row] + magnitudes[at - one - one]
    return int(min(2 * near + far + before[np.uintp(k)], MAGNITUDE_CAP))


@njit(cache=True, nogil=True, _nrt=False)
def _look_back(levels: Array, used: Array, tile: int, across: int, higher: Array, sums: Array, before: Array) -> None:
    """Weighted sum of magnitudes in the tiles to the left and above: the same place and the two next higher."""
    count = before.shape[0]
    sums[:] = 0
    if tile % across > 0 and used[tile - 1]:
        for k in range(count):
            sums[k] += abs(levels[tile - 1, k])
    if tile >= across and used[tile - across]:
        for k in range(count):
            sums[k] += abs(levels[tile - across, k])
    for k in range(1, count):
        before[k] = 4 * sums[k] + sums[np.uintp(higher[k, 0])] + sums[np.uintp(higher[k, 1])]


@njit(cache=True, nogil=True, _nrt=False)
def encode_levels(
    levels: Array,
    ends: Array,
    used: Array,
    across: int,
    tables: tuple[Array, Array, Array, Array],
    states: Array,
    scratch: tuple[Array, Array, Array, Array],
    buffer: Array,
    coder: Coder,
    thin: int,
) -> tuple[Coder, bool]:
    """Write the tiles of a plane; False where the buffer is too short (then nothing of it counts).

    With `thin` of 3 every fourth tile is written, the others serving as its neighbours: no code, but as long as a
    quarter of one. With 0 all are.
    """
    places, zones, classes, higher = tables
    tiles, count = levels.shape
    side = _side(count)
    limit = bit_length(count - 1)
    magnitudes, sums, before, residuals = scratch
    for tile in range(tiles):
        if not used[tile]:
            continue
        if coder[0] + WORST_BYTES * (count + 2) > buffer.shape[0]:
            return coder, False
        around, grade = _around(ends, residuals, used, tile, across)
        grade = classes[grade]
        residual = levels[tile, 0] - _predict(levels, used, tile, across)
        size = abs(residual)
        residuals[tile] = size
        if (tile % across + 2 * (tile // across)) & thin:
            continue
        coder = encode_bit(buffer, coder, states, ZERO + grade, 1 if size else 0)
        if size:
            coder = _encode_magnitude(buffer, coder, states, 0, grade, size)
            coder = encode_raw(buffer, coder, 1 if residual < 0 else 0, 1)
        end = ends[tile]
        coder = _encode_end(buffer, coder, states, around, end, limit)
        _look_back(levels, used, tile, across, higher, sums, before)
        magnitudes[:] = 0
        magnitudes[places[0]] = size
        for k in range(1, end + 1):
            grade = classes[_expected(magnitudes, places[k], side, before, k)]
            level = levels[tile, k]
            size = abs(level)
            if k < end:
                coder = encode_bit(buffer, coder, states, ZERO + zones[k] * CLASSES + grade, 1 if size else 0)
            if size:
                magnitudes[places[k]] = size
                coder = _encode_magnitude(buffer, coder, states, zones[k], grade, size)
                coder = encode_raw(buffer, coder, 1 if level < 0 else 0, 1)
    return coder, True


@njit(cache=True, nogil=True, _nrt=False)
def _side(count: int) -> int:
    """Side of the padded array of a tile with so many coefficients."""
    side = 4
    while side * side < count:
        side *= 2
    return side + 4


@njit(cache=True, nogil=True, _nrt=False)
def decode_levels(
    levels: Array,
    ends: Array,
    used: Array,
    across: int,
    tables: tuple[Array, Array, Array, Array],
    states: Array,
    scratch: tuple[Array, Array, Array, Array],
    buffer: Array,
    coder: Coder,
) -> tuple[Coder, bool]:
    """Read all tiles of a plane into zeroed levels and ends; False where the bytes are no code."""
    places, zones, classes, higher = tables
    tiles, count = levels.shape
    side = _side(count)
    limit = bit_length(count - 1)
    magnitudes, sums, before, residuals = scratch
    for tile in range(tiles):
        if not used[tile]:
            continue
        around, grade = _around(ends, residuals, used, tile, across)
        grade = classes[grade]
        coder, size = decode_bit(buffer, coder, states, ZERO + grade)
        sign = 0
        if size:
            coder, size = _decode_magnitude(buffer, coder, states, 0, grade)
            coder, sign = decode_sign(buffer, coder)
        residuals[tile] = size
        level = _predict(levels, used, tile, across) + (-size if sign else size)
        coder, end = _decode_end(buffer, coder, states, around, limit)
        if abs(level) >= LARGEST_LEVEL or end >= count or coder[0] > buffer.shape[0] + 4:
            return coder, False
        levels[tile, 0] = level
        ends[tile] = end
        _look_back(levels, used, tile, across, higher, sums, before)
        magnitudes[:] = 0
        magnitudes[places[0]] = size
        for k in range(1, end + 1):
            grade = classes[_expected(magnitudes, places[k], side, before, k)]
            size = 1
            if k < end:
                coder, size = decode_bit(buffer, coder, states, ZERO + zones[k] * CLASSES + grade)
            if size:
                coder, size = _decode_magnitude(buffer, coder, states, zones[k], grade)
                coder, sign = decode_sign(buffer, coder)
                magnitudes[places[k]] = size
                levels[tile, k] = -size if sign else size
    return coder, True


def new_scratch(tiles: int, count: int) -> tuple[Array, Array, Array, Array]:
    """Work space: magnitudes of a tile with a margin, two sums over the tiles before, differences of constants."""
    return (
        np.zeros(_side(count) ** 2, np.int64),
        np.zeros(count + 1, np.int64),
        np.zeros(count, np.int64),
        np.zeros(tiles, np.int64),
    )
