"""What a code stream says of itself: size, channels, precision, sign, colour transform, process."""

from __future__ import annotations

import struct
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from safecheck.errors import InputRefused

__all__ = ["StreamFacts", "coded_length", "read_jpeg", "read_jpeg2000", "strip_jp2"]

_START_OF_FRAME = frozenset(range(0xC0, 0xD0)) - {0xC4, 0xC8, 0xCC} | {0xF7}
_PROCESSES = {0xC0: "baseline", 0xC1: "extended", 0xC2: "progressive", 0xC3: "lossless", 0xF7: "jpeg-ls"}
_CODESTREAM_2000 = b"\xff\x4f\xff\x51"


@dataclass(frozen=True, slots=True)
class StreamFacts:
    """Declared in the code stream itself, not in the DICOM header."""

    rows: int
    columns: int
    channels: int
    precision: int
    """Bits per sample."""
    signed: bool
    coded_colour: Literal["RGB", "YBR", ""]
    """As marked in the stream; '' where it leaves that to the header."""
    process: str
    """'baseline', 'extended', 'progressive', 'lossless', 'jpeg-ls', 'jpeg2000', 'htj2k' or 'jpeg-xl'."""


def coded_length(code: bytes) -> int | None:
    """Bytes up to and with the end marker FFD9, without the padding after it; None where there is no end marker."""
    stripped = code.rstrip(b"\x00\xff")
    return len(stripped) if stripped.endswith(b"\xff\xd9") else None


def read_jpeg(code: bytes) -> StreamFacts:
    """Read the markers of a JPEG (T.81) or JPEG-LS (T.87) stream up to its first scan.

    Raises
    ------
    InputRefused
        'decode': markers missing, cut or contradictory; 'syntax': another process.
    """
    adobe: int | None = None
    jfif = False
    frame: tuple[int, bytes] | None = None
    for marker, body in _jpeg_segments(code):
        if marker == 0xEE and body[:5] == b"Adobe" and len(body) >= 12:
            adobe = body[11]
        elif marker == 0xE0 and body[:5] == b"JFIF\x00":
            jfif = True
        elif marker in _START_OF_FRAME:
            frame = (marker, body)
        elif marker == 0xDA:
            if frame is None:
                break
            return _jpeg_facts(frame, body, adobe, jfif=jfif)
    raise InputRefused("decode", "no frame and scan header in the JPEG code stream")


def _jpeg_segments(code: bytes) -> Iterator[tuple[int, bytes]]:
    if code[:2] != b"\xff\xd8":
        raise InputRefused("decode", "the JPEG code stream does not begin with its start marker")
    at = 2
    while at + 4 <= len(code):
        if code[at] != 0xFF:
            raise InputRefused("decode", "a marker is missing in the JPEG code stream")
        if code[at + 1] == 0xFF:  # fill byte, T.81 B.1.1.2
            at += 1
            continue
        marker, length = code[at + 1], struct.unpack_from(">H", code, at + 2)[0]
        body = code[at + 4 : at + 2 + length]
        if length < 2 or len(body) != length - 2:
            raise InputRefused("decode", "a marker segment of the JPEG code stream is cut")
        yield marker, body
        at += 2 + length


def _jpeg_facts(frame: tuple[int, bytes], scan: bytes, adobe: int | None, *, jfif: bool) -> StreamFacts:
    marker, body = frame
    if marker not in _PROCESSES:
        raise InputRefused("syntax", "a JPEG process other than baseline, extended, progressive or lossless")
    if len(body) < 6 or len(body) < 6 + 3 * body[5] or not scan or len(scan) < 4 + 2 * scan[0]:
        raise InputRefused("decode", "the JPEG frame or scan header is cut")
    precision, rows, columns, channels = struct.unpack_from(">BHHB", body)
    identifiers = bytes(body[6 + 3 * i] for i in range(channels))
    process = _PROCESSES[marker]
    _check_scan(process, scan)
    return StreamFacts(
        rows=rows,
        columns=columns,
        channels=channels,
        precision=precision,
        signed=False,
        coded_colour=_jpeg_colour(channels, identifiers, adobe, process, jfif=jfif),
        process=process,
    )


