"""RLE Lossless of DICOM: the bytes of the samples in planes, most significant first, each row packed (PS3.5 Annex G).

The planes and their header are ours, the packing is the PackBits of imagecodecs.
"""

from __future__ import annotations

import struct
from collections.abc import Iterator
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from safecheck.codecs.base import Carriage, Settings, admit, fitted, too_long
from safecheck.codecs.libraries import carried_by, imagecodecs_with
from safecheck.codecs.library_calls import reading, writing
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["RleLossless"]

_HEADER = struct.Struct("<16I")
"""PS3.5 G.5: how many segments, then where each begins."""


@dataclass(frozen=True, slots=True)
class RleLossless:
    """Run lengths of byte planes: exact for every format and size, seldom small."""

    name: ClassVar[str] = "rle-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    @property
    def settings(self) -> Settings:
        """None: the format says it all."""
        return {}

    @property
    def version(self) -> str:
        """Version of the package that packs."""
        return carried_by(imagecodecs_with("PACKBITS").packbits_version(), "imagecodecs")

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they lie in memory: whole bytes."""
        return Carriage(format.bits_allocated)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """Refuse only frames beyond what DICOM can say."""
        return too_long(shape)

    def encode(self, raster: Raster) -> bytes:
        """Write the raster exactly.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason, or the library does.
        CodecUnavailable
            Where the library is missing.
        """
        admit(self, raster)
        library = imagecodecs_with("PACKBITS")
        with writing(self.name, "PackBits"):
            segments = [bytes(library.packbits_encode(plane, axis=-1)) for plane in _planes(raster.samples)]
        # G.3.1: each segment is of even length, filled with a zero byte.
        segments = [segment + bytes(len(segment) % 2) for segment in segments]
        starts = [_HEADER.size + sum(map(len, segments[:index])) for index in range(len(segments))]
        header = _HEADER.pack(len(segments), *starts, *[0] * (15 - len(segments)))
        return header + b"".join(segments)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back.

        Raises
        ------
        CorruptCode
            If the header is not one of this format, or a segment does not hold its plane.
        CodecUnavailable
            Where the library is missing.
        """
        library = imagecodecs_with("PACKBITS")
        planes = []
        for segment in _segments(code, format.channels * format.bits_allocated // 8):
            with reading(self.name, "PackBits"):
                plane = np.frombuffer(library.packbits_decode(segment), dtype=np.uint8)
            # The zero byte that makes a segment even is read as one more sample, or as nothing.
            if not 0 <= plane.size - shape[0] * shape[1] <= 1:
                raise CorruptCode(f"{self.name}: a segment of {plane.size} bytes, expected {shape[0]} x {shape[1]}")
            planes.append(plane[: shape[0] * shape[1]].reshape(shape))
        return fitted(_joined(planes, format), self.name, format, shape)


def _planes(samples: Samples) -> Iterator[npt.NDArray[np.uint8]]:
    """Yield byte planes, channel by channel, the most significant byte first (PS3.5 G.2)."""
    big = samples.astype(samples.dtype.newbyteorder(">"))
    octets = big.view(np.uint8).reshape(*samples.shape[:2], -1)
    for number in range(octets.shape[2]):
        # A copy, since the packing wants the strides of one even where a side of 1 makes others do.
        yield octets[..., number].copy()


def _joined(planes: list[npt.NDArray[np.uint8]], form: PixelFormat) -> Samples:
    """Samples of their byte planes."""
    octets = np.stack(planes, axis=-1)
    big = np.ascontiguousarray(octets).view(form.dtype.newbyteorder(">"))
    return big.astype(form.dtype) if form.channels == 3 else big[..., 0].astype(form.dtype)


def _segments(code: bytes, count: int) -> Iterator[bytes]:
    """Yield the segments of a code whose header names so many, in order and without room between."""
    if len(code) < _HEADER.size:
        raise CorruptCode("rle-reversible: the header is cut")
    found, *starts = _HEADER.unpack_from(code)
    ends = [*starts[1:count], len(code)]
    if found != count or starts[0] != _HEADER.size or any(starts[count:]):
        raise CorruptCode(f"rle-reversible: the header does not name {count} segments one after the other")
    for start, end in zip(starts[:count], ends, strict=True):
        if not start < end <= len(code):
            raise CorruptCode("rle-reversible: a segment begins where it should not")
        yield code[start:end]
