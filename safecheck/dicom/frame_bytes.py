"""Where the bytes of each frame lie: found once per file, then read one frame at a time."""

from __future__ import annotations

import itertools
import struct
from dataclasses import dataclass
from typing import BinaryIO, Protocol

from pydicom.dataset import Dataset

from safecheck.dicom.elements import value_of
from safecheck.dicom.fragments import Ending, walk_items
from safecheck.dicom.opened import UNDEFINED_LENGTH, OpenedFile
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.dicom.syntaxes import ENCAPSULATED_UNCOMPRESSED, Coding
from safecheck.errors import InputRefused

__all__ = ["CodedFrames", "FrameBytes", "NativeFrames", "locate_frames"]


class FrameBytes(Protocol):
    """Bytes of one frame at a time."""

    @property
    def notes(self) -> tuple[str, ...]:
        """What was set right when the frames were located."""
        ...

    def read(self, index: int) -> bytes:
        """Samples or code stream of a frame, from 0."""
        ...


@dataclass(frozen=True, slots=True)
class NativeFrames:
    """Uncompressed frames, one behind the other."""

    stream: BinaryIO
    offset: int
    frame_bytes: int
    swapped: bool
    """Bytes of 8 bit samples lie swapped in pairs: big endian words (PS3.5 A.3, retired)."""
    notes: tuple[str, ...] = ()

    def read(self, index: int) -> bytes:
        """Samples of a frame, from 0."""
        start = index * self.frame_bytes
        end = start + self.frame_bytes
        if not self.swapped:
            return _read_exactly(self.stream, self.offset + start, self.frame_bytes)
        first, last = start & ~1, (end + 1) & ~1
        words = bytearray(_read_exactly(self.stream, self.offset + first, last - first))
        words[0::2], words[1::2] = words[1::2], words[0::2]
        return bytes(words[start - first : end - first])


@dataclass(frozen=True, slots=True)
class CodedFrames:
    """Code streams in fragments."""

    stream: BinaryIO
    fragments: tuple[tuple[tuple[int, int], ...], ...]
    """Of each frame: (offset in the stream, bytes) of its fragments."""
    notes: tuple[str, ...] = ()

    def read(self, index: int) -> bytes:
        """Code stream of a frame, from 0, with the padding of its last item."""
        return b"".join(_read_exactly(self.stream, at, size) for at, size in self.fragments[index])


def locate_frames(opened: OpenedFile, header: PixelHeader) -> FrameBytes:
    """Find every frame of the file, and hold the declared lengths against what is there.

    Raises
    ------
    InputRefused
        'truncated', 'length', 'frames' or 'header'.
    """
    encapsulated = opened.syntax.coding is not Coding.NATIVE or opened.syntax.uid == ENCAPSULATED_UNCOMPRESSED
    if encapsulated != (opened.value_length == UNDEFINED_LENGTH):
        raise InputRefused("length", "pixel data is framed in another way than its transfer syntax asks for")
    return _coded_frames(opened, header) if encapsulated else _native_frames(opened, header)


def _native_frames(opened: OpenedFile, header: PixelHeader) -> NativeFrames:
    expected = header.frame_bytes * header.frames
    if opened.value_length < expected or opened.end - opened.value_offset < expected:
        raise InputRefused("truncated", "")
    if opened.value_length > expected + expected % 2:
        raise InputRefused("length", "longer than the header declares")
    if opened.end - opened.value_offset < opened.value_length:
        raise InputRefused("truncated", "")
    swapped = not opened.little_endian and header.bits_allocated == 8 and opened.representation == "OW"
    return NativeFrames(opened.stream, opened.value_offset, header.frame_bytes, swapped)


def _coded_frames(opened: OpenedFile, header: PixelHeader) -> CodedFrames:
    items = _scan_items(opened)
    table, fragments = items[0], items[1:]
    basic = _basic_offsets(opened.stream, table)
    first = fragments[0][0] - 8 if fragments else 0
    extended = _extended_offsets(opened.dataset)
    offsets = extended or basic
    starts = {at - 8 - first: number for number, (at, _) in enumerate(fragments)}
    if len(fragments) < header.frames:
        raise InputRefused("frames", "fewer fragments than frames declared")
    if offsets and len(offsets) == header.frames and offsets[0] == 0 and _rising(offsets, starts):
        bounds = [starts[offset] for offset in offsets] + [len(fragments)]
        return CodedFrames(opened.stream, _grouped(fragments, bounds))
    notes = ("the offset table contradicts the fragments and was not used",) if offsets else ()
    if header.frames == 1:
        return CodedFrames(opened.stream, (fragments,), notes)
    if len(fragments) != header.frames:
        return CodedFrames(opened.stream, _by_end_marker(opened, fragments, header.frames), notes)
    return CodedFrames(opened.stream, tuple((each,) for each in fragments), notes)


def _scan_items(opened: OpenedFile) -> tuple[tuple[int, int], ...]:
    """(offset, bytes) of every item of the pixel data, the offset table first."""
    items = walk_items(opened.stream, opened.value_offset, opened.end)
    if items.ending is not Ending.CLOSED:
        cut = items.ending is Ending.CUT
        raise InputRefused("truncated", "a fragment is cut" if cut else "the fragments end without their delimiter")
    if not items.places:
        raise InputRefused("header", "the offset table is missing")
    return items.places


def _basic_offsets(stream: BinaryIO, table: tuple[int, int]) -> list[int]:
    at, size = table
    if size % 4:
        raise InputRefused("header", "the offset table is malformed")
    return list(struct.unpack(f"<{size // 4}I", _read_exactly(stream, at, size)))


def _extended_offsets(dataset: Dataset) -> list[int]:
    raw = value_of(dataset, "ExtendedOffsetTable")
    if not isinstance(raw, bytes) or len(raw) % 8:
        return []
    return list(struct.unpack(f"<{len(raw) // 8}Q", raw))


def _rising(offsets: list[int], starts: dict[int, int]) -> bool:
    ordered = all(before < after for before, after in itertools.pairwise(offsets))
    return ordered and all(offset in starts for offset in offsets)


def _grouped(fragments: tuple[tuple[int, int], ...], bounds: list[int]) -> tuple[tuple[tuple[int, int], ...], ...]:
    return tuple(fragments[a:b] for a, b in itertools.pairwise(bounds))


def _by_end_marker(
    opened: OpenedFile, fragments: tuple[tuple[int, int], ...], frames: int
) -> tuple[tuple[tuple[int, int], ...], ...]:
    """Without a usable table, a frame ends in the fragment whose last bytes hold the end marker FFD9."""
    if opened.syntax.coding not in (Coding.JPEG, Coding.JPEG_LS, Coding.JPEG_2000):
        raise InputRefused("frames", "more fragments than frames, and no offset table that tells them apart")
    bounds = [0]
    for number, (at, size) in enumerate(fragments):
        tail = _read_exactly(opened.stream, at + max(0, size - 4), min(size, 4))
        if tail.rstrip(b"\x00\xff").endswith(b"\xff\xd9"):
            bounds.append(number + 1)
    if len(bounds) != frames + 1 or bounds[-1] != len(fragments):
        raise InputRefused("frames", "more fragments than frames, and no offset table that tells them apart")
    return _grouped(fragments, bounds)


def _read_exactly(stream: BinaryIO, at: int, size: int) -> bytes:
    stream.seek(at)
    data = stream.read(size)
    if len(data) != size:
        raise InputRefused("truncated", "")
    return data
