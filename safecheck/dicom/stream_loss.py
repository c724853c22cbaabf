"""What a code stream itself says about loss: filters, quantisers and error bounds in its headers.

Only headers are read. A stream made with a reversible filter can have been cut short afterwards, which no header
shows; such a finding stays open, and the file's own declaration decides.
"""

from __future__ import annotations

import enum
import struct
from collections.abc import Iterator
from dataclasses import dataclass

from safecheck.dicom.jpegxl import JpegXlHeader, read_jpegxl
from safecheck.dicom.syntaxes import Coding

__all__ = ["Finding", "Verdict", "look_into"]


class Verdict(enum.IntEnum):
    """Ordered: of several frames, or of several hints, the greatest counts."""

    REVERSIBLE = 0
    """Reversible beyond doubt."""
    OPEN = 1
    """Reversible tools, but a loss before or after them shows in no header."""
    UNTOLD = 2
    """The header could not be read far enough."""
    IRREVERSIBLE = 3


@dataclass(frozen=True, slots=True, order=True)
class Finding:
    """Verdict on one code stream."""

    verdict: Verdict
    evidence: str
    """One short sentence."""


def look_into(coding: Coding, start: bytes) -> Finding | None:
    """Look at the beginning of a code stream.

    Parameters
    ----------
    coding
        Family that the transfer syntax names.
    start
        First bytes of a fragment, 4096 or more where it is longer.

    Returns
    -------
    Finding or None
        None where the fragment does not begin a code stream, or the family has none.
    """
    if coding is Coding.JPEG_2000:
        return _jpeg_2000(start)
    if coding in (Coding.JPEG, Coding.JPEG_LS):
        return _jpeg(start, coding)
    if coding is Coding.JPEG_XL:
        return _jpeg_xl(start)
    return None


def _segments(start: bytes, position: int) -> Iterator[tuple[int, bytes]]:
    """(marker, body) of each marker segment from a position on, until the data of a scan or tile."""
    while position + 4 <= len(start):
        marker, length = struct.unpack_from(">HH", start, position)
        if marker < 0xFF00 or length < 2 or position + 2 + length > len(start):
            return
        yield marker, start[position + 4 : position + 2 + length]
        position += 2 + length


def _jpeg_2000(start: bytes) -> Finding | None:
    """Filter of COD and COC in the main header (ISO/IEC 15444-1 A.6.1, A.6.2): 0 is 9/7, 1 is 5/3."""
    # Some writers put the boxes of a file around the code stream, which DICOM does not allow.
    begin = start.find(b"\xff\x4f\xff\x51")
    if begin < 0:
        return None
    filters: set[int] = set()
    components = 1
    for marker, body in _segments(start, begin + 2):
        if marker == 0xFF51 and len(body) >= 36:
            components = struct.unpack_from(">H", body, 34)[0]
        elif marker == 0xFF52 and len(body) >= 10:
            filters.add(body[9])
        elif marker == 0xFF53:
            filters.add(_component_filter(body, components))
        elif marker == 0xFF90:
            break
    if 0 in filters:
        return Finding(Verdict.IRREVERSIBLE, "the code stream uses the irreversible 9/7 filter")
    if filters == {1}:
        return Finding(Verdict.OPEN, "reversible 5/3 filter; a truncation cannot be excluded")
    return Finding(Verdict.UNTOLD, "the filter of the code stream could not be told")


def _component_filter(body: bytes, components: int) -> int:
    """Filter that a COC segment gives; 255 where it is too short."""
    place = (1 if components < 257 else 2) + 5
    return body[place] if len(body) > place else 255


def _jpeg(start: bytes, coding: Coding) -> Finding | None:
    """Frame and scan header of JPEG (T.81 B.2) and JPEG-LS (T.87 C.2)."""
    if start[:2] != b"\xff\xd8":
        return None
    frame = 0
    for marker, body in _segments(start, 2):
        if marker == 0xFFF7 or (0xFFC0 <= marker <= 0xFFCF and marker not in (0xFFC4, 0xFFC8, 0xFFCC)):
            frame = marker
        elif marker == 0xFFDA and len(body) >= 4:
            return _scan(frame, body, coding)
    return Finding(Verdict.UNTOLD, "the scan header of the code stream could not be read")


def _scan(frame: int, body: bytes, coding: Coding) -> Finding:
    """Verdict from the frame type and the last three bytes of the scan header."""
    parameter, _, shifts = body[-3:]
    if frame == 0xFFF7 and coding is Coding.JPEG_LS:
        if parameter:
            return Finding(Verdict.IRREVERSIBLE, f"near-lossless bound NEAR of {parameter} in the code stream")
        return Finding(Verdict.REVERSIBLE, "near-lossless bound NEAR of 0 in the code stream")
    if frame in (0xFFC3, 0xFFC7, 0xFFCB, 0xFFCF) and coding is Coding.JPEG:
        if shifts & 15:
            return Finding(Verdict.IRREVERSIBLE, f"the code stream drops the {shifts & 15} lowest bits")
        return Finding(Verdict.REVERSIBLE, "predictive coding without point transform in the code stream")
    if frame and frame != 0xFFF7:
        return Finding(Verdict.IRREVERSIBLE, "the code stream uses the cosine transform of JPEG")
    return Finding(Verdict.UNTOLD, "the code stream is of another kind than the transfer syntax")


_JPEG_XL = {
    JpegXlHeader.FROM_JPEG: Finding(Verdict.IRREVERSIBLE, "the code stream is a recompressed JPEG"),
    JpegXlHeader.XYB: Finding(Verdict.IRREVERSIBLE, "the code stream uses the XYB colour transform"),
    JpegXlHeader.COSINE: Finding(Verdict.IRREVERSIBLE, "the code stream uses the variable cosine transform"),
    JpegXlHeader.MODULAR: Finding(Verdict.OPEN, "modular coding without XYB; a loss before it cannot be excluded"),
    JpegXlHeader.UNTOLD: Finding(Verdict.UNTOLD, "whether the code stream is reversible could not be told"),
}


def _jpeg_xl(start: bytes) -> Finding | None:
    header = read_jpegxl(start)
    return _JPEG_XL[header] if header else None
