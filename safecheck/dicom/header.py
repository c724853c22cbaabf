"""Header of one file: everything before the pixels, where the pixel data lies, and how its code streams begin."""

from __future__ import annotations

import dataclasses
import io
import os
import re
import struct
from dataclasses import dataclass
from typing import BinaryIO

from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset
from pydicom.filereader import read_dataset
from pydicom.tag import BaseTag, Tag

from safecheck.dicom.source import inflate
from safecheck.dicom.syntaxes import Coding, Loss, Syntax, syntax_of
from safecheck.errors import InputExcluded, InputRefused

__all__ = ["DIRECTORY_CLASS", "Header", "PixelElement", "items", "read_header", "real", "text", "whole", "words"]

DIRECTORY_CLASS = "1.2.840.10008.1.3.10"
"""Media Storage Directory (DICOMDIR)."""
_DEFLATED = "1.2.840.10008.1.2.1.99"
_IMPLICIT = "1.2.840.10008.1.2"
_BIG_ENDIAN = "1.2.840.10008.1.2.2"
_PREAMBLE_BYTES = 128
_FIRST_LOOK_BYTES = 1 << 16
_LATER_LOOK_BYTES = 1 << 12
# Larger elements before the pixels (private blobs, as a rule) stay unread; none that is used is so large.
_DEFER_BYTES = 1 << 22
_WHOLE = re.compile(r"[+-]?\d{1,12}(?:\.0*)?")
_UNDEFINED = 0xFFFFFFFF
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
    try:
        return _read(stream)
    except InputRefused:
        raise
    except Exception as error:  # A malformed file may raise anything in the library; its text may quote values.
        raise InputRefused("unreadable", f"{type(error).__name__} while the header was read") from None


def _check_preamble(start: bytes) -> None:
    """Tell DICOM files from others; a bare data set is named, since guessing its encoding would be doubtful."""
    if start[_PREAMBLE_BYTES:] == b"DICM":
        return
    if start[:4] in _FIRST_ELEMENTS:
        raise InputRefused("unreadable", "a data set without preamble and file meta information")
    raise InputExcluded("not-dicom")


def _read(stream: BinaryIO) -> Header:
    meta = read_dataset(stream, False, True, stop_when=_after_meta)
    uid = text(meta, 0x00020010)
    packed_bytes = None
    if uid == _DEFLATED:
        packed = stream.read()
        packed_bytes, stream = len(packed), io.BytesIO(inflate(packed))
    implicit, little = _encoding(uid, stream)
    # A directory is one long sequence, and its whole content is wanted.
    defer = None if text(meta, 0x00020002) == DIRECTORY_CLASS else _DEFER_BYTES
    dataset = read_dataset(stream, implicit, little, stop_when=_at_pixels, defer_size=defer)
    syntax = syntax_of(uid)
    pixels = _locate_pixels(stream, little, syntax)
    if pixels and packed_bytes is not None:
        # What lies in the file is the packed stream; the pixels' share of it cannot be more than the whole.
        pixels = dataclasses.replace(pixels, size_bytes=min(pixels.size_bytes, packed_bytes))
    return Header(
        dataset=dataset,
        syntax=syntax,
        syntax_declared=bool(uid),
        object_uid=text(dataset, 0x00080016) or text(meta, 0x00020002),
        pixels=pixels,
        cut=pixels is None and _is_cut(dataset, stream.seek(0, os.SEEK_END)),
    )


def _after_meta(tag: BaseTag, _vr: str | None, _length: int) -> bool:
    return tag.group != 2


def _at_pixels(tag: BaseTag, _vr: str | None, _length: int) -> bool:
    # Shifted first: comparing the library's tags is slow, and this is called for every element.
    return tag >> 16 == 0x7FE0 and tag & 0xFFFF in (0x0008, 0x0009, 0x0010)


def _encoding(uid: str, stream: BinaryIO) -> tuple[bool, bool]:
    """(implicit VR, little endian); without a declared syntax it is told from the first element."""
    if uid:
        return uid == _IMPLICIT, uid != _BIG_ENDIAN
    start = stream.read(6)
    stream.seek(-len(start), os.SEEK_CUR)
    explicit = start[4:6].isalpha() and start[4:6].isupper()
    return not explicit, not (explicit and start[:1] == b"\0")


