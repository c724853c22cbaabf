"""Where each context of the adaptive coder stands in its state table, and which a decision takes.

A decision about a level's magnitude has three contexts: by frequency zone and expected magnitude; by tile size and what
is known inside the tile and around it, apart; and by tile size, zone and expected magnitude.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.context import CLASSES, END_LENGTHS, LENGTHS, ZONES, place_table, zone_table
from safecheck.codecs.tile.settings import SIZES
from safecheck.codecs.tile.transform import scan_order

__all__ = [
    "CONTEXTS",
    "LARGEST",
    "NEAR",
    "SPLIT",
    "STRIDE",
    "WEIGHT_ROWS",
    "end_rows",
    "level_rows",
    "mantissa_row",
    "place_row",
    "scan_table",
]

Array: TypeAlias = npt.NDArray[Any]

LARGEST: Final = SIZES[-1]
"""Side of a block, the largest tile, in pixels."""
STRIDE: Final = LARGEST + 2
"""Row length of the array of magnitudes around a tile."""
KINDS: Final = len(SIZES)
CHAIN: Final = 16
"""Decisions of a magnitude with contexts of their own; further ones share the last."""
NEAR: Final = 16
"""Classes of magnitudes inside the tile, and of those around it."""

_BY_ZONE: Final = 0
_APART: Final = _BY_ZONE + CHAIN * ZONES * CLASSES
_APART_HIGH: Final = _APART + 2 * KINDS * NEAR * NEAR
_BY_SIZE: Final = _APART_HIGH + CHAIN * KINDS * NEAR
_BY_SIZE_HIGH: Final = _BY_SIZE + 2 * KINDS * ZONES * CLASSES
_MANTISSA: Final = _BY_SIZE_HIGH + CHAIN * ZONES * NEAR
_END: Final = _MANTISSA + 2 * CLASSES * LENGTHS * 3
_END_SIZE: Final = _END + KINDS * CLASSES * END_LENGTHS
_END_CONSTANT: Final = _END_SIZE + KINDS * END_LENGTHS
_PLACE: Final = _END_CONSTANT + CLASSES * END_LENGTHS
SPLIT: Final = _PLACE + KINDS * END_LENGTHS * 8
"""First of the tree's contexts."""
CONTEXTS: Final = SPLIT + KINDS * 3
_END_WEIGHTS: Final = 4 * ZONES * KINDS
WEIGHT_ROWS: Final = _END_WEIGHTS + KINDS


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def level_rows(step: int, kind: int, zone: int, grade: int, near: int, around: int) -> tuple[int, int, int, int]:
    """Contexts and weights of the decision whether a magnitude has more than `step` bits.

    `kind` is the place of the tile's size in `SIZES`; `grade`, `near` and `around` are classes of the expected
    magnitude, of magnitudes inside the tile and in tiles around it, the last two below `NEAR`.
    """
    weights = ((min(step, 3) * ZONES + zone) * KINDS + kind) * 3
    if step < 2:
        one = _BY_ZONE + (step * ZONES + zone) * CLASSES + grade
        two = _APART + ((step * KINDS + kind) * NEAR + near) * NEAR + around
        three = _BY_SIZE + ((step * KINDS + kind) * ZONES + zone) * CLASSES + grade
        return one, two, three, weights
    high = min(step, CHAIN - 1)
    one = _BY_ZONE + (high * ZONES + min(zone, 1)) * CLASSES + grade
    two = _APART_HIGH + (high * KINDS + kind) * NEAR + near
    three = _BY_SIZE_HIGH + (high * ZONES + zone) * NEAR + around
    return one, two, three, weights


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def mantissa_row(zone: int, grade: int, length: int) -> int:
    """First of the three contexts of the two bits below the leading one."""
    return _MANTISSA + ((min(zone, 1) * CLASSES + grade) * LENGTHS + length) * 3


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def end_rows(step: int, kind: int, around: int, grade: int) -> tuple[int, int, int, int]:
    """Contexts and weights of the decision whether an end of block has more than `step` bits."""
    one = _END + (kind * CLASSES + around) * END_LENGTHS + step
    two = _END_SIZE + kind * END_LENGTHS + step
    three = _END_CONSTANT + grade * END_LENGTHS + step
    return one, two, three, (_END_WEIGHTS + kind) * 3


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def place_row(kind: int, length: int) -> int:
    """Row before the seven contexts of the bits below the leading one of an end of block."""
    return _PLACE + (kind * END_LENGTHS + length) * 8


@lru_cache(maxsize=1)
def scan_table() -> npt.NDArray[np.int32]:
    """Where each coefficient stands: (5 * 4096 * 4,), by size, place in `scan_order` and these four.

    Index in raster order, in the padded array of magnitudes of its tile, in the array of magnitudes around; zone.
    """
    table = np.zeros((KINDS, LARGEST * LARGEST, 4), np.int32)
    for kind, size in enumerate(SIZES):
        order = scan_order(size)
        around = order // size * STRIDE + order % size
        table[kind, : size * size] = np.stack([order, place_table(size), around, zone_table(size)], axis=1)
    table.flags.writeable = False
    return table.ravel()
