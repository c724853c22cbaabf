"""What intake looks at of one file: its header, the size of its pixel data, and how its code streams begin."""

from __future__ import annotations

import struct
from dataclasses import dataclass
from typing import BinaryIO

from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset

from safecheck.dicom.elements import text
from safecheck.dicom.fragments import Ending, walk_items
from safecheck.dicom.opened import UNDEFINED_LENGTH, OpenedFile, parse_file
from safecheck.dicom.syntaxes import Coding, Loss, Syntax, syntax_of
from safecheck.errors import InputExcluded, InputRefused

__all__ = ["Header", "PixelElement", "read_header"]

_PREAMBLE_BYTES = 128
_FIRST_LOOK_BYTES = 1 << 16
_LATER_LOOK_BYTES = 1 << 12
# Elements that a bare data set or meta group may begin with, in both byte orders, and the prefix without preamble.
_FIRST_ELEMENTS = frozenset(
    struct.pack(f"{order}HH", group, element)
    for order in "<>"
    for group, elements in ((0x0002, (0x0000, 0x0001, 0x0002)), (0x0008, (0x0000, 0x0001, 0x0005, 0x0008, 0x0016)))
    for element in elements
) | {b"DICM"}


@dataclass(frozen=True, slots=True)
class PixelElement:
    """The pixel data element as it lies in the file."""

    size_bytes: int
    """Of the samples, or of all fragments without item tags and offset table."""
    complete: bool
    """Whether the file holds all that the element declares."""
    floating: bool
    """Float or Double Float Pixel Data."""
    looks: tuple[bytes, ...] = ()
    """Beginning of each fragment, where the syntax alone does not settle the loss."""


@dataclass(frozen=True, slots=True, eq=False)
class Header:
    """What was read. Raw: nothing of it leaves the room but through terms and pseudonyms."""

    dataset: Dataset
    syntax: Syntax
    syntax_declared: bool
    """Whether the file names a transfer syntax at all."""
    object_uid: str
    """SOP Class UID, of the data set or else of the file meta information."""
    pixels: PixelElement | None
    cut: bool
    """Whether the file ends within an element before any pixel data."""


def read_header(stream: BinaryIO) -> Header:
    """Read the header of a file and look at the beginning of its code streams.

    Parameters
    ----------
    stream
        Seekable; read from its start.

    Returns
    -------
    Header
        With the data set up to the pixel data.

    Raises
    ------
    InputExcluded
        'not-dicom'.
    InputRefused
        'unreadable', 'truncated', or for a deflated file 'too-large' or 'archive-bomb'.
    """
    stream.seek(0)
    _check_preamble(stream.read(_PREAMBLE_BYTES + 4))
    opened = parse_file(stream, skim=True)
    pixels = _measured(opened)
    return Header(
        dataset=opened.dataset,
        syntax=opened.syntax if opened.declared else syntax_of(""),
        syntax_declared=opened.declared,
        object_uid=text(opened.dataset, "SOPClassUID") or opened.media_class,
        pixels=pixels,
        cut=pixels is None and _is_cut(opened.dataset, opened.end),
    )


def _check_preamble(start: bytes) -> None:
    """Tell DICOM files from others; a bare data set is named, since guessing its encoding would be doubtful."""
    if start[_PREAMBLE_BYTES:] == b"DICM":
        return
    if start[:4] in _FIRST_ELEMENTS:
        raise InputRefused("unreadable", "a data set without preamble and file meta information")
    raise InputExcluded("not-dicom")


def _measured(opened: OpenedFile) -> PixelElement | None:
    """Size of the pixel data as it lies in the file, and a look at its code streams."""
    place = opened.pixels
    if place is None:
        return None
    if place.length != UNDEFINED_LENGTH:
        size_bytes = min(place.length, opened.end - place.offset)
        return PixelElement(_packed(size_bytes, opened), size_bytes == place.length, place.floating)
    items = walk_items(opened.stream, place.offset, opened.end)
    fragments = items.places[1:]
    # A file that only lacks the closing delimiter still holds every fragment.
    complete = items.ending is Ending.CLOSED or (items.ending is Ending.OPEN and bool(items.places))
    looks = _looks(opened.stream, fragments) if _is_looked_into(opened.syntax) else ()
    size_bytes = sum(size for _, size in fragments)
    return PixelElement(_packed(size_bytes, opened), complete, place.floating, looks)


def _packed(size_bytes: int, opened: OpenedFile) -> int:
    """In a deflated file lies the packed stream; the pixels' share of it cannot be more than the whole."""
    return size_bytes if opened.packed_bytes is None else min(size_bytes, opened.packed_bytes)


def _is_cut(dataset: Dataset, end: int) -> bool:
    """Whether the last element read reaches beyond the end of the file, or leaves a rest too short for another.

    The library takes both for the end of the data set. A sequence of undefined length as the last element tells
    nothing.
    """
    if not dataset:
        return False
    last = dataset.get_item(max(dataset.keys()), keep_deferred=True)
    if not isinstance(last, RawDataElement) or last.length == UNDEFINED_LENGTH:
        return False
    return last.value_tell + last.length != end


def _is_looked_into(syntax: Syntax) -> bool:
    inside = syntax.coding in (Coding.JPEG, Coding.JPEG_LS, Coding.JPEG_2000, Coding.JPEG_XL)
    return inside and syntax.loss is not Loss.IRREVERSIBLE


def _looks(stream: BinaryIO, fragments: tuple[tuple[int, int], ...]) -> tuple[bytes, ...]:
    """Beginning of each fragment; a frame's main header lies in its first."""
    looks = []
    for number, (position, size) in enumerate(fragments):
        stream.seek(position)
        looks.append(stream.read(min(size, _LATER_LOOK_BYTES if number else _FIRST_LOOK_BYTES)))
    return tuple(looks)
