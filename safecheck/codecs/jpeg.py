"""JPEG, sequential and irreversible: baseline for up to 8 bits stored, extended 12-bit for 9 to 12, by libjpeg-turbo.

The tables are those of ISO/IEC 10918-1 Annex K, scaled by the quality as the Independent JPEG Group does and held to 1
to 255 also where samples have 12 bits; so the coarsest 12-bit code is 16 times finer, against the range, than the
coarsest of 8 bits. Huffman tables are optimised for each code. Colour goes through YCbCr without subsampling, so that
what is lost is the quantiser's part alone. Samples are never scaled: with fewer bits stored than the code stream holds,
the row's precision says so.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from safecheck.codecs.base import Carriage, Encoded, Settings, admit, fitted
from safecheck.codecs.integer_dial import WholeDial, encode_around
from safecheck.codecs.libraries import carried_by, imagecodecs_with
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.offsets import offset_of, to_signed, to_unsigned, within
from safecheck.codecs.setting_values import whole
from safecheck.codecs.stream_headers import check_jpeg
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["QUALITY_HIGHEST", "Jpeg"]

QUALITY_HIGHEST = 100
_BASELINE_BITS, _EXTENDED_BITS = 8, 12
_LONGEST_SIDE = 65500
"""libjpeg's own limit, below the header's 65535."""
_START = 75


@dataclass(frozen=True, slots=True)
class Jpeg:
    """Sequential JPEG at a quality."""

    quality: int = 90
    """Scale of the quantiser tables, 1 to 100. `encode_to_size` finds its own."""

    name: ClassVar[str] = "jpeg"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "quality"

    def __post_init__(self) -> None:
        """Check the range."""
        object.__setattr__(self, "quality", whole("quality", self.quality, 1, QUALITY_HIGHEST))

    @property
    def settings(self) -> Settings:
        """The quality."""
        return {"quality": self.quality}

    @property
    def version(self) -> str:
        """Version of libjpeg-turbo, and that of the package that carries it."""
        # 'libjpeg_turbo 3.1.3/8.0': the second number is that of the interface.
        return carried_by(imagecodecs_with("JPEG8").jpeg8_version().split("/")[0], "imagecodecs")

    @property
    def error_bound(self) -> int | None:
        """No promise."""
        return None

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, in 8 or 12 bits."""
        precision = _BASELINE_BITS if format.bits_stored <= _BASELINE_BITS else _EXTENDED_BITS
        return Carriage(precision, offset_of(format), clipped_on_reading=precision > format.bits_stored)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002
        """Refuse more than 12 bits, colour of more than 8, and frames beyond the library's longest side."""
        most = _BASELINE_BITS if format.channels == 3 else _EXTENDED_BITS
        if format.bits_stored > most:
            kind = "colour" if format.channels == 3 else "grey"
            return f"{kind} with {format.bits_stored} bits stored, expected at most {most}"
        if max(shape) > _LONGEST_SIDE:
            return f"{shape[0]} x {shape[1]} pixels, expected at most {_LONGEST_SIDE} on each side"
        return None

    def encode(self, raster: Raster) -> bytes:
        """Write the raster.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason, or the library does.
        CodecUnavailable
            Where the library is missing.
        """
        admit(self, raster)
        library, form = imagecodecs_with("JPEG8"), raster.format
        precision = self.carriage(form).precision
        with writing(self.name, "libjpeg-turbo"):
            code = library.jpeg8_encode(
                to_unsigned(raster),
                level=self.quality,
                subsampling="444" if form.channels == 3 else None,
                optimize=True,
                bitspersample=precision,
            )
            check_jpeg(code, precision, form.channels, raster.shape)
        return bytes(code)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with libjpeg-turbo; with fewer bits stored than coded, what overshoots is clipped.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape or precision.
        CodecUnavailable
            Where the library is missing.
        """
        library = imagecodecs_with("JPEG8")
        check_jpeg(code, self.carriage(format).precision, format.channels, shape)
        with reading(self.name, "libjpeg-turbo"):
            decoded = library.jpeg8_decode(code)
        return fitted(within(to_signed(decoded, format), format), self.name, format, shape)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster with the two qualities around the asked size.

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
        dial = WholeDial(1, QUALITY_HIGHEST, _START, rising=True)
        return encode_around(Jpeg, raster, target_bytes, dial)
