"""JPEG XL by libjxl in imagecodecs: lossy by a distance, or reversible.

The library is told the bits stored, and scales them to the full range and back by itself: a 12-bit sample of 4095 is
white. Told nothing it takes 12 bits in 16 for an almost black picture. It takes no sign: signed samples are offset by
half their range. Samples are declared as sRGB, so a distance, which is one of appearance, allows more error where
values are high. A distance of 0 is not lossless in the library; it is refused here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from types import ModuleType
from typing import ClassVar

from safecheck.codecs import search
from safecheck.codecs.base import Carriage, Codec, Encoded, Settings, admit, fitted, too_long
from safecheck.codecs.jpegxl_header import check_jpegxl
from safecheck.codecs.libraries import carried_by, imagecodecs_with
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.offsets import offset_of, to_signed, to_unsigned
from safecheck.codecs.reversible import best_reversible
from safecheck.codecs.setting_values import number, whole
from safecheck.frames import PixelFormat, Raster, Samples, SizeBasis

__all__ = ["DISTANCE_HIGHEST", "DISTANCE_LOWEST", "JpegXl", "JpegXlLossless"]

DISTANCE_LOWEST, DISTANCE_HIGHEST = 0.01, 25.0
"""What libjxl itself brings a distance to."""
_EFFORT = 7
"""libjxl's own default."""
_REVERSIBLE_EFFORT = 3
"""On real frames 4 to 13 times as fast as 7, for codes from 1 % smaller to 15 % larger."""
_EFFORT_HIGHEST = 9
_SLOPE = -0.7
"""d log(size) / d log(distance), as seen on CT, MR, CR and ultrasound frames at 5 to 20:1."""


@dataclass(frozen=True, slots=True)
class JpegXl:
    """Lossy JPEG XL at a distance."""

    distance: float = 1.0
    """Butteraugli distance, 0.01 to 25. `encode_to_size` finds its own."""
    effort: int = _EFFORT
    """How hard the library tries, 1 to 9."""

    name: ClassVar[str] = "jpegxl"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "distance"

    def __post_init__(self) -> None:
        """Check the ranges; keep a whole number as the float it stands for."""
        remark = ", which would not be lossless" if self.distance == 0 else ""
        distance = number("distance", self.distance, DISTANCE_LOWEST, DISTANCE_HIGHEST, remark=remark)
        object.__setattr__(self, "distance", distance)
        object.__setattr__(self, "effort", whole("effort", self.effort, 1, _EFFORT_HIGHEST))

    @property
    def settings(self) -> Settings:
        """Distance and effort."""
        return {"distance": self.distance, "effort": self.effort}

    @property
    def version(self) -> str:
        """Version of libjxl, and that of the package that carries it."""
        return _version()

    @property
    def error_bound(self) -> int | None:
        """No promise."""
        return None

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, at the bits stored; the library itself takes those for the full range."""
        return Carriage(format.bits_stored, offset_of(format))

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """Refuse only frames beyond what DICOM can say."""
        return too_long(shape)

    def encode(self, raster: Raster) -> bytes:
        """Write the raster.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason, or the library does.
        CodecUnavailable
            Where the library is missing.
        """
        return _write(self, raster, {"distance": self.distance, "effort": self.effort, "lossless": False})

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with libjxl.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or their header is not the one that `encode` writes.
        CodecUnavailable
            Where the library is missing.
        """
        return _read(self, code, format, shape)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster at the asked size, by a search for the distance.

        Parameters
        ----------
        raster
            What to write.
        target_bytes
            Positive.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason, or the library does.
        CodecUnavailable
            Where the library is missing.
        ValueError
            If ``target_bytes`` is not positive and finite.
        """
        dial = search.Dial(DISTANCE_LOWEST, DISTANCE_HIGHEST, _SLOPE)
        start = _first_distance(raster, target_bytes)
        found = search.turn(lambda at: JpegXl(at, self.effort).encode(raster), target_bytes, dial, start)
        reached = search.tell(found.end, target_bytes, lambda: best_reversible(raster).size_bytes)
        return Encoded(found.code, JpegXl(found.dial, self.effort).settings, reached, found.encodes)


@dataclass(frozen=True, slots=True)
class JpegXlLossless:
    """Reversible JPEG XL."""

    effort: int = _REVERSIBLE_EFFORT
    """How hard the library tries, 1 to 9."""

    name: ClassVar[str] = "jpegxl-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    def __post_init__(self) -> None:
        """Check the range."""
        object.__setattr__(self, "effort", whole("effort", self.effort, 1, _EFFORT_HIGHEST))

    @property
    def settings(self) -> Settings:
        """The effort."""
        return {"effort": self.effort}

    @property
    def version(self) -> str:
        """Version of libjxl, and that of the package that carries it."""
        return _version()

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, at the bits stored."""
        return Carriage(format.bits_stored, offset_of(format))

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
        return _write(self, raster, {"effort": self.effort, "lossless": True})

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with libjxl.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        return _read(self, code, format, shape)


def _version() -> str:
    return carried_by(_library().jpegxl_version(), "imagecodecs")


def _library() -> ModuleType:
    return imagecodecs_with("JPEGXL")


def _write(codec: Codec, raster: Raster, settings: dict[str, float | bool]) -> bytes:
    """Write with the library's settings, in this thread alone."""
    admit(codec, raster)
    library, form = _library(), raster.format
    with writing(codec.name, "libjxl"):
        code = library.jpegxl_encode(
            to_unsigned(raster), bitspersample=form.bits_stored, usecontainer=False, numthreads=1, **settings
        )
        check_jpegxl(code, form, raster.shape, lossless=codec.reversible)
    return bytes(code)


def _read(codec: Codec, code: bytes, form: PixelFormat, shape: tuple[int, int]) -> Samples:
    """Read, in this thread alone."""
    library = _library()
    check_jpegxl(code, form, shape, lossless=codec.reversible)
    with reading(codec.name, "libjxl"):
        decoded = library.jpegxl_decode(code, numthreads=1)
    return fitted(to_signed(decoded, form), codec.name, form, shape)


def _first_distance(raster: Raster, target_bytes: float) -> float:
    """Guess the distance from the asked ratio; what is wrong with it costs codes, not truth."""
    if not 0 < target_bytes < math.inf:
        raise ValueError(f"asked for {target_bytes} bytes, expected a positive number")
    return 0.01 * raster.size_bytes(SizeBasis.BITS_STORED) / target_bytes