def _is_cut(dataset: Dataset, end: int) -> bool:
    """Whether the last element read reaches beyond the end of the file, or leaves a rest too short for another.

    The library takes both for the end of the data set. A sequence of undefined length as the last element tells
    nothing.
    """
    if not dataset:
        return False
    last = dataset.get_item(max(dataset.keys()), keep_deferred=True)
    if not isinstance(last, RawDataElement) or last.length == _UNDEFINED:
        return False
    return last.value_tell + last.length != end


def _locate_pixels(stream: BinaryIO, little: bool, syntax: Syntax) -> PixelElement | None:
    """Measure the element at which reading stopped; None at the end of the file."""
    start = stream.read(12)
    if len(start) < 8:
        return None
    order = "<" if little else ">"
    group, element = struct.unpack(f"{order}HH", start[:4])
    if group != 0x7FE0 or element not in (0x0008, 0x0009, 0x0010):
        return None
    explicit = start[4:6].isalpha() and start[4:6].isupper()
    if explicit and len(start) < 12:
        raise InputRefused("truncated", "the file ends within the pixel data's length")
    length: int = struct.unpack(f"{order}L", start[8:12] if explicit else start[4:8])[0]
    first = stream.tell() - (0 if explicit else len(start) - 8)
    end = stream.seek(0, os.SEEK_END)
    floating = element != 0x0010
    if length != _UNDEFINED:
        return PixelElement(min(length, end - first), first + length <= end, floating)
    fragments, complete = _fragments(stream, first, end)
    looks = _looks(stream, fragments) if _is_looked_into(syntax) else ()
    return PixelElement(sum(size for _, size in fragments), complete, floating, looks)


def _fragments(stream: BinaryIO, position: int, end: int) -> tuple[list[tuple[int, int]], bool]:
    """((offset, size) of each fragment after the offset table, whether the sequence is closed), PS3.5 A.4."""
    found: list[tuple[int, int]] = []
    complete = False
    while position + 8 <= end:
        stream.seek(position)
        group, element, size = struct.unpack("<HHL", stream.read(8))
        position += 8
        if (group, element) != (0xFFFE, 0xE000):
            complete = (group, element) == (0xFFFE, 0xE0DD)
            break
        found.append((position, min(size, end - position)))
        position += size
    # A file that only lacks the closing delimiter still holds every fragment.
    complete = complete or (position == end and bool(found))
    return found[1:], complete


def _is_looked_into(syntax: Syntax) -> bool:
    inside = syntax.coding in (Coding.JPEG, Coding.JPEG_LS, Coding.JPEG_2000, Coding.JPEG_XL)
    return inside and syntax.loss is not Loss.IRREVERSIBLE


def _looks(stream: BinaryIO, fragments: list[tuple[int, int]]) -> tuple[bytes, ...]:
    """Beginning of each fragment; a frame's main header lies in its first."""
    looks = []
    for number, (position, size) in enumerate(fragments):
        stream.seek(position)
        looks.append(stream.read(min(size, _LATER_LOOK_BYTES if number else _FIRST_LOOK_BYTES)))
    return tuple(looks)


def text(dataset: Dataset, tag: int) -> str:
    r"""Text of an element, values joined by '\'; '' where absent or malformed (whoever needs it says so)."""
    return "\\".join(words(dataset, tag))


def words(dataset: Dataset, tag: int) -> tuple[str, ...]:
    """Values of an element as stripped texts; none where it is absent or malformed."""
    if tag not in dataset:
        return ()
    try:
        value = dataset[tag].value
        values = [value] if isinstance(value, (str, bytes)) or not hasattr(value, "__iter__") else value
        found = tuple(str(each).strip(" \0\t\r\n") for each in values if each is not None)
    except Exception:  # The library raises anything on malformed values, quoting them.
        return ()
    return found if any(found) else ()


def whole(dataset: Dataset, tag: int) -> int | None:
    """Whole number of an element of one value; None where absent or malformed."""
    found = text(dataset, tag)
    return int(found.split(".")[0]) if _WHOLE.fullmatch(found) else None


def real(dataset: Dataset, tag: int) -> tuple[float, ...]:
    """Numbers of an element; none where absent or if any is malformed."""
    try:
        return tuple(float(each) for each in words(dataset, tag))
    except ValueError:
        return ()


def items(dataset: Dataset, tag: int) -> tuple[Dataset, ...]:
    """Items of a sequence; none where absent or malformed."""
    if tag not in dataset:
        return ()
    try:
        value = dataset[Tag(tag)].value
        return tuple(each for each in value if isinstance(each, Dataset))
    except Exception:  # As in words.
        return ()
