"""Items of encapsulated pixel data, walked once from head to head (PS3.5 A.4)."""

from __future__ import annotations

import enum
import struct
from dataclasses import dataclass
from typing import BinaryIO

__all__ = ["Ending", "Items", "walk_items"]

_ITEM = b"\xfe\xff\x00\xe0"
_DELIMITER = b"\xfe\xff\xdd\xe0"


class Ending(enum.Enum):
    """How a sequence of items ends."""

    CLOSED = "closed"
    """By its delimiter."""
    OPEN = "open"
    """By the end of the file, right after an item."""
    CUT = "cut"
    """By the end of the file, within an item."""
    LOST = "lost"
    """By something that is neither an item nor the delimiter."""


@dataclass(frozen=True, slots=True)
class Items:
    """Where the items lie."""

    places: tuple[tuple[int, int], ...]
    """(offset in the stream, bytes) of each value, the offset table's first; the last one cut where the file is."""
    ending: Ending


def walk_items(stream: BinaryIO, start: int, end: int) -> Items:
    """Find the items from a position on.

    Parameters
    ----------
    stream
        Seekable.
    start
        Where the head of the first item lies.
    end
        Length of the stream.
    """
    places: list[tuple[int, int]] = []
    at = start
    while at + 8 <= end:
        stream.seek(at)
        head = stream.read(8)
        if head[:4] != _ITEM:
            return Items(tuple(places), Ending.CLOSED if head[:4] == _DELIMITER else Ending.LOST)
        size = struct.unpack_from("<I", head, 4)[0]
        at += 8
        places.append((at, min(size, end - at)))
        at += size
    return Items(tuple(places), Ending.CUT if at > end else Ending.OPEN if at == end else Ending.LOST)
