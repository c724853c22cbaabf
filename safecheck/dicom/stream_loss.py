"""What a code stream itself says about loss: filters, quantisers and error bounds in its headers.

Only headers are read. A stream made with a reversible filter can have been cut short afterwards, which no header
shows; such a finding stays open, and the file's own declaration decides.
"""

from __future__ import annotations

import enum
from dataclasses import dataclass

from safecheck.dicom.jpeg_heads import begins_jpeg, begins_jpeg2000, read_jpeg2000_head, read_jpeg_head, strip_jp2
from safecheck.dicom.jpegxl_head import Made, begins_jpegxl, holds_jpeg, read_jpegxl_head
from safecheck.dicom.syntaxes import Coding
from safecheck.errors import InputRefused

__all__ = ["Finding", "Verdict", "look_into"]

_JPEG_LS = 0xF7
_PREDICTIVE = (0xC3, 0xC7, 0xCB, 0xCF)
"""Lossless frame headers of T.81 Table B.1."""


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


def _jpeg_2000(start: bytes) -> Finding | None:
    """Filters that the main header names (T.800 A.6.1, A.6.2)."""
    # Some writers put the boxes of a file around the code stream, which DICOM does not allow.
    if not begins_jpeg2000(start):
        return None
    try:
        filters = read_jpeg2000_head(strip_jp2(start)).filters
    except InputRefused:  # a header that cannot be read tells nothing of loss; the pixel path refuses it
        filters = frozenset()
    if 0 in filters:
        return Finding(Verdict.IRREVERSIBLE, "the code stream uses the irreversible 9/7 filter")
    if filters == {1}:
        return Finding(Verdict.OPEN, "reversible 5/3 filter; a truncation cannot be excluded")
    return Finding(Verdict.UNTOLD, "the filter of the code stream could not be told")


def _jpeg(start: bytes, coding: Coding) -> Finding | None:
    """Process and scan header of JPEG and JPEG-LS."""
    if not begins_jpeg(start):
        return None
    try:
        head = read_jpeg_head(start)
    except InputRefused:  # as above
        return Finding(Verdict.UNTOLD, "the scan header of the code stream could not be read")
    near, _, shifts = head.scan
    if head.process == _JPEG_LS and coding is Coding.JPEG_LS:
        verdict = Verdict.IRREVERSIBLE if near else Verdict.REVERSIBLE
        return Finding(verdict, f"near-lossless bound NEAR of {near} in the code stream")
    if head.process in _PREDICTIVE and coding is Coding.JPEG:
        if shifts & 15:
            return Finding(Verdict.IRREVERSIBLE, f"the code stream drops the {shifts & 15} lowest bits")
        return Finding(Verdict.REVERSIBLE, "predictive coding without point transform in the code stream")
    if head.process not in (0, _JPEG_LS):
        return Finding(Verdict.IRREVERSIBLE, "the code stream uses the cosine transform of JPEG")
    return Finding(Verdict.UNTOLD, "the code stream is of another kind than the transfer syntax")


_JPEG_XL = {
    Made.XYB: Finding(Verdict.IRREVERSIBLE, "the code stream uses the XYB colour transform"),
    Made.COSINE: Finding(Verdict.IRREVERSIBLE, "the code stream uses the variable cosine transform"),
    Made.MODULAR: Finding(Verdict.OPEN, "modular coding without XYB; a loss before it cannot be excluded"),
    Made.UNTOLD: Finding(Verdict.UNTOLD, "whether the code stream is reversible could not be told"),
}


def _jpeg_xl(start: bytes) -> Finding | None:
    """JPEG inside, colour transform and coding of the first frame."""
    if not begins_jpegxl(start):
        return None
    if holds_jpeg(start):
        return Finding(Verdict.IRREVERSIBLE, "the code stream is a recompressed JPEG")
    try:
        return _JPEG_XL[read_jpegxl_head(start).made]
    except InputRefused:  # as above
        return _JPEG_XL[Made.UNTOLD]
