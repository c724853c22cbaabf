"""JPEG 2000, irreversible 9/7, at a true rate: OpenJPEG by way of pylibjpeg-openjpeg.

The library is told the bits stored; left to infer them from the samples, or told the bits allocated, it misses the
ratio by up to a quarter. A ratio of exactly 1 makes it write the reversible transform instead, and one beyond single
precision counts as none: the dial keeps clear of both.
"""

from __future__ import annotations

import math
import threading
from dataclasses import dataclass
from typing import ClassVar

from safecheck.codecs import search
from safecheck.codecs.base import Carriage, Encoded, Settings, admit, fitted
from safecheck.codecs.libraries import openjpeg, openjpeg_version
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.reversible import best_reversible
from safecheck.codecs.setting_values import number
from safecheck.codecs.stream_headers import MOST_LEVELS, check_jpeg2000
from safecheck.frames import PixelFormat, Raster, Samples, SizeBasis

__all__ = ["RATIO_HIGHEST", "RATIO_LOWEST", "Jpeg2000"]

RATIO_LOWEST = 1.001
"""Just above 1, at which the library would turn reversible."""
RATIO_HIGHEST = 1e6
_SMALLEST_SIDE = 1 << MOST_LEVELS
"""The library refuses fewer rows or columns than its wavelet decompositions halve."""
_RGB = 1
_ENCODER = threading.Lock()
"""The binding crashes where two threads encode at once. It never leaves the interpreter's lock: none waits longer."""


@dataclass(frozen=True, slots=True)
class Jpeg2000:
    """Irreversible JPEG 2000 with one quality layer."""

    ratio: float = 10.0
    """Asked ratio on the bits-stored basis, 1.001 to 1e6. `encode_to_size` finds its own."""

    name: ClassVar[str] = "jpeg2000"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "ratio"

    def __post_init__(self) -> None:
        """Check the range; keep a whole number as the float it stands for."""
        object.__setattr__(self, "ratio", number("ratio", self.ratio, RATIO_LOWEST, RATIO_HIGHEST))

    @property
    def settings(self) -> Settings:
        """The asked ratio."""
        return {"ratio": self.ratio}

    @property
    def version(self) -> str:
        """OpenJPEG's version and that of the package that carries it."""
        return openjpeg_version(self.name)

    @property
    def error_bound(self) -> int | None:
        """No promise."""
        return None

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they are."""
        return Carriage(format.bits_stored)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002
        """Refuse frames smaller than the wavelet decompositions need, and colour of one bit a channel."""
        if format.channels == 3 and format.bits_stored == 1:
            return "colour with 1 bit stored, expected at least 2"
        if min(shape) < _SMALLEST_SIDE or max(shape) > 0xFFFF:
            return f"{shape[0]} x {shape[1]} pixels, expected {_SMALLEST_SIDE} to 65535 on each side"
        return None

    def encode(self, raster: Raster) -> bytes:
        """Write the raster at the asked ratio, or as near as OpenJPEG comes in one go.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason, or the library does.
        CodecUnavailable
            Where the library is missing.
        """
        admit(self, raster)
        library, form = openjpeg(self.name), raster.format
        with writing(self.name, "OpenJPEG"):
            with _ENCODER:
                code = library.encode_array(
                    raster.samples,
                    bits_stored=form.bits_stored,
                    photometric_interpretation=_RGB if form.channels == 3 else 0,
                    compression_ratios=[self.ratio],
                )
            check_jpeg2000(code, form, raster.shape, reversible=False)
        return bytes(code)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back with OpenJPEG.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or their header is not the one that `encode` writes.
        CodecUnavailable
            Where the library is missing.
        """
        library = openjpeg(self.name)
        check_jpeg2000(code, format, shape, reversible=False)
        with reading(self.name, "OpenJPEG"):
            decoded = library.decode(code, 0)
        return fitted(decoded, self.name, format, shape)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster at the asked size, mostly in one go.

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
        size = raster.size_bytes(SizeBasis.BITS_STORED)
        if not 0 < target_bytes < math.inf:
            raise ValueError(f"asked for {target_bytes} bytes, expected a positive number")
        dial = search.Dial(RATIO_LOWEST, RATIO_HIGHEST, exponent=-1)
        found = search.turn(lambda ratio: Jpeg2000(ratio).encode(raster), target_bytes, dial, size / target_bytes)
        reached = search.tell(found.end, target_bytes, lambda: best_reversible(raster).size_bytes)
        return Encoded(found.code, Jpeg2000(found.dial).settings, reached, found.encodes)
