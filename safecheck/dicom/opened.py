"""A DICOM file opened up to its pixel data: the header parsed, the samples not yet touched.

Both sides of the room begin here: intake with `parse_file`, which takes any file, the pixel path with `open_file`,
which refuses what no frame can be read from.
"""

from __future__ import annotations

import io
import os
import struct
from dataclasses import dataclass
from typing import BinaryIO

from pydicom.dataset import Dataset
from pydicom.filereader import read_dataset, read_preamble
from pydicom.tag import BaseTag

from safecheck.dicom.elements import text
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.source import WHOLE_LIMIT_BYTES, inflate
from safecheck.dicom.syntaxes import BIG_ENDIAN, DEFLATED, EXPLICIT, IMPLICIT, Coding, Syntax, syntax_of
from safecheck.errors import InputRefused

__all__ = ["DIRECTORY_CLASS", "UNDEFINED_LENGTH", "OpenedFile", "PixelPlace", "open_file", "parse_file"]

DIRECTORY_CLASS = "1.2.840.10008.1.3.10"
"""Media Storage Directory (DICOMDIR)."""
UNDEFINED_LENGTH = 0xFFFFFFFF
_PIXEL_GROUP, _INTEGER_PIXELS, _FLOAT_PIXELS = 0x7FE0, 0x0010, (0x0008, 0x0009)
# Larger elements before the pixels (private blobs, as a rule) stay unread by intake; none that it uses is so large.
_SKIM_BYTES = 1 << 22


@dataclass(frozen=True, slots=True)
class PixelPlace:
    """The pixel data element, as its head describes it."""

    offset: int
    """Where its value begins in the stream."""
    length: int
    """As declared; `UNDEFINED_LENGTH` for fragments."""
    representation: str
    """'OB', 'OW' or ''."""
    floating: bool
    """Float or Double Float Pixel Data."""


@dataclass(frozen=True, slots=True, eq=False)
class OpenedFile:
    """Header and place of the pixel data. The stream stays the owner's to close."""

    stream: BinaryIO
    """The file, or its inflated data set in memory."""
    dataset: Dataset
    """Elements before the pixel data."""
    syntax: Syntax
    declared: bool
    """Whether the file names a transfer syntax at all."""
    media_class: str
    """Media Storage SOP Class UID of the file meta information, or ''."""
    little_endian: bool
    pixels: PixelPlace | None
    """None where the file ends without pixel data."""
    end: int
    """Length of the stream."""
    packed_bytes: int | None = None
    """Size in the file of a data set that is deflated as a whole."""

    @property
    def packed_share(self) -> float:
        """Bytes in the file for each byte of the stream: below 1 for a data set that is deflated as a whole."""
        return 1.0 if self.packed_bytes is None else self.packed_bytes / self.end

    @property
    def notes(self) -> tuple[str, ...]:
        """What was set right."""
        return () if self.declared else (f"no transfer syntax in the file; read as {self.syntax.name}",)

    @property
    def place(self) -> PixelPlace:
        """Place of the pixel data, of a file that `open_file` gave.

        Raises
        ------
        InputRefused
            'no-pixels'.
        """
        if self.pixels is None:
            raise InputRefused("no-pixels", "")
        return self.pixels

    @property
    def value_offset(self) -> int:
        """Where the value of the pixel data begins."""
        return self.place.offset

    @property
    def value_length(self) -> int:
        """Declared length of the pixel data; `UNDEFINED_LENGTH` for fragments."""
        return self.place.length

    @property
    def representation(self) -> str:
        """Value representation of the pixel data: 'OB', 'OW' or ''."""
        return self.place.representation


def open_file(stream: BinaryIO) -> OpenedFile:
    """Parse a file whose frames are to be read.

    Raises
    ------
    InputRefused
        As `parse_file`; 'syntax', 'no-pixels', 'length' for value representations where the syntax has none or the
        reverse, 'bits' for floating point samples.
    """
    opened = parse_file(stream)
    if opened.syntax.coding in (Coding.VIDEO, Coding.REFERENCED, Coding.UNKNOWN):
        raise InputRefused("syntax", opened.syntax.name)
    place = opened.place
    implicit, _ = opened.dataset.original_encoding
    if implicit != (opened.syntax.uid == IMPLICIT):
        # The library reads on as it finds the elements; where the pixel data begins would then be a guess of ours.
        raise InputRefused("length", "the data set is encoded in another way than its transfer syntax asks for")
    if place.floating:
        raise InputRefused("bits", "samples are floating point")
    return opened


