"""Head of a JPEG XL code stream (ISO/IEC 18181-1; the frame header from memory): its samples, and how it was made.

Read here once, for two questions: `stream_facts` asks for size and samples, `stream_loss` for a loss.
"""

from __future__ import annotations

import enum
import struct
from collections.abc import Iterator
from dataclasses import dataclass

from safecheck.errors import InputRefused

__all__ = ["JpegXlHead", "Made", "bare_codestream", "begins_jpegxl", "holds_jpeg", "read_jpegxl_head"]

_SIGNATURE = b"\xff\x0a"
_BOXED = b"\x00\x00\x00\x0cJXL \x0d\x0a\x87\x0a"
# Holds any header that is followed here; the bit reader's cost grows with the square of its input.
_HEAD_BYTES = 256
_RATIOS = ((1, 1), (12, 10), (4, 3), (3, 2), (16, 9), (5, 4), (2, 1))
_EXTENTS = ((1, 9), (1, 13), (1, 18), (1, 30))
_GREY_SPACE, _XYB_SPACE, _CUSTOM = 1, 2, 2


class Made(enum.Enum):
    """How the samples were coded, as far as the headers say."""

    XYB = "XYB"
    """Through the XYB colour transform, which is not reversible in whole numbers."""
    COSINE = "cosine"
    """First frame by the variable-size cosine transform."""
    MODULAR = "modular"
    """First frame in modular coding, samples not through XYB."""
    UNTOLD = "untold"


@dataclass(frozen=True, slots=True)
class JpegXlHead:
    """What size header, image metadata and the first frame header say."""

    rows: int
    columns: int
    channels: int
    precision: int
    """Bits per sample."""
    floating: bool
    made: Made


class _Bits:
    """Bits of a code stream, the least significant of each byte first (18181-1, 9.1)."""

    def __init__(self, content: bytes) -> None:
        self._number = int.from_bytes(content, "little")
        self._left = 8 * len(content)
        self._taken = 0

    def take(self, count: int) -> int:
        """Take an unsigned number."""
        if count > self._left:
            raise InputRefused("decode", "the JPEG XL header is cut")
        found = self._number & ((1 << count) - 1)
        self._number >>= count
        self._left -= count
        self._taken += count
        return found

    def choose(self, *fields: tuple[int, int]) -> int:
        """Take a U32: two bits name one of four (offset, bits)."""
        offset, count = fields[self.take(2)]
        return offset + self.take(count)

    def enumerated(self) -> int:
        """Take a value of an enumeration."""
        return self.choose((0, 0), (1, 0), (2, 4), (18, 6))

    def align(self) -> None:
        """Go on at the next byte."""
        self.take(-self._taken % 8)


def begins_jpegxl(code: bytes) -> bool:
    """Whether a JPEG XL code stream begins here, bare or in its container."""
    return code.startswith((_SIGNATURE, _BOXED))


def bare_codestream(code: bytes) -> bytes:
    """Code stream without the boxes of its container (18181-2)."""
    if not code.startswith(_BOXED):
        return code
    parts = []
    for kind, start, end in _boxes(code):
        if kind == b"jxlc":
            return code[start:end]
        if kind == b"jxlp":
            parts.append(code[start + 4 : end])
    return b"".join(parts)


def holds_jpeg(code: bytes) -> bool:
    """Whether the container carries what rebuilds a JPEG stream bit by bit."""
    return code.startswith(_BOXED) and any(kind == b"jbrd" for kind, _, _ in _boxes(code))


def _boxes(code: bytes) -> Iterator[tuple[bytes, int, int]]:
    """(kind, start and end of the body) of each box, the last one cut where the code is."""
    at = 0
    while at + 8 <= len(code):
        size, head = struct.unpack_from(">I", code, at)[0], 8
        if size == 1 and at + 16 <= len(code):
            size, head = struct.unpack_from(">Q", code, at + 8)[0], 16
        end = min(at + size if size else len(code), len(code))
        if end < at + head:
            return
        yield code[at + 4 : at + 8], at + head, end
        at = end


