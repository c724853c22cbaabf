"""Heads of JPEG, JPEG-LS and JPEG 2000 code streams: their marker segments up to the first scan or tile.

Read here once, for two questions: `stream_facts` asks for size and samples, `stream_loss` for a loss.
"""

from __future__ import annotations

import struct
from collections.abc import Iterator
from dataclasses import dataclass

from safecheck.errors import InputRefused

__all__ = [
    "Jpeg2000Head",
    "JpegHead",
    "begins_jpeg",
    "begins_jpeg2000",
    "read_jpeg2000_head",
    "read_jpeg_head",
    "strip_jp2",
]

_START = b"\xff\xd8"
_START_2000 = b"\xff\x4f\xff\x51"
_BOX_2000 = b"jP  "
_FRAMES = frozenset(range(0xC0, 0xD0)) - {0xC4, 0xC8, 0xCC} | {0xF7}
_SCAN, _APP0, _APP14 = 0xDA, 0xE0, 0xEE
_SIZ, _CAP, _COD, _COC, _SOT = 0x51, 0x50, 0x52, 0x53, 0x90


@dataclass(frozen=True, slots=True)
class JpegHead:
    """Frame and scan header of JPEG (T.81 B.2) or JPEG-LS (T.87 C.2)."""

    process: int
    """Second byte of the frame header's marker: C0 baseline ... F7 JPEG-LS; 0 where the scan comes without one."""
    frame: bytes
    """Body of the frame header."""
    scan: tuple[int, int, int]
    """Last three bytes of the first scan header: start of the spectral selection, predictor or NEAR; its end, or the
    interleaving; bit positions, whose low half is the point transform."""
    adobe: int | None
    """Colour transform that Adobe's marker names; None without that marker."""
    jfif: bool


@dataclass(frozen=True, slots=True)
class Jpeg2000Head:
    """Main header of JPEG 2000 (T.800 Annex A) or HTJ2K (T.814)."""

    size: bytes
    """Body of the SIZ segment."""
    channels: int
    style: bytes
    """Body of the COD segment."""
    filters: frozenset[int]
    """Of COD and every COC: 0 is the 9/7 filter, 1 the 5/3; 255 where the segment is too short to tell."""
    high_throughput: bool


def begins_jpeg(code: bytes) -> bool:
    """Whether a JPEG or JPEG-LS code stream begins here."""
    return code[:2] == _START


def begins_jpeg2000(code: bytes) -> bool:
    """Whether a JPEG 2000 code stream begins here, bare or in the boxes of a JP2 file."""
    return code[:4] == _START_2000 or code[4:8] == _BOX_2000


def read_jpeg_head(code: bytes) -> JpegHead:
    """Read the markers of a JPEG or JPEG-LS stream up to its first scan.

    Raises
    ------
    InputRefused
        'decode': markers missing or cut.
    """
    if not begins_jpeg(code):
        raise InputRefused("decode", "the JPEG code stream does not begin with its start marker")
    process, frame, adobe, jfif = 0, b"", None, False
    for marker, body in _segments(code, 2):
        if marker == _APP14 and body[:5] == b"Adobe" and len(body) >= 12:
            adobe = body[11]
        elif marker == _APP0 and body[:5] == b"JFIF\x00":
            jfif = True
        elif marker in _FRAMES:
            process, frame = marker, body
        elif marker == _SCAN:
            return JpegHead(process, frame, _last_of_scan(body), adobe, jfif)
    raise InputRefused("decode", "no scan header in the JPEG code stream")


def _last_of_scan(body: bytes) -> tuple[int, int, int]:
    end = 4 + 2 * body[0] if body else 0
    if len(body) < max(end, 4):
        raise InputRefused("decode", "the JPEG scan header is cut")
    first, second, third = body[end - 3 : end]
    return first, second, third


def strip_jp2(code: bytes) -> bytes:
    """Bare JPEG 2000 code stream out of a JP2 file, whose own colour boxes have no say in DICOM (PS3.5 A.4.4).

    Raises
    ------
    InputRefused
        'decode': a JP2 file without a code stream.
    """
    if code[4:8] != _BOX_2000:
        return code
    start = code.find(_START_2000)
    if start < 0:
        raise InputRefused("decode", "no code stream in the JP2 file")
    return code[start:]


def read_jpeg2000_head(code: bytes) -> Jpeg2000Head:
    """Read the main header of a bare JPEG 2000 or HTJ2K code stream.

    Raises
    ------
    InputRefused
        'decode': markers missing or cut.
    """
    if code[:4] != _START_2000:
        raise InputRefused("decode", "the JPEG 2000 code stream does not begin with its markers")
    size, style, high_throughput = b"", b"", False
    components: list[bytes] = []
    for marker, body in _segments(code, 2):
        if marker == _SOT:
            break
        size = body if marker == _SIZ else size
        style = body if marker == _COD else style
        high_throughput |= marker == _CAP
        if marker == _COC:
            components.append(body)
    channels = struct.unpack_from(">H", size, 34)[0] if len(size) >= 36 else 0
    if len(size) < 36 + 3 * channels or len(style) < 10 or not channels:
        raise InputRefused("decode", "the main header of the JPEG 2000 code stream is cut")
    filters = frozenset((style[9], *(_component_filter(body, channels) for body in components)))
    return Jpeg2000Head(size, channels, style, filters, high_throughput)


def _component_filter(body: bytes, channels: int) -> int:
    """Filter that a COC segment gives (T.800 A.6.2)."""
    place = (1 if channels < 257 else 2) + 5
    return body[place] if len(body) > place else 255


def _segments(code: bytes, at: int) -> Iterator[tuple[int, bytes]]:
    """(second byte of the marker, body) of each whole marker segment from a position on."""
    while at + 4 <= len(code) and code[at] == 0xFF:
        if code[at + 1] == 0xFF:  # fill byte, T.81 B.1.1.2
            at += 1
            continue
        end = at + 2 + struct.unpack_from(">H", code, at + 2)[0]
        if end < at + 4 or end > len(code):
            return
        yield code[at + 1], code[at + 4 : end]
        at = end
