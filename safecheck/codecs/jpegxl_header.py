"""Header of a JPEG XL code stream, held against the format before anything is decoded.

Source: ISO/IEC 18181-1, SizeHeader and ImageMetadata, and 18181-2, boxes; from memory. Only what our encoder writes is
read: an upright still image of grey or RGB whole numbers without further channels.
"""

from __future__ import annotations

from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat

__all__ = ["check_jpegxl"]

_SIGNATURE = b"\xff\x0a"
_BOXES = b"\x00\x00\x00\x0cJXL \x0d\x0a\x87\x0a\x00\x00\x00\x14ftypjxl \x00\x00\x00\x00jxl \x00\x00\x00\x09jxll\x0a"
"""What stands before a code stream of level 10, which lossless samples of more than 12 bits need."""
_STREAM_BOX = b"jxlc"
_HEAD_BYTES = 48
_RATIOS = ((1, 1), (12, 10), (4, 3), (3, 2), (16, 9), (5, 4), (2, 1))
_EXTENTS = ((1, 9), (1, 13), (1, 18), (1, 30))
_DEPTHS = ((8, 0), (10, 0), (12, 0), (1, 6))
_ENUMERATED = ((0, 0), (1, 0), (2, 4), (18, 6))
_GREY = 1


class _Bits:
    """Bits of a code stream, the least significant of each byte first."""

    def __init__(self, content: bytes) -> None:
        self._number = int.from_bytes(content, "little")
        self._left = 8 * len(content)

    def take(self, count: int) -> int:
        """Take an unsigned number."""
        if count > self._left:
            raise CorruptCode("JPEG XL: the header is cut")
        found = self._number & ((1 << count) - 1)
        self._number >>= count
        self._left -= count
        return found

    def choose(self, fields: tuple[tuple[int, int], ...]) -> int:
        """Take a U32: two bits name one of four (offset, bits)."""
        offset, count = fields[self.take(2)]
        return offset + self.take(count)


def check_jpegxl(code: bytes, form: PixelFormat, shape: tuple[int, int], *, lossless: bool) -> None:
    """Hold size, precision, channels and colour transform of a code stream against what was asked for.

    Parameters
    ----------
    code
        Code stream, bare or in the boxes of level 10.
    form, shape
        Expected pixel format and (rows, columns).
    lossless
        Samples as they are, rather than by way of the XYB colour transform.

    Raises
    ------
    CorruptCode
        If the header says anything else.
    """
    stream = code
    if code.startswith(_BOXES):
        body = len(_BOXES) + 8
        if code[body - 4 : body] != _STREAM_BOX or int.from_bytes(code[body - 8 : body - 4]) != len(code) - body + 8:
            raise CorruptCode("JPEG XL: the boxes are not those of one code stream")
        stream = code[body:]
    if not stream.startswith(_SIGNATURE):
        raise CorruptCode("JPEG XL: the code does not begin with its marker")
    bits = _Bits(stream[len(_SIGNATURE) : _HEAD_BYTES])
    if _size(bits) != shape:
        raise CorruptCode("JPEG XL: the size in the header is not the frame's")
    if _samples(bits) != (form.bits_stored, form.channels, not lossless):
        raise CorruptCode("JPEG XL: precision, channels or colour transform in the header are not those asked for")


def _size(bits: _Bits) -> tuple[int, int]:
    """SizeHeader: height, then a ratio or a width."""
    small = bits.take(1)
    rows = (bits.take(5) + 1) * 8 if small else bits.choose(_EXTENTS)
    ratio = bits.take(3)
    if ratio:
        across, down = _RATIOS[ratio - 1]
        return rows, rows * across // down
    return rows, (bits.take(5) + 1) * 8 if small else bits.choose(_EXTENTS)


def _samples(bits: _Bits) -> tuple[int, int, bool]:
    """(bits per sample, channels, whether through XYB) of ImageMetadata."""
    if bits.take(1):  # all_default: 8 bits, sRGB, through XYB
        return 8, 3, True
    if bits.take(1) or bits.take(1):
        raise CorruptCode("JPEG XL: the header tells of turning, animation or floating point")
    precision = bits.choose(_DEPTHS)
    bits.take(1)  # modular_16bit_buffers
    if bits.choose(((0, 0), (1, 0), (2, 4), (1, 12))):
        raise CorruptCode("JPEG XL: the header tells of channels besides colour")
    through_xyb = bool(bits.take(1))
    if bits.take(1):  # all_default: sRGB
        return precision, 3, through_xyb
    if bits.take(1):
        raise CorruptCode("JPEG XL: the header tells of a colour profile")
    return precision, 1 if bits.choose(_ENUMERATED) == _GREY else 3, through_xyb
