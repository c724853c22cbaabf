"""The head of a JPEG XL code stream (ISO/IEC 18181-1): size, bits, orientation, channels."""

from __future__ import annotations

import struct
from collections.abc import Iterator

from safecheck.dicom.stream_facts import StreamFacts
from safecheck.errors import InputRefused

__all__ = ["bare_codestream", "holds_jpeg", "read_jpeg_xl"]

_BOXED = b"\x00\x00\x00\x0cJXL \x0d\x0a\x87\x0a"
_RATIOS = ((1, 1), (12, 10), (4, 3), (3, 2), (16, 9), (5, 4), (2, 1))
_SIZE_BITS = (9, 13, 18, 30)


class _Bits:
    """Bits of a byte string, the least significant of each byte first (18181-1, 9.1)."""

    def __init__(self, data: bytes) -> None:
        self._value = int.from_bytes(data, "little")
        self._left = 8 * len(data)

    def take(self, count: int) -> int:
        """Return the next bits as an unsigned number."""
        if count > self._left:
            raise InputRefused("decode", "the JPEG XL header is cut")
        found = self._value & ((1 << count) - 1)
        self._value >>= count
        self._left -= count
        return found

    def choose(self, *fields: tuple[int, int]) -> int:
        """Return a U32: two bits name one of four (offset, bits)."""
        offset, count = fields[self.take(2)]
        return offset + self.take(count)


def bare_codestream(code: bytes) -> bytes:
    """Code stream without the boxes of its container (18181-2)."""
    if not code.startswith(_BOXED):
        return code
    parts = []
    for kind, body in _boxes(code):
        if kind == b"jxlc":
            return body
        if kind == b"jxlp":
            parts.append(body[4:])
    return b"".join(parts)


def holds_jpeg(code: bytes) -> bool:
    """Whether the container carries what rebuilds a JPEG stream bit by bit."""
    return code.startswith(_BOXED) and any(kind == b"jbrd" for kind, _ in _boxes(code))


def _boxes(code: bytes) -> Iterator[tuple[bytes, bytes]]:
    at = 0
    while at + 8 <= len(code):
        size, head = struct.unpack_from(">I", code, at)[0], 8
        if size == 1 and at + 16 <= len(code):
            size, head = struct.unpack_from(">Q", code, at + 8)[0], 16
        end = at + size if size else len(code)
        if end < at + head or end > len(code):
            return
        yield code[at + 4 : at + 8], code[at + head : end]
        at = end


def read_jpeg_xl(code: bytes) -> StreamFacts:
    """Read size and image metadata.

    Raises
    ------
    InputRefused
        'decode': not a JPEG XL code stream, cut, turned, floating point, or with channels besides colour.
    """
    stream = bare_codestream(code)
    if stream[:2] != b"\xff\x0a":
        raise InputRefused("decode", "the JPEG XL code stream does not begin with its marker")
    bits = _Bits(stream[2:128])
    rows, columns = _size(bits)
    if bits.take(1):  # all_default: 8 bits, XYB, upright, no further channels
        return _facts(rows, columns, channels=3, precision=8)
    if bits.take(1):  # extra_fields
        if bits.take(3):
            raise InputRefused("decode", "the JPEG XL code stream asks for the image to be turned")
        if bits.take(1):
            _size(bits)  # intrinsic size: a hint for display
        if bits.take(1):
            raise InputRefused("decode", "the JPEG XL code stream holds a preview")
        if bits.take(1):
            raise InputRefused("decode", "the JPEG XL code stream holds an animation")
    precision = _precision(bits)
    bits.take(1)  # modular_16bit_buffers
    if bits.choose((0, 0), (1, 0), (2, 4), (1, 12)):
        raise InputRefused("decode", "the JPEG XL code stream holds channels besides colour")
    bits.take(1)  # xyb_encoded
    return _facts(rows, columns, channels=_channels(bits), precision=precision)


def _facts(rows: int, columns: int, *, channels: int, precision: int) -> StreamFacts:
    return StreamFacts(
        rows=rows,
        columns=columns,
        channels=channels,
        precision=precision,
        signed=False,
        coded_colour="RGB" if channels == 3 else "",
        process="jpeg-xl",
    )


def _size(bits: _Bits) -> tuple[int, int]:
    small = bits.take(1)
    rows = (bits.take(5) + 1) * 8 if small else _extent(bits)
    ratio = bits.take(3)
    if ratio:
        across, down = _RATIOS[ratio - 1]
        return rows, rows * across // down
    return rows, (bits.take(5) + 1) * 8 if small else _extent(bits)


def _extent(bits: _Bits) -> int:
    return bits.choose(*((1, count) for count in _SIZE_BITS))


def _precision(bits: _Bits) -> int:
    if bits.take(1):
        raise InputRefused("bits", "the JPEG XL code stream holds floating point samples")
    return bits.choose((8, 0), (10, 0), (12, 0), (1, 6))


def _channels(bits: _Bits) -> int:
    """Colour encoding: grey has one channel."""
    if bits.take(1):  # all_default: sRGB
        return 3
    bits.take(1)  # want_icc
    kind = bits.choose((0, 0), (1, 0), (2, 4), (18, 6))
    return 1 if kind == 1 else 3
