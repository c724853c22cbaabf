"""A DICOM file opened up to its pixel data: the header parsed, the samples not yet touched."""

from __future__ import annotations

import io
import struct
from dataclasses import dataclass
from typing import BinaryIO

from pydicom.dataset import Dataset
from pydicom.filereader import read_dataset, read_partial, read_preamble
from pydicom.tag import BaseTag
from pydicom.uid import DeflatedExplicitVRLittleEndian

from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.source import WHOLE_LIMIT_BYTES, inflate
from safecheck.dicom.syntaxes import Coding, Syntax, syntax_of
from safecheck.errors import InputRefused

__all__ = ["UNDEFINED_LENGTH", "OpenedFile", "open_file"]

UNDEFINED_LENGTH = 0xFFFFFFFF
_PIXEL_DATA = 0x7FE00010
_FLOAT_PIXELS = (0x7FE00008, 0x7FE00009)
_EXPLICIT_LITTLE_ENDIAN = "1.2.840.10008.1.2.1"
_IMPLICIT_LITTLE_ENDIAN = "1.2.840.10008.1.2"
_EXPLICIT_BIG_ENDIAN = "1.2.840.10008.1.2.2"


@dataclass(frozen=True, slots=True)
class OpenedFile:
    """Header and place of the pixel data. The stream stays the owner's to close."""

    stream: BinaryIO
    """The file, or its inflated data set in memory."""
    dataset: Dataset
    """Elements before the pixel data."""
    syntax: Syntax
    little_endian: bool
    value_offset: int
    """Where the value of the Pixel Data element begins."""
    value_length: int
    """As declared; `UNDEFINED_LENGTH` for fragments."""
    representation: str
    """'OB', 'OW' or ''."""
    end: int
    """Length of the stream."""
    packed_share: float = 1.0
    """Bytes in the file for each byte of the stream: below 1 for a data set that is deflated as a whole."""
    notes: tuple[str, ...] = ()


def open_file(stream: BinaryIO) -> OpenedFile:
    """Parse up to the pixel data; a deflated data set is inflated whole, within bounds.

    Raises
    ------
    InputRefused
        'unreadable', 'syntax', 'bits' (floating point samples), 'truncated', 'too-large' or 'archive-bomb'.
    """
    try:
        with quiet_library():
            parsed, dataset, declared, packed_share = _parse(stream)
    except InputRefused:
        raise
    except Exception as error:
        # The library raises many kinds here, some quoting values: none of them may be heard.
        raise InputRefused("unreadable", f"{type(error).__name__} while the header was parsed") from None
    implicit, little_endian = dataset.original_encoding
    uid = declared or _guessed(implicit=bool(implicit), little_endian=bool(little_endian))
    syntax = syntax_of(uid)
    if syntax.coding in (Coding.VIDEO, Coding.REFERENCED, Coding.UNKNOWN):
        raise InputRefused("syntax", syntax.name)
    offset, length, representation = _pixel_element(parsed, implicit=bool(implicit), little_endian=bool(little_endian))
    return OpenedFile(
        stream=parsed,
        dataset=dataset,
        syntax=syntax,
        little_endian=bool(little_endian),
        value_offset=offset,
        value_length=length,
        representation=representation,
        end=parsed.seek(0, io.SEEK_END),
        packed_share=packed_share,
        notes=() if declared else (f"no transfer syntax in the file; read as {syntax.name}",),
    )


def _parse(stream: BinaryIO) -> tuple[BinaryIO, Dataset, str, float]:
    """Return the stream at its pixel data, the header, the transfer syntax as declared, and the packed share."""
    stream.seek(0)
    read_preamble(stream, force=True)
    meta = read_dataset(stream, is_implicit_VR=False, is_little_endian=True, stop_when=_past_meta)
    declared = str(meta.get("TransferSyntaxUID", "") or "")
    if declared == DeflatedExplicitVRLittleEndian:
        packed = stream.read(WHOLE_LIMIT_BYTES + 1)
        if len(packed) > WHOLE_LIMIT_BYTES:
            raise InputRefused("too-large", "a deflated file over 512 MB")
        whole = io.BytesIO(inflate(packed))
        dataset = read_dataset(whole, is_implicit_VR=False, is_little_endian=True, stop_when=_at_pixels)
        dataset.set_original_encoding(False, True)
        return whole, dataset, declared, len(packed) / whole.getbuffer().nbytes
    stream.seek(0)
    return stream, read_partial(stream, stop_when=_at_pixels, force=True), declared, 1.0


def _past_meta(tag: BaseTag, representation: str | None, length: int) -> bool:  # noqa: ARG001
    return int(tag) >> 16 != 2


def _at_pixels(tag: BaseTag, representation: str | None, length: int) -> bool:  # noqa: ARG001
    return int(tag) >= 0x7FE00003


def _guessed(*, implicit: bool, little_endian: bool) -> str:
    if implicit:
        return _IMPLICIT_LITTLE_ENDIAN
    return _EXPLICIT_LITTLE_ENDIAN if little_endian else _EXPLICIT_BIG_ENDIAN


def _pixel_element(stream: BinaryIO, *, implicit: bool, little_endian: bool) -> tuple[int, int, str]:
    """Read the head of the Pixel Data element at which the stream stands."""
    order = "<" if little_endian else ">"
    head = stream.read(8 if implicit else 12)
    if len(head) < (8 if implicit else 12):
        raise InputRefused("no-pixels", "")
    group, element = struct.unpack_from(f"{order}HH", head)
    tag = group << 16 | element
    if tag in _FLOAT_PIXELS:
        raise InputRefused("bits", "samples are floating point")
    if tag != _PIXEL_DATA:
        raise InputRefused("no-pixels", "")
    length = struct.unpack_from(f"{order}I", head, 4 if implicit else 8)[0]
    return stream.tell(), length, "" if implicit else head[4:6].decode("latin-1")