def _check_scan(process: str, scan: bytes) -> None:
    """Hold the last three bytes of the scan header against T.81 Table B.3, which decoders often overlook."""
    start, end, approximation = scan[1 + 2 * scan[0] : 4 + 2 * scan[0]]
    if process in ("baseline", "extended") and (start, end, approximation) != (0, 63, 0):
        raise InputRefused("decode", "the scan header of a sequential JPEG names other than all coefficients")
    if process == "lossless" and (not 1 <= start <= 7 or end or approximation & 0xF0):
        raise InputRefused("decode", "the scan header of a lossless JPEG names no predictor")
    if process in ("lossless", "jpeg-ls") and approximation & 0x0F:
        raise InputRefused("decode", "the code stream leaves out low bits (a point transform)")


def _jpeg_colour(
    channels: int, identifiers: bytes, adobe: int | None, process: str, *, jfif: bool
) -> Literal["RGB", "YBR", ""]:
    """Colour marked in the stream: Adobe's marker (T.872 6.5.3), then JFIF (T.871), then component letters."""
    if channels != 3 or process in ("lossless", "jpeg-ls"):
        return ""
    if adobe is not None:
        return "YBR" if adobe == 1 else "RGB"
    if jfif:
        return "YBR"
    return "RGB" if identifiers == b"RGB" else ""


def strip_jp2(code: bytes) -> bytes:
    """Bare JPEG 2000 code stream out of a JP2 file, whose own colour boxes have no say in DICOM (PS3.5 A.4.4).

    Raises
    ------
    InputRefused
        'decode': a JP2 file without a code stream.
    """
    if code[4:8] != b"jP  ":
        return code
    start = code.find(_CODESTREAM_2000)
    if start < 0:
        raise InputRefused("decode", "no code stream in the JP2 file")
    return code[start:]


def read_jpeg2000(code: bytes) -> StreamFacts:
    """Read the main header of a JPEG 2000 (T.800) or HTJ2K (T.814) code stream.

    Raises
    ------
    InputRefused
        'decode': markers missing, cut or contradictory.
    """
    if code[:4] != _CODESTREAM_2000:
        raise InputRefused("decode", "the JPEG 2000 code stream does not begin with its markers")
    at, size, style, high_throughput = 2, b"", b"", False
    while at + 4 <= len(code):
        marker, length = struct.unpack_from(">HH", code, at)
        if marker == 0xFF90 or length < 2:
            break
        body = code[at + 4 : at + 2 + length]
        size = body if marker == 0xFF51 else size
        style = body if marker == 0xFF52 else style
        high_throughput |= marker == 0xFF50
        at += 2 + length
    if len(size) < 36 or len(size) < 36 + 3 * struct.unpack_from(">H", size, 34)[0] or len(style) < 10:
        raise InputRefused("decode", "the main header of the JPEG 2000 code stream is cut")
    return _jpeg2000_facts(size, style, high_throughput=high_throughput)


def _jpeg2000_facts(size: bytes, style: bytes, *, high_throughput: bool) -> StreamFacts:
    right, bottom, left, top = struct.unpack_from(">IIII", size, 2)
    channels = struct.unpack_from(">H", size, 34)[0]
    components = {size[36 + 3 * i : 39 + 3 * i] for i in range(channels)}
    if len(components) != 1:
        raise InputRefused("decode", "the channels of the JPEG 2000 code stream differ in bits or size")
    depth, step_across, step_down = components.pop()
    if (step_across, step_down) != (1, 1):
        raise InputRefused("decode", "the channels of the JPEG 2000 code stream are subsampled")
    transformed = style[4] != 0
    return StreamFacts(
        rows=bottom - top,
        columns=right - left,
        channels=channels,
        precision=(depth & 0x7F) + 1,
        signed=bool(depth & 0x80),
        coded_colour="" if channels != 3 else "YBR" if transformed else "RGB",
        process="htj2k" if high_throughput else "jpeg2000",
    )
