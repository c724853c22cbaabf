"""Reversible codecs, for controls and for what a ratio is worth against lossless storage: CharLS and OpenJPEG.

Both come with imagecodecs. Its JPEG-LS takes unsigned samples of whole bytes only: signed ones are offset by half their
range, and the stream's precision is 8 or 16 whatever the bits stored. On 12 to 14 bits that makes a code up to 3 %
larger than one at the true precision.
"""

from __future__ import annotations

import functools
import importlib
import importlib.metadata
from dataclasses import dataclass
from types import ModuleType
from typing import ClassVar, Literal

import numpy as np

from safecheck.codecs.base import Carriage, Codec, Settings, admit, fitted
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.stream_headers import check_jpeg2000, check_jpegls
from safecheck.errors import CannotEncode, CodecUnavailable
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["Jpeg2000Lossless", "JpegLs", "Smallest", "best_reversible", "cheapest"]

_OFFSET = "stored value + 2^(bits stored - 1)"
_PRECISION = "8 or 16 bits"
_LONGEST_SIDE = 0xFFFF
_HEADROOM_BYTES = 4096


def _library(part: Literal["JPEGLS", "JPEG2K"]) -> ModuleType:
    """Load imagecodecs on first use; builds of it may lack a part."""
    try:
        library = importlib.import_module("imagecodecs")
    except ImportError as error:
        raise CodecUnavailable("imagecodecs is not on this machine") from error
    if not getattr(library, part).available:
        raise CodecUnavailable(f"imagecodecs on this machine was built without {part}")
    return library


@functools.cache
def _version(library_version: str) -> str:
    """'charls 2.4.3' -> 'charls 2.4.3 in imagecodecs 2026.3.6'; kept, since every row asks and files are read."""
    return f"{library_version} in imagecodecs {importlib.metadata.version('imagecodecs')}"


def _too_long(shape: tuple[int, int]) -> str | None:
    """Refuse what the header's 16 bits cannot say."""
    if max(shape) > _LONGEST_SIDE:
        return f"{shape[0]} x {shape[1]} pixels, expected at most {_LONGEST_SIDE} on each side"
    return None


@dataclass(frozen=True, slots=True)
class JpegLs:
    """JPEG-LS with largest error 0: exact for every format and size."""

    signed_as: str = _OFFSET
    """How signed samples are written, which the library cannot take; the only value there is."""
    precision: str = _PRECISION
    """Precision of the code stream, the least that holds the bits stored; the only value there is."""

    name: ClassVar[str] = "jpegls-reversible"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = True

    def __post_init__(self) -> None:
        """Check that the settings are those this code follows."""
        if (self.signed_as, self.precision) != (_OFFSET, _PRECISION):
            raise ValueError(f"settings are {self.settings}, expected {_OFFSET!r} and {_PRECISION!r}")

    @property
    def settings(self) -> Settings:
        """How sign and precision are carried."""
        return {"precision": self.precision, "signed_as": self.signed_as}

    @property
    def version(self) -> str:
        """CharLS's version and that of the package that carries it."""
        return _version(_library("JPEGLS").jpegls_version())

    @property
    def error_bound(self) -> int | None:
        """No error."""
        return 0

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, in 8 or 16 bits: the library cannot be told another precision."""
        return Carriage(8 * _unsigned(format).itemsize, -min(0, format.lowest))

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """Refuse only what the header cannot say."""
        return _too_long(shape)

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
        library, form = _library("JPEGLS"), raster.format
        unsigned = _offset(raster.samples, -form.lowest).astype(_unsigned(form), copy=False)
        with writing(self.name, "CharLS"):
            # Noise can come out larger than it went in, for which the library's own buffer is too small.
            code = bytes(library.jpegls_encode(unsigned, level=0, out=2 * unsigned.nbytes + _HEADROOM_BYTES))
            check_jpegls(code, _unsigned(form).itemsize * 8, form.channels, raster.shape)
        return code

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with CharLS.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        library = _library("JPEGLS")
        check_jpegls(code, _unsigned(format).itemsize * 8, format.channels, shape)
        with reading(self.name, "CharLS"):
            decoded = library.jpegls_decode(code)
        return fitted(_offset(decoded, format.lowest), self.name, format, shape)


def _offset(samples: Samples, offset: int) -> Samples:
    """Add a constant, in a type that holds the sum."""
    return samples.astype(np.int32) + np.int32(offset) if offset else samples


def _unsigned(format: PixelFormat) -> np.dtype[np.uint8] | np.dtype[np.uint16]:  # noqa: A002
    """Sample type in which JPEG-LS is written."""
    return np.dtype(np.uint8) if format.bits_stored <= 8 else np.dtype(np.uint16)


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
        return _version(_library("JPEG2K").jpeg2k_version())

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
        return _too_long(shape)

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
        library, form = _library("JPEG2K"), raster.format
        # Told 8 bits or fewer of a 16-bit sample, the library writes 16.
        narrow = np.dtype(f"{'i' if form.signed else 'u'}{_unsigned(form).itemsize}")
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
        library = _library("JPEG2K")
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
        for codec in (JpegLs(), Jpeg2000Lossless())
        if codec.refuses(raster.format, raster.shape) is None
    ]
    if not sizes:
        raise CannotEncode(f"no reversible codec takes a frame of {raster.shape[0]} x {raster.shape[1]} pixels")
    return min(sizes, key=lambda smallest: smallest.size_bytes)


def cheapest() -> Codec:
    """Give the fastest exact codec, which every frame can afford as a control."""
    return JpegLs()
