"""Reversible codecs that measure what a ratio is worth against lossless storage: JPEG-LS and JPEG 2000 5/3."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from safecheck.codecs import jpegls_coding
from safecheck.codecs.base import Carriage, Codec, Settings, admit, fitted, too_long
from safecheck.codecs.libraries import carried_by, imagecodecs_with
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.offsets import narrow_type
from safecheck.codecs.stream_headers import check_jpeg2000
from safecheck.errors import CannotEncode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["Jpeg2000Lossless", "JpegLsLossless", "Smallest", "best_reversible", "cheapest"]


@dataclass(frozen=True, slots=True)
class JpegLsLossless:
    """JPEG-LS with largest error 0: exact for every format and size."""

    name: ClassVar[str] = "jpegls-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    @property
    def settings(self) -> Settings:
        """None: the format says it all."""
        return {}

    @property
    def version(self) -> str:
        """The library that writes, and its version."""
        return jpegls_coding.version()

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, at the bits stored."""
        return jpegls_coding.carriage(format, reversible=self.reversible)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """Refuse only what the header cannot say."""
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
        return jpegls_coding.write(self, raster, 0)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with CharLS.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        return jpegls_coding.read(self, code, format, shape, range(1))


@dataclass(frozen=True, slots=True)
class Jpeg2000Lossless:
    """JPEG 2000 with the 5/3 wavelet and, for colour, the reversible colour transform: exact from 2 bits on."""

    name: ClassVar[str] = "jpeg2000-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    @property
    def settings(self) -> Settings:
        """None: the format says it all."""
        return {}

    @property
    def version(self) -> str:
        """OpenJPEG's version and that of the package that carries it."""
        return carried_by(imagecodecs_with("JPEG2K").jpeg2k_version(), "imagecodecs")

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they are."""
        return Carriage(format.bits_stored)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002
        """Refuse one bit, which the library cannot write or loses where it is noise, and what no header can say."""
        if format.bits_stored == 1:
            return "1 bit stored, expected at least 2"
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
        library, form = imagecodecs_with("JPEG2K"), raster.format
        # Told 8 bits or fewer of a 16-bit sample, the library writes 16.
        narrow = narrow_type(form, signed=form.signed)
        with writing(self.name, "OpenJPEG"):
            code = library.jpeg2k_encode(
                raster.samples.astype(narrow, copy=False),
                codecformat="j2k",
                bitspersample=form.bits_stored,
                reversible=True,
                mct=form.channels == 3,
                numthreads=1,
            )
            check_jpeg2000(code, form, raster.shape, reversible=True)
        return bytes(code)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with OpenJPEG.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        library = imagecodecs_with("JPEG2K")
        check_jpeg2000(code, format, shape, reversible=True)
        with reading(self.name, "OpenJPEG"):
            decoded = library.jpeg2k_decode(code, numthreads=1)
        return fitted(decoded, self.name, format, shape)


@dataclass(frozen=True, slots=True)
class Smallest:
    """The smallest reversible code of a raster."""

    codec: str
    """Name of the codec that wrote it."""
    size_bytes: int


def best_reversible(raster: Raster) -> Smallest:
    """Size of the smaller of JPEG-LS and JPEG 2000 5/3, with its name; JPEG-LS where they are equal.

    Raises
    ------
    CannotEncode
        Where neither takes the raster.
    CodecUnavailable
        Where the library is missing.
    """
    sizes = [
        Smallest(codec.name, len(codec.encode(raster)))
        for codec in (JpegLsLossless(), Jpeg2000Lossless())
        if codec.refuses(raster.format, raster.shape) is None
    ]
    if not sizes:
        raise CannotEncode(f"no reversible codec takes a frame of {raster.shape[0]} x {raster.shape[1]} pixels")
    return min(sizes, key=lambda smallest: smallest.size_bytes)


def cheapest() -> Codec:
    """Give the fastest exact codec, which every frame can afford as a control."""
    return JpegLsLossless()
