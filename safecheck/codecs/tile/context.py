"""Contexts of the coefficient levels: what is already known of a level, as a row of the coder's state table.

The expected magnitude of a level is a weighted sum of magnitudes already coded: lower frequencies of the same tile and
the same frequency of the tiles to the left and above. Its class (half octaves) and the zone of the coefficient choose
the context.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Final

import numpy as np
import numpy.typing as npt

__all__ = [
    "CLASSES",
    "CONTEXTS",
    "END",
    "END_LENGTHS",
    "END_PLACE",
    "LENGTH",
    "LENGTHS",
    "MAGNITUDE_CAP",
    "MANTISSA",
    "ONE",
    "ZERO",
    "ZONES",
    "class_table",
    "higher_table",
    "place_table",
    "zone_table",
]

ZONES: Final = 8
"""Rows of contexts by frequency; zone 0 is the constant of a tile."""
CLASSES: Final = 27
"""Rows of contexts by expected magnitude."""
LENGTHS: Final = 30
"""Bit lengths of a magnitude, 0 to 29."""
END_LENGTHS: Final = 13
"""Bit lengths of an end of block, 0 to 12."""
MAGNITUDE_CAP: Final = 8191
"""Expected magnitudes above this count as this."""

ZERO: Final = 0
ONE: Final = ZERO + ZONES * CLASSES
LENGTH: Final = ONE + ZONES * CLASSES
MANTISSA: Final = LENGTH + 2 * CLASSES * LENGTHS
END: Final = MANTISSA + 2 * CLASSES * LENGTHS * 3
END_PLACE: Final = END + 2 * END_LENGTHS * END_LENGTHS
CONTEXTS: Final = END_PLACE + END_LENGTHS * 8
"""Rows of the state table for one kind of plane; the names above say where each group begins."""


@lru_cache(maxsize=1)
def class_table() -> npt.NDArray[np.uint8]:
    """Class of each expected magnitude from 0 to `MAGNITUDE_CAP`: 0, then half octaves."""
    table = [0]
    for value in range(1, MAGNITUDE_CAP + 1):
        length = value.bit_length()
        half = (value >> (length - 2)) & 1 if length > 1 else 0
        table.append(2 * length - 1 + half)
    return np.array(table, dtype=np.uint8)


@lru_cache(maxsize=8)
def zone_table(size: int) -> npt.NDArray[np.uint8]:
    """Zone of each place in `scan_order`: 0 for the constant, then by row plus column frequency."""
    limits = (1, 2, 4, 7, 10)
    zones = []
    for total in sorted(u + v for u in range(size) for v in range(size)):
        scaled = (total * 8 + size - 1) // size
        zones.append(0 if total == 0 else 1 + sum(scaled > limit for limit in limits))
    return np.array(zones, dtype=np.uint8)


@lru_cache(maxsize=8)
def place_table(size: int) -> npt.NDArray[np.int32]:
    """Index of each place in `scan_order` in a (size + 4)-wide array padded by two on each side."""
    places = sorted((u + v, u, (u + 2) * (size + 4) + v + 2) for u in range(size) for v in range(size))
    return np.array([place for _, _, place in places], dtype=np.int32)


@lru_cache(maxsize=8)
def higher_table(size: int) -> npt.NDArray[np.int32]:
    """Places in `scan_order` of the next higher column and row frequency; size * size where there is none."""
    places = sorted((u + v, u, v) for u in range(size) for v in range(size))
    index = {(u, v): k for k, (_, u, v) in enumerate(places)}
    last = size * size
    pairs = [(index.get((u, v + 1), last), index.get((u + 1, v), last)) for _, u, v in places]
    return np.array(pairs, dtype=np.int32)
