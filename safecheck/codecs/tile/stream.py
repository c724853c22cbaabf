"""The header of a code: everything a decoder needs, checked before anything is allocated.

Little endian, 58 bytes, then the payload; see docs/tiled_codec.md for each field.
"""

from __future__ import annotations

import struct
import zlib
from dataclasses import astuple, dataclass
from typing import Final

from safecheck.codecs.tile.settings import ADAPTIVE_VERSION, BITSTREAM_VERSION, SIZES, TRANSFORMS, VERSIONS, WEIGHTINGS
from safecheck.codecs.tile.steps import STEPS
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat

__all__ = ["HEADER_BYTES", "Header", "read", "write"]

MAGIC: Final = b"SCTC"
_LAYOUT = struct.Struct("<4sBBBBIIBBBBHHHHiii6bII")
_CHECKSUM = struct.Struct("<I")
HEADER_BYTES: Final = _LAYOUT.size + _CHECKSUM.size


@dataclass(frozen=True, slots=True)
class Header:
    """Settings and shape of one code, in the order of its fields."""

    transform: int
    """Place in `TRANSFORMS`."""
    weighting: int
    """Place in `WEIGHTINGS`."""
    size: int
    """Tile size in pixels; 0 where tiles are chosen over the frame."""
    rows: int
    columns: int
    bits: int
    """Bits stored, 1 to 16."""
    signed: int
    """0 or 1."""
    channels: int
    """1 or 3."""
    padding: int
    """0: none; 1: one value a channel; 2: several values."""
    step: int
    """Index on the grid of steps."""
    padding_values: tuple[int, int, int]
    """Counted from the format's least value, where `padding` is 1."""
    centres: tuple[int, int, int]
    """Subtracted from each channel."""
    shifts: tuple[int, int, int, int, int, int]
    """Reconstruction shifts in 1/256 steps, for levels of 1 and above, a pair for each plane."""
    version: int = BITSTREAM_VERSION
    """One of `VERSIONS`."""
    drawn: int = 0
    """1 where cells of two values are told beside the transform, in codes of chosen tiles only."""


def write(header: Header, payload: bytes) -> bytes:
    """Join header, payload and checksum (CRC-32 of all that stands before and behind it)."""
    transform, weighting, size, rows, columns, bits, signed, channels, padding, step, *rest = astuple(header)
    values, centres, shifts, version, drawn = rest
    head = _LAYOUT.pack(
        MAGIC, version, transform, weighting, size, rows, columns, bits, signed, channels, padding,
        step, *values, *centres, *shifts, drawn, len(payload),
    )  # fmt: skip
    return head + _CHECKSUM.pack(zlib.crc32(payload, zlib.crc32(head))) + payload


def read(code: bytes, format: PixelFormat, shape: tuple[int, int]) -> tuple[Header, bytes]:  # noqa: A002
    """Take a code apart and hold it against what is expected.

    Raises
    ------
    CorruptCode
        If a field is out of range, the checksum differs, or format or shape are others.
    """
    if len(code) < HEADER_BYTES:
        raise CorruptCode(f"a tiled code of {len(code)} bytes, expected at least {HEADER_BYTES}")
    head, payload = code[: _LAYOUT.size], code[HEADER_BYTES:]
    (checksum,) = _CHECKSUM.unpack(code[_LAYOUT.size : HEADER_BYTES])
    magic, version, transform, weighting, size, rows, columns, bits, signed, channels, padding, step, *rest = (
        _LAYOUT.unpack(head)
    )
    length = rest[-1]
    if magic != MAGIC or version not in VERSIONS:
        raise CorruptCode(f"not a tiled code of version {' or '.join(map(str, VERSIONS))}")
    if length != len(payload) or checksum != zlib.crc32(payload, zlib.crc32(head)):
        raise CorruptCode("the checksum or the length of a tiled code differs from its bytes")
    header = Header(
        transform, weighting, size, rows, columns, bits, signed, channels, padding, step,
        (rest[0], rest[1], rest[2]), (rest[3], rest[4], rest[5]),
        (rest[6], rest[7], rest[8], rest[9], rest[10], rest[11]), version, rest[12],
    )  # fmt: skip
    if (rows, columns) != shape or (bits, signed, channels) != (
        format.bits_stored,
        int(format.signed),
        format.channels,
    ):
        raise CorruptCode("a tiled code tells another frame shape or pixel format than expected")
    _check_settings(header, format)
    return header, payload


def _check_settings(header: Header, format: PixelFormat) -> None:  # noqa: A002
    span = format.highest - format.lowest
    fits = (
        header.transform < len(TRANSFORMS)
        and header.weighting < len(WEIGHTINGS)
        and header.size in ((0,) if header.version == ADAPTIVE_VERSION else SIZES)
        and header.step < STEPS
        and header.padding <= 2
        and header.drawn <= (1 if header.version == ADAPTIVE_VERSION else 0)
        and max(header.padding_values) <= span
        and all(format.lowest <= value <= format.highest for value in header.centres[: header.channels])
    )
    if not fits:
        raise CorruptCode("a tiled code holds a setting out of range")
