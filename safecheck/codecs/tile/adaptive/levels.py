"""Coding of the levels of tiles of differing size, and reading them back.

As in `tile.levels`, a tile gives its constant's difference from a prediction, its end of block and its levels up to
there. What is expected of a level comes from the tile itself and from the tiles to the left and above, whatever their
size: their magnitudes are read at the same frequency in cycles a pixel.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.adaptive.around import Work, expected_mean, look_around, note, own, pass_by, reach, survey
from safecheck.codecs.tile.adaptive.contexts import (
    NEAR,
    STRIDE,
    end_rows,
    level_rows,
    mantissa_row,
    place_row,
    scan_table,
)
from safecheck.codecs.tile.adaptive.mixing import Tables, decode_mixed, encode_mixed, logit_table, odds_table
from safecheck.codecs.tile.context import CLASSES, LENGTHS, MAGNITUDE_CAP, class_table
from safecheck.codecs.tile.entropy import Coder, decode_bit, decode_raw, decode_sign, encode_bit, encode_raw
from safecheck.codecs.tile.levels import LARGEST_LEVEL, WORST_BYTES, bit_length, decode_rest, encode_rest

__all__ = ["Lookup", "decode_tiles", "encode_tiles", "tables"]

Array: TypeAlias = npt.NDArray[Any]
Lookup: TypeAlias = tuple[Array, Array, Array, Array]


def tables() -> Lookup:
    """What both directions look up: places, classes, logits, odds."""
    return scan_table(), class_table(), logit_table(), odds_table()


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _known(near: Array, around: Array, classes: Array, place: int, beside_at: int, side: int) -> tuple[int, int, int]:
    """Classes of the expected magnitude, of what is known in the same tile and of what is known around it."""
    at = np.uintp(place)
    one = np.uintp(1)
    row = np.uintp(side)
    next_to = near[at - row] + near[at - one] + near[at - row + one]
    inside = 2 * next_to + near[at - row - row] + near[at - one - one]
    at = np.uintp(beside_at)
    beside = (4 * around[at] + around[at + one] + around[at + np.uintp(STRIDE)]) >> 4
    grade = classes[np.uintp(min(inside + beside, MAGNITUDE_CAP))]
    inside = min(classes[np.uintp(min(inside, MAGNITUDE_CAP))], NEAR - 1)
    return int(grade), int(inside), int(min(classes[np.uintp(min(beside, MAGNITUDE_CAP))], NEAR - 2))


@njit(cache=True, nogil=True, _nrt=False)
def _encode_end(
    buffer: Array,
    coder: Coder,
    states: Array,
    weights: Array,
    kind: int,
    around: int,
    grade: int,
    end: int,
    mix: Tables,
) -> Coder:
    """Write the place of a tile's last level that is not zero; 0 where only the constant may differ from zero."""
    length = bit_length(end)
    for k in range(min(length + 1, 2 * kind + 4)):
        rows = end_rows(k, kind, around, grade)
        coder = encode_mixed(buffer, coder, states, weights, rows, 1 if k < length else 0, mix)
    node = 1
    row = place_row(kind, length)
    for k in range(length - 2, max(length - 5, -1), -1):
        bit = (end >> k) & 1
        coder = encode_bit(buffer, coder, states, row + node, bit)
        node = 2 * node + bit
    if length > 4:
        coder = encode_raw(buffer, coder, end, length - 4)
    return coder


@njit(cache=True, nogil=True, _nrt=False)
def _decode_end(
    buffer: Array, coder: Coder, states: Array, weights: Array, kind: int, around: int, grade: int, mix: Tables
) -> tuple[Coder, int]:
    length = 0
    while length < 2 * kind + 4:
        coder, bit = decode_mixed(buffer, coder, states, weights, end_rows(length, kind, around, grade), mix)
        if not bit:
            break
        length += 1
    if length < 2:
        return coder, length
    node = 1
    row = place_row(kind, length)
    for _ in range(min(length - 1, 3)):
        coder, bit = decode_bit(buffer, coder, states, row + node)
        node = 2 * node + bit
    if length < 5:
        return coder, node
    coder, low = decode_raw(buffer, coder, length - 4)
    return coder, (node << (length - 4)) | low