def read_jpegxl_head(code: bytes) -> JpegXlHead:
    """Read the head of a code stream, bare or in its container.

    Raises
    ------
    InputRefused
        'decode': no JPEG XL code stream, cut, turned, moving, with a preview, or with channels besides colour.
    """
    stream = bare_codestream(code)
    if not stream.startswith(_SIGNATURE):
        raise InputRefused("decode", "the JPEG XL code stream does not begin with its marker")
    bits = _Bits(stream[2:_HEAD_BYTES])
    rows, columns = _size(bits)
    if bits.take(1):  # all_default: 8 bits, XYB, upright, no further channels
        return JpegXlHead(rows, columns, 3, 8, False, Made.XYB)
    if bits.take(1):  # extra_fields
        _refuse_extra_fields(bits)
    floating, precision = _depth(bits)
    bits.take(1)  # modular_16bit_buffers
    if bits.choose((0, 0), (1, 0), (2, 4), (1, 12)):
        raise InputRefused("decode", "the JPEG XL code stream holds channels besides colour")
    xyb = bool(bits.take(1))
    channels, followed = _colour(bits)
    made = Made.XYB if xyb else _first_frame(bits) if followed else Made.UNTOLD
    return JpegXlHead(rows, columns, channels, precision, floating, made)


def _size(bits: _Bits) -> tuple[int, int]:
    """SizeHeader: height, then a ratio or a width."""
    small = bits.take(1)
    rows = (bits.take(5) + 1) * 8 if small else bits.choose(*_EXTENTS)
    ratio = bits.take(3)
    if ratio:
        across, down = _RATIOS[ratio - 1]
        return rows, rows * across // down
    return rows, (bits.take(5) + 1) * 8 if small else bits.choose(*_EXTENTS)


def _refuse_extra_fields(bits: _Bits) -> None:
    if bits.take(3):
        raise InputRefused("decode", "the JPEG XL code stream asks for the image to be turned")
    if bits.take(1):
        _size(bits)  # intrinsic size: a hint for display
    if bits.take(1):
        raise InputRefused("decode", "the JPEG XL code stream holds a preview")
    if bits.take(1):
        raise InputRefused("decode", "the JPEG XL code stream holds an animation")


def _depth(bits: _Bits) -> tuple[bool, int]:
    """(floating point, bits per sample)."""
    if not bits.take(1):
        return False, bits.choose((8, 0), (10, 0), (12, 0), (1, 6))
    precision = bits.choose((32, 0), (16, 0), (24, 0), (1, 6))
    bits.take(4)  # exponent bits
    return True, precision


def _colour(bits: _Bits) -> tuple[int, bool]:
    """(channels, whether all of the colour encoding was followed): no ICC profile and no custom values are."""
    if bits.take(1):  # all_default: sRGB
        return 3, True
    profile = bits.take(1)
    space = bits.enumerated()
    channels = 1 if space == _GREY_SPACE else 3
    if profile or space == _XYB_SPACE or bits.enumerated() == _CUSTOM:
        return channels, False
    if channels == 3 and bits.enumerated() == _CUSTOM:
        return channels, False
    _ = bits.take(24) if bits.take(1) else bits.enumerated()  # gamma, or transfer function
    bits.enumerated()  # rendering intent
    return channels, True


def _first_frame(bits: _Bits) -> Made:
    """Coding of the first frame; its defaults say cosine transform."""
    try:
        if bits.take(2) or not bits.take(1):  # extensions; transform data other than the defaults
            return Made.UNTOLD
        bits.align()
        if bits.take(1):
            return Made.COSINE
        if bits.take(2):
            return Made.UNTOLD
        return Made.MODULAR if bits.take(1) else Made.COSINE
    except InputRefused:
        # The samples are described all the same; how they were coded is not.
        return Made.UNTOLD
