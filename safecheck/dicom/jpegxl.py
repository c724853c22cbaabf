"""The few bits at the start of a JPEG XL code stream that tell how it was made (ISO/IEC 18181-1, from memory)."""

from __future__ import annotations

import enum
import struct
from collections.abc import Iterator

__all__ = ["JpegXlHeader", "read_jpegxl"]

_SIGNATURE = b"\xff\x0a"
_CONTAINER = b"\x00\x00\x00\x0cJXL \x0d\x0a\x87\x0a"


class JpegXlHeader(enum.Enum):
    """How a code stream was made, as far as its headers say."""

    FROM_JPEG = "from JPEG"
    """A container that holds the data to rebuild a JPEG file."""
    XYB = "XYB"
    """Samples went through the XYB colour transform, which is not reversible in whole numbers."""
    COSINE = "cosine"
    """First frame coded by the variable-size cosine transform."""
    MODULAR = "modular"
    """First frame in modular coding, samples not through XYB."""
    UNTOLD = "untold"


class _TooFar(Exception):
    """The header holds something that is not followed here, or ends."""


class _Bits:
    """Bits of a code stream, least significant of each byte first."""

    def __init__(self, content: bytes) -> None:
        self._number = int.from_bytes(content, "little")
        self._left = 8 * len(content)
        self._taken = 0

    def take(self, count: int) -> int:
        """Take an unsigned number."""
        if count > self._left:
            raise _TooFar
        value = self._number & ((1 << count) - 1)
        self._number >>= count
        self._left -= count
        self._taken += count
        return value

    def choose(self, *widths: tuple[int, int]) -> int:
        """U32: two bits select (offset, bits that follow)."""
        offset, count = widths[self.take(2)]
        return offset + self.take(count)

    def enumerated(self) -> int:
        """Take a value of an enumeration."""
        return self.choose((0, 0), (1, 0), (2, 4), (18, 6))

    def align(self) -> None:
        """Go on at the next byte."""
        self.take(-self._taken % 8)


def read_jpegxl(start: bytes) -> JpegXlHeader | None:
    """Read how a code stream was made from its first bytes; None where no code stream begins."""
    if start.startswith(_SIGNATURE):
        return _read_stream(start[2:])
    if not start.startswith(_CONTAINER):
        return None
    stream = b""
    for kind, body in _boxes(start):
        if kind == b"jbrd":
            return JpegXlHeader.FROM_JPEG
        if kind in (b"jxlc", b"jxlp") and not stream:
            stream = body if kind == b"jxlc" else body[4:]
    return _read_stream(stream[2:]) if stream.startswith(_SIGNATURE) else JpegXlHeader.UNTOLD


def _boxes(content: bytes) -> Iterator[tuple[bytes, bytes]]:
    """(kind, body) of each box, the last one cut where the content is."""
    position = 0
    while position + 8 <= len(content):
        size, kind = struct.unpack_from(">L4s", content, position)
        end = position + size if size >= 8 else len(content)
        yield kind, content[position + 8 : end]
        position = end


def _read_stream(content: bytes) -> JpegXlHeader:
    # 256 bytes hold any header that is followed here; the bit reader's cost grows with the square of its input.
    bits = _Bits(content[:256])
    try:
        _skip_size(bits)
        if _read_xyb(bits):
            return JpegXlHeader.XYB
        if not bits.take(1):
            return JpegXlHeader.UNTOLD
        bits.align()
        return _read_frame(bits)
    except _TooFar:
        return JpegXlHeader.UNTOLD


def _skip_size(bits: _Bits) -> None:
    """SizeHeader: height, then a ratio or a width."""
    small = bits.take(1)
    wide = ((1, 9), (1, 13), (1, 18), (1, 30))
    _ = bits.take(5) if small else bits.choose(*wide)
    if bits.take(3) == 0:
        _ = bits.take(5) if small else bits.choose(*wide)


def _read_xyb(bits: _Bits) -> bool:
    """ImageMetadata up to its end; whether samples went through XYB, which is what its defaults say."""
    if bits.take(1):
        return True
    if bits.take(1):
        raise _TooFar
    if bits.take(1):
        bits.choose((32, 0), (16, 0), (24, 0), (1, 6))
        bits.take(4)
    else:
        bits.choose((8, 0), (10, 0), (12, 0), (1, 6))
    bits.take(1)
    if bits.choose((0, 0), (1, 0), (2, 4), (1, 12)):
        raise _TooFar
    if bits.take(1):
        return True
    _skip_colour(bits)
    if bits.take(2):
        raise _TooFar
    return False


def _skip_colour(bits: _Bits) -> None:
    """ColourEncoding; one with an ICC profile or custom values is not followed."""
    if bits.take(1):
        return
    if bits.take(1):
        raise _TooFar
    space = bits.enumerated()
    if bits.enumerated() == 2 or space == 2:
        raise _TooFar
    if space != 1 and bits.enumerated() == 2:
        raise _TooFar
    _ = bits.take(24) if bits.take(1) else bits.enumerated()
    bits.enumerated()


def _read_frame(bits: _Bits) -> JpegXlHeader:
    """FrameHeader of the first frame: its defaults say cosine transform."""
    if bits.take(1):
        return JpegXlHeader.COSINE
    if bits.take(2):
        raise _TooFar
    return JpegXlHeader.MODULAR if bits.take(1) else JpegXlHeader.COSINE
