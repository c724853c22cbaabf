"""High-throughput JPEG 2000: written by OpenJPH in imagecodecs, read by OpenJPEG in pylibjpeg-openjpeg.

The decoder that imagecodecs carries is not used: it lets 8-bit colour wrap around where the irreversible transform
overshoots (255 for 0), and turns a damaged code into an array that it never filled. OpenJPEG does neither.

The encoder takes the precision from the sample type, 8 or 16 bits; with fewer bits stored the row says so. Signed
samples are coded as such.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from safecheck.codecs import search
from safecheck.codecs.base import Carriage, Codec, Encoded, Settings, admit, fitted, too_long
from safecheck.codecs.libraries import carried_by, imagecodecs_with, openjpeg, openjpeg_version
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.offsets import narrow_type, within
from safecheck.codecs.reversible import best_reversible
from safecheck.codecs.setting_values import number
from safecheck.codecs.stream_headers import check_htj2k
from safecheck.frames import PixelFormat, Raster, Samples, SizeBasis

__all__ = ["STEP_HIGHEST", "STEP_LOWEST", "Htj2k", "Htj2kLossless"]

STEP_LOWEST, STEP_HIGHEST = 1e-6, 0.5
_SLOPE = -0.7
"""d log(size) / d log(step), as seen on CT, MR, CR and ultrasound frames at 5 to 20:1."""


@dataclass(frozen=True, slots=True)
class Htj2k:
    """Irreversible HTJ2K with one quantiser step."""

    step: float = 0.001
    """Quantiser step as a share of the range of 8 or 16 bits, 1e-6 to 0.5. `encode_to_size` finds its own."""

    name: ClassVar[str] = "htj2k"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "step"

    def __post_init__(self) -> None:
        """Check the range; keep a whole number as the float it stands for."""
        object.__setattr__(self, "step", number("step", self.step, STEP_LOWEST, STEP_HIGHEST))

    @property
    def settings(self) -> Settings:
        """The quantiser step."""
        return {"step": self.step}

    @property
    def version(self) -> str:
        """The libraries that write and read, their versions and those of the packages that carry them."""
        return _version(self)

    @property
    def error_bound(self) -> int | None:
        """No promise."""
        return None

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they are, in 8 or 16 bits."""
        return _carriage(format, reversible=self.reversible)

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
        return _write(self, raster, self.step)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with OpenJPEG; with fewer bits stored than coded, what overshoots is clipped.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or their header is not the one that `encode` writes.
        CodecUnavailable
            Where the library is missing.
        """
        decoded = _read(self, code, format, shape)
        return fitted(within(decoded, format), self.name, format, shape)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster at the asked size, by a search for the step.

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
        dial = search.Dial(STEP_LOWEST, STEP_HIGHEST, _SLOPE)
        start = _first_step(raster, target_bytes)
        found = search.turn(lambda step: Htj2k(step).encode(raster), target_bytes, dial, start)
        reached = search.tell(found.end, target_bytes, lambda: best_reversible(raster).size_bytes)
        return Encoded(found.code, Htj2k(found.dial).settings, reached, found.encodes)


@dataclass(frozen=True, slots=True)
class Htj2kLossless:
    """HTJ2K with the 5/3 wavelet and, for colour, the reversible colour transform."""

    name: ClassVar[str] = "htj2k-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    @property
    def settings(self) -> Settings:
        """None: the format says it all."""
        return {}

    @property
    def version(self) -> str:
        """The libraries that write and read, their versions and those of the packages that carry them."""
        return _version(self)

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they are, in 8 or 16 bits."""
        return _carriage(format, reversible=self.reversible)

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
        return _write(self, raster, None)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with OpenJPEG.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        return fitted(_read(self, code, format, shape), self.name, format, shape)


def _version(codec: Codec) -> str:
    writer = carried_by(imagecodecs_with("HTJ2K").htj2k_version(), "imagecodecs")
    return f"{writer}, read by {openjpeg_version(codec.name)}"


def _carriage(form: PixelFormat, *, reversible: bool) -> Carriage:
    precision = 8 * narrow_type(form).itemsize
    return Carriage(precision, clipped_on_reading=not reversible and precision > form.bits_stored)


def _write(codec: Codec, raster: Raster, step: float | None) -> bytes:
    """Write with a quantiser step, or reversibly without one."""
    admit(codec, raster)
    library, form = imagecodecs_with("HTJ2K"), raster.format
    samples = np.ascontiguousarray(raster.samples, dtype=narrow_type(form, signed=form.signed))
    with writing(codec.name, "OpenJPH"):
        code = library.htj2k_encode(samples, level=step, reversible=step is None)
        check_htj2k(code, form, raster.shape, codec.carriage(form).precision, reversible=step is None)
    return bytes(code)


def _read(codec: Codec, code: bytes, form: PixelFormat, shape: tuple[int, int]) -> npt.NDArray[np.integer]:
    """Read with OpenJPEG, which gives samples of 8 or 16 bits with their sign."""
    library = openjpeg(codec.name)
    check_htj2k(code, form, shape, codec.carriage(form).precision, reversible=codec.reversible)
    with reading(codec.name, "OpenJPEG"):
        decoded: npt.NDArray[np.integer] = library.decode(code, 0)
    return decoded


def _first_step(raster: Raster, target_bytes: float) -> float:
    """Guess the step from the asked ratio; what is wrong with it costs codes, not truth."""
    if not 0 < target_bytes < math.inf:
        raise ValueError(f"asked for {target_bytes} bytes, expected a positive number")
    ratio = raster.size_bytes(SizeBasis.BITS_STORED) / target_bytes
    return 2.0 ** (raster.format.bits_stored - 8 * narrow_type(raster.format).itemsize) * 0.0005 * ratio