def parse_file(stream: BinaryIO, *, skim: bool = False) -> OpenedFile:
    """Parse up to the pixel data; a deflated data set is inflated whole, within bounds.

    Parameters
    ----------
    stream
        Seekable; read from its start. Preamble and file meta information may be missing.
    skim
        Leave elements over 4 MiB unread; a directory, which is one long sequence, is read whole all the same.

    Raises
    ------
    InputRefused
        'unreadable', 'truncated', 'too-large' or 'archive-bomb'.
    """
    try:
        with quiet_library():
            return _parse(stream, skim=skim)
    except InputRefused:
        raise
    except Exception as error:
        # The library raises many kinds here, some quoting values: none of them may be heard.
        raise InputRefused("unreadable", f"{type(error).__name__} while the header was parsed") from None


def _parse(stream: BinaryIO, *, skim: bool) -> OpenedFile:
    stream.seek(0)
    read_preamble(stream, force=True)
    meta = read_dataset(stream, is_implicit_VR=False, is_little_endian=True, stop_when=_past_meta)
    declared, media_class = text(meta, "TransferSyntaxUID"), text(meta, "MediaStorageSOPClassUID")
    packed_bytes = None
    if declared == DEFLATED:
        stream, packed_bytes = _inflated(stream)
    uid = declared or _guessed(stream)
    defer_bytes = _SKIM_BYTES if skim and media_class != DIRECTORY_CLASS else None
    dataset = read_dataset(stream, uid == IMPLICIT, uid != BIG_ENDIAN, stop_when=_at_pixels, defer_size=defer_bytes)
    implicit, little_endian = dataset.original_encoding
    return OpenedFile(
        stream=stream,
        dataset=dataset,
        syntax=syntax_of(uid),
        declared=bool(declared),
        media_class=media_class,
        little_endian=bool(little_endian),
        pixels=_pixel_place(stream, implicit=bool(implicit), little_endian=bool(little_endian)),
        end=stream.seek(0, os.SEEK_END),
        packed_bytes=packed_bytes,
    )


def _past_meta(tag: BaseTag, _representation: str | None, _length: int) -> bool:
    return tag >> 16 != 2


def _at_pixels(tag: BaseTag, _representation: str | None, _length: int) -> bool:
    # Shifted first: comparing the library's tags is slow, and this is called for every element.
    return tag >> 16 == _PIXEL_GROUP and tag & 0xFFFF in (_INTEGER_PIXELS, *_FLOAT_PIXELS)


def _inflated(stream: BinaryIO) -> tuple[BinaryIO, int]:
    """(inflated rest of the stream, size of that rest)."""
    packed = stream.read(WHOLE_LIMIT_BYTES + 1)
    if len(packed) > WHOLE_LIMIT_BYTES:
        raise InputRefused("too-large", "a deflated file over 512 MB")
    return io.BytesIO(inflate(packed)), len(packed)


def _guessed(stream: BinaryIO) -> str:
    """Transfer syntax told from the first element, at which the stream stands."""
    start = stream.read(6)
    stream.seek(-len(start), os.SEEK_CUR)
    if not (start[4:6].isalpha() and start[4:6].isupper()):
        return IMPLICIT
    return BIG_ENDIAN if start[:1] == b"\0" else EXPLICIT


def _pixel_place(stream: BinaryIO, *, implicit: bool, little_endian: bool) -> PixelPlace | None:
    """Read the head of the element at which parsing stopped."""
    size = 8 if implicit else 12
    head = stream.read(size)
    order = "<" if little_endian else ">"
    if len(head) < 4:
        return None
    group, element = struct.unpack_from(f"{order}HH", head)
    if group != _PIXEL_GROUP or element not in (_INTEGER_PIXELS, *_FLOAT_PIXELS):
        return None
    if len(head) < size:
        raise InputRefused("truncated", "the file ends within the pixel data's length")
    length = struct.unpack_from(f"{order}I", head, size - 4)[0]
    representation = "" if implicit else head[4:6].decode("latin-1")
    return PixelPlace(stream.tell(), length, representation, element in _FLOAT_PIXELS)