@njit(cache=True, nogil=True, _nrt=False)
def encode_tiles(
    levels: Array,
    ends: Array,
    tiles: Array,
    lookup: Lookup,
    states: Array,
    weights: Array,
    work: Work,
    buffer: Array,
    coder: Coder,
    thin: int,
) -> tuple[Coder, bool]:
    """Write the tiles of a plane; False where the buffer is too short (then nothing of it counts).

    With `thin` of 3 every fourth tile is written, the others serving as its neighbours; with 0 all are.
    """
    places, classes, logits, odds = lookup
    owner, magnitudes, near, around, facts, found = work
    for tile in range(tiles.shape[0]):
        kind, start, end = tiles[tile, 0], tiles[tile, 3], ends[tile]
        side = (4 << kind) + 4
        if coder[0] + WORST_BYTES * ((16 << (2 * kind)) + 2) > buffer.shape[0]:
            return coder, False
        survey(tiles, tile, owner, facts, found)
        if tile & thin:
            pass_by(levels, tiles, tile, end, places, work)
            continue
        near[: side * side] = 0
        grade = int(classes[min(found[1] >> (7 - kind), MAGNITUDE_CAP)])
        known = (grade, min(grade, NEAR - 1), NEAR - 1)
        value = levels[start] - expected_mean(found, kind)
        for k in range(end + 1):
            at = np.uintp(4 * ((kind << 12) + k))
            place, zone = places[at + np.uintp(1)], places[at + np.uintp(3)]
            if k:
                known = _known(near, around, classes, place, places[at + np.uintp(2)], side)
                value = levels[np.uintp(start + k)]
            size = abs(value)
            length = 1 if k == end and k else 0
            while length < LENGTHS - 1:
                bit = 1 if size >> length else 0
                rows = level_rows(length, kind, zone, *known)
                coder = encode_mixed(buffer, coder, states, weights, rows, bit, (logits, odds))
                if not bit:
                    break
                length += 1
            if length > 1:
                coder = encode_rest(buffer, coder, states, mantissa_row(zone, known[0], length), size, length)
            if size:
                coder = encode_raw(buffer, coder, 1 if value < 0 else 0, 1)
                near[np.uintp(place)] = size
                magnitudes[np.uintp(start + places[at])] = min(size, MAGNITUDE_CAP)
            if k == 0:
                lengths, grade = min(found[2] >> 4, CLASSES - 1), int(classes[min(size, MAGNITUDE_CAP)])
                coder = _encode_end(buffer, coder, states, weights, kind, lengths, grade, end, (logits, odds))
                note(facts, tile, kind, levels[start], size, end)
                if end:
                    look_around(tiles, tile, owner, magnitudes, around, reach(places, kind, end))
        own(tiles, tile, owner)
    return coder, True


@njit(cache=True, nogil=True, _nrt=False)
def decode_tiles(
    levels: Array,
    ends: Array,
    tiles: Array,
    lookup: Lookup,
    states: Array,
    weights: Array,
    work: Work,
    buffer: Array,
    coder: Coder,
) -> tuple[Coder, bool]:
    """Read all tiles of a plane into zeroed levels and ends; False where the bytes are no code."""
    places, classes, logits, odds = lookup
    owner, magnitudes, near, around, facts, found = work
    for tile in range(tiles.shape[0]):
        kind, start, end = tiles[tile, 0], tiles[tile, 3], 0
        side = (4 << kind) + 4
        survey(tiles, tile, owner, facts, found)
        near[: side * side] = 0
        grade = int(classes[min(found[1] >> (7 - kind), MAGNITUDE_CAP)])
        known = (grade, min(grade, NEAR - 1), NEAR - 1)
        k = 0
        while k <= end:
            at = np.uintp(4 * ((kind << 12) + k))
            place, zone = places[at + np.uintp(1)], places[at + np.uintp(3)]
            if k:
                known = _known(near, around, classes, place, places[at + np.uintp(2)], side)
            length = 1 if k == end and k else 0
            while length < LENGTHS - 1:
                rows = level_rows(length, kind, zone, *known)
                coder, bit = decode_mixed(buffer, coder, states, weights, rows, (logits, odds))
                if not bit:
                    break
                length += 1
            value = size = length
            if length > 1:
                coder, size = decode_rest(buffer, coder, states, mantissa_row(zone, known[0], length), length)
            if size:
                coder, negative = decode_sign(buffer, coder)
                value = -size if negative else size
                near[np.uintp(place)] = size
                magnitudes[np.uintp(start + places[at])] = min(size, MAGNITUDE_CAP)
            if k == 0:
                lengths, grade = min(found[2] >> 4, CLASSES - 1), int(classes[min(size, MAGNITUDE_CAP)])
                coder, end = _decode_end(buffer, coder, states, weights, kind, lengths, grade, (logits, odds))
                value += expected_mean(found, kind)
                if abs(value) >= LARGEST_LEVEL or end >= 16 << (2 * kind) or coder[0] > buffer.shape[0] + 4:
                    return coder, False
                note(facts, tile, kind, value, size, end)
                ends[tile] = end
                if end:
                    look_around(tiles, tile, owner, magnitudes, around, reach(places, kind, end))
            levels[np.uintp(start + k)] = value
            k += 1
        own(tiles, tile, owner)
    return coder, True
