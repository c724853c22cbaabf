"""Frames of a segmentation as fractions: bits packed without gaps, or samples of eight bits."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.dicom.elements import term, whole_number
from safecheck.dicom.frame_bytes import locate_frames
from safecheck.dicom.frame_pixels import check_syntax, read_frame_pixels
from safecheck.dicom.opened import OpenedFile
from safecheck.dicom.pixel_header import MOST_PIXELS, read_pixel_header
from safecheck.dicom.syntaxes import Coding
from safecheck.errors import InputRefused, RegionError

__all__ = ["SegmentFrames", "open_segment_frames"]

_TYPES = ("BINARY", "FRACTIONAL", "LABELMAP")


@dataclass(frozen=True, slots=True)
class SegmentFrames:
    """Frames, one at a time."""

    rows: int
    columns: int
    count: int
    fractions: Callable[[int], npt.NDArray[np.float64]]
    """(rows, columns), 0 to 1, of a frame from 0."""


def open_segment_frames(opened: OpenedFile) -> SegmentFrames:
    """Find the frames of a segmentation.

    Parameters
    ----------
    opened
        The file, its stream still open.

    Returns
    -------
    SegmentFrames
        BINARY: 0 or 1. FRACTIONAL: the sample over Maximum Fractional Value, used as it is and cut at no threshold,
        whether it tells occupancy or probability.

    Raises
    ------
    InputRefused
        The pixels would be read on a doubtful path.
    RegionError
        The type is neither.
    """
    kind = term(opened.dataset, "SegmentationType")
    if kind == "BINARY":
        return _bits(opened)
    if kind == "FRACTIONAL":
        return _samples(opened)
    named = f"type {kind}" if kind in _TYPES else "an unknown type"
    raise RegionError(f"a segmentation of {named} is not read; expected type BINARY or FRACTIONAL")


def _bits(opened: OpenedFile) -> SegmentFrames:
    """One bit a pixel, the least significant first, frames following each other without a gap (PS3.5 8.1.1)."""
    dataset = opened.dataset
    rows, columns = whole_number(dataset, "Rows"), whole_number(dataset, "Columns")
    count = whole_number(dataset, "NumberOfFrames", missing=1)
    if min(rows, columns, count) < 1:
        raise InputRefused("header", "Rows, Columns or Number of Frames is below 1")
    if rows * columns > MOST_PIXELS:
        raise InputRefused("too-large", f"a frame of {rows} x {columns} pixels, at most {MOST_PIXELS} expected")
    if whole_number(dataset, "BitsAllocated") != 1:
        raise InputRefused("bits", "a binary segmentation with more than one bit allocated")
    if opened.syntax.coding is not Coding.NATIVE:
        raise InputRefused("syntax", f"single bits in {opened.syntax.name}")
    pixels = rows * columns
    expected = (pixels * count + 7) // 8
    if opened.value_length < expected or opened.end - opened.value_offset < expected:
        raise InputRefused("truncated", "")
    if opened.value_length > expected + expected % 2:
        raise InputRefused("length", "longer than the header declares")
    swapped = not opened.little_endian and opened.representation == "OW"

    def fractions(index: int) -> npt.NDArray[np.float64]:
        first = index * pixels
        packed = _bytes(opened, first // 8, (first + pixels + 7) // 8, swapped=swapped)
        flags = np.unpackbits(packed, bitorder="little")[first % 8 :][:pixels]
        return flags.reshape(rows, columns).astype(np.float64)

    return SegmentFrames(rows, columns, count, fractions)


def _bytes(opened: OpenedFile, first: int, last: int, *, swapped: bool) -> npt.NDArray[np.uint8]:
    """Bytes of the pixel data; those of big endian words lie swapped in pairs."""
    start = first & ~1 if swapped else first
    opened.stream.seek(opened.value_offset + start)
    packed = np.frombuffer(opened.stream.read((last + last % 2 if swapped else last) - start), dtype=np.uint8)
    if swapped:
        packed = packed.reshape(-1, 2)[:, ::-1].reshape(-1)
    return packed[first - start : last - start]


def _samples(opened: OpenedFile) -> SegmentFrames:
    """Eight bits a pixel, in any syntax that images are read in."""
    header = read_pixel_header(opened.dataset)
    if header.photometric != "MONOCHROME2" or header.signed or header.bits_allocated != 8:
        raise InputRefused("bits", "a fractional segmentation that is not of unsigned 8 bit samples")
    check_syntax(opened.syntax, header)
    frames = locate_frames(opened, header)
    largest = whole_number(opened.dataset, "MaximumFractionalValue")
    if not 1 <= largest <= 255:
        raise InputRefused("header", "MaximumFractionalValue is not from 1 to 255")

    def fractions(index: int) -> npt.NDArray[np.float64]:
        data = frames.read(index)
        samples = read_frame_pixels(data, opened.syntax, header, little_endian=opened.little_endian).samples
        if int(samples.max()) > largest:
            raise InputRefused("range", "a fraction above 1")
        return samples / float(largest)

    return SegmentFrames(header.rows, header.columns, header.frames, fractions)
