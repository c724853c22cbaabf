"""What a code stream says of its samples: size, channels, precision, sign, colour transform, process."""

from __future__ import annotations

import struct
from dataclasses import dataclass
from typing import Literal

from safecheck.dicom.jpeg_heads import JpegHead, read_jpeg2000_head, read_jpeg_head
from safecheck.dicom.jpegxl_head import read_jpegxl_head
from safecheck.dicom.syntaxes import Coding
from safecheck.errors import InputRefused

__all__ = ["StreamFacts", "coded_length", "facts_of_stream", "read_jpeg", "read_jpeg2000", "read_jpegxl"]

_PROCESSES = {0xC0: "baseline", 0xC1: "extended", 0xC2: "progressive", 0xC3: "lossless", 0xF7: "jpeg-ls"}


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


def facts_of_stream(coding: Coding, code: bytes) -> StreamFacts | None:
    """Facts of a code stream of some family, bare for JPEG 2000; None for a family whose streams say nothing.

    Raises
    ------
    InputRefused
        'decode', 'syntax' or 'bits', as the readers of the families.
    """
    if coding in (Coding.JPEG, Coding.JPEG_LS):
        return read_jpeg(code)
    if coding is Coding.JPEG_2000:
        return read_jpeg2000(code)
    if coding is Coding.JPEG_XL:
        return read_jpegxl(code)
    return None


def read_jpeg(code: bytes) -> StreamFacts:
    """Facts of a JPEG (T.81) or JPEG-LS (T.87) stream.

    Raises
    ------
    InputRefused
        'decode': markers missing, cut or contradictory; 'syntax': another process.
    """
    head = read_jpeg_head(code)
    if not head.process:
        raise InputRefused("decode", "no frame header in the JPEG code stream")
    if head.process not in _PROCESSES:
        raise InputRefused("syntax", "a JPEG process other than baseline, extended, progressive or lossless")
    if len(head.frame) < 6 or len(head.frame) < 6 + 3 * head.frame[5]:
        raise InputRefused("decode", "the JPEG frame header is cut")
    precision, rows, columns, channels = struct.unpack_from(">BHHB", head.frame)
    process = _PROCESSES[head.process]
    _check_scan(process, head.scan)
    return StreamFacts(
        rows=rows,
        columns=columns,
        channels=channels,
        precision=precision,
        signed=False,
        coded_colour=_jpeg_colour(head, process, channels),
        process=process,
    )


def _check_scan(process: str, scan: tuple[int, int, int]) -> None:
    """Hold the last three bytes of the scan header against T.81 Table B.3, which decoders often overlook."""
    start, end, approximation = scan
    if process in ("baseline", "extended") and (start, end, approximation) != (0, 63, 0):
        raise InputRefused("decode", "the scan header of a sequential JPEG names other than all coefficients")
    if process == "lossless" and (not 1 <= start <= 7 or end or approximation & 0xF0):
        raise InputRefused("decode", "the scan header of a lossless JPEG names no predictor")
    if process in ("lossless", "jpeg-ls") and approximation & 0x0F:
        raise InputRefused("decode", "the code stream leaves out low bits (a point transform)")


def _jpeg_colour(head: JpegHead, process: str, channels: int) -> Literal["RGB", "YBR", ""]:
    """Colour marked in the stream: Adobe's marker (T.872 6.5.3), then JFIF (T.871), then component letters."""
    if channels != 3 or process in ("lossless", "jpeg-ls"):
        return ""
    if head.adobe is not None:
        return "YBR" if head.adobe == 1 else "RGB"
    if head.jfif:
        return "YBR"
    return "RGB" if head.frame[6:15:3] == b"RGB" else ""


def read_jpeg2000(code: bytes) -> StreamFacts:
    """Facts of a bare JPEG 2000 (T.800) or HTJ2K (T.814) code stream.

    Raises
    ------
    InputRefused
        'decode': markers missing, cut or contradictory.
    """
    head = read_jpeg2000_head(code)
    right, bottom, left, top = struct.unpack_from(">IIII", head.size, 2)
    components = {head.size[36 + 3 * i : 39 + 3 * i] for i in range(head.channels)}
    if len(components) != 1:
        raise InputRefused("decode", "the channels of the JPEG 2000 code stream differ in bits or size")
    depth, step_across, step_down = components.pop()
    if (step_across, step_down) != (1, 1):
        raise InputRefused("decode", "the channels of the JPEG 2000 code stream are subsampled")
    transformed = head.style[4] != 0
    return StreamFacts(
        rows=bottom - top,
        columns=right - left,
        channels=head.channels,
        precision=(depth & 0x7F) + 1,
        signed=bool(depth & 0x80),
        coded_colour="" if head.channels != 3 else "YBR" if transformed else "RGB",
        process="htj2k" if head.high_throughput else "jpeg2000",
    )


def read_jpegxl(code: bytes) -> StreamFacts:
    """Facts of a JPEG XL code stream, bare or in its container.

    Raises
    ------
    InputRefused
        'decode': not a JPEG XL code stream, cut, turned, moving, or with channels besides colour; 'bits': floating
        point.
    """
    head = read_jpegxl_head(code)
    if head.floating:
        raise InputRefused("bits", "the JPEG XL code stream holds floating point samples")
    return StreamFacts(
        rows=head.rows,
        columns=head.columns,
        channels=head.channels,
        precision=head.precision,
        signed=False,
        coded_colour="RGB" if head.channels == 3 else "",
        process="jpeg-xl",
    )
