"""Near-lossless JPEG-LS: no sample is off by more than its dial says."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

from safecheck.codecs import jpegls_coding, search
from safecheck.codecs.base import Carriage, Encoded, Settings, too_long
from safecheck.codecs.integer_dial import WholeDial, encode_around
from safecheck.codecs.setting_values import whole
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["NEAR_HIGHEST", "JpegLs", "highest_near"]

NEAR_HIGHEST = 255
"""ISO/IEC 14495-1 C.2.3: NEAR is at most the smaller of 255 and half the largest value."""
_START = 3


def highest_near(form: PixelFormat) -> int:
    """Largest NEAR that the standard allows for so many bits; 0 for one bit, which then has no near-lossless code."""
    return int(min(NEAR_HIGHEST, ((1 << form.bits_stored) - 1) // 2))


@dataclass(frozen=True, slots=True)
class JpegLs:
    """JPEG-LS with a largest error."""

    near: int = 1
    """Largest error in stored values, 1 to 255. `encode_to_size` finds its own."""

    name: ClassVar[str] = "jpegls"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "near"

    def __post_init__(self) -> None:
        """Check the range."""
        object.__setattr__(self, "near", whole("near", self.near, 1, NEAR_HIGHEST))

    @property
    def settings(self) -> Settings:
        """The largest error."""
        return {"near": self.near}

    @property
    def version(self) -> str:
        """The library that writes, and its version."""
        return jpegls_coding.version()

    @property
    def error_bound(self) -> int | None:
        """The dial itself."""
        return self.near

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, at the bits stored."""
        return jpegls_coding.carriage(format, reversible=self.reversible)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002
        """Refuse a largest error beyond half the range, and what the header cannot say."""
        highest = highest_near(format)
        if self.near > highest:
            limit = f"at most {highest}" if highest else "a reversible codec"
            return f"near is {self.near} with {format.bits_stored} bits stored, expected {limit}"
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
        return jpegls_coding.write(self, raster, self.near)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with CharLS, whatever largest error it was written with.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision, largest error or range.
        CodecUnavailable
            Where the library is missing.
        """
        return jpegls_coding.read(self, code, format, shape, range(1, highest_near(format) + 1))

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster with the two largest errors around the asked size.

        Parameters
        ----------
        raster
            What to write.
        target_bytes
            Positive.

        Raises
        ------
        CannotEncode
            Where one bit is stored, the frame is too long, or the library gives up.
        CodecUnavailable
            Where the library is missing.
        ValueError
            If ``target_bytes`` is not positive and finite.
        """
        highest = max(highest_near(raster.format), 1)

        def guess(step: search.Step) -> float:
            """Each bit a sample halves the number of values that are told apart, which lie 2 near + 1 apart."""
            saved = 8 * (len(step.code) - target_bytes) / raster.samples.size
            return ((2 * step.dial + 1) * math.exp2(min(max(saved, -16.0), 16.0)) - 1) / 2

        dial = WholeDial(1, highest, min(_START, highest), rising=False, guess=guess)
        return encode_around(JpegLs, raster, target_bytes, dial)
