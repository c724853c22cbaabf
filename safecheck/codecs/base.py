"""One protocol for every codec: a codec *is* its frozen settings.

Settings go to JSON and back to an equal codec; `encode` and `decode` are functions of the settings and their arguments
alone. How a ratio is reached is the codec's own business (`encode_to_size`), since one has a rate target, another a
quantiser step and a third an integer quality; what was reached, and why not, is told in the same words by all.
"""

from __future__ import annotations

import enum
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, Protocol, TypeAlias, runtime_checkable

import numpy as np
import numpy.typing as npt

from safecheck.errors import CannotEncode, CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = [
    "EXEMPT_BYTES",
    "LONGEST_SIDE",
    "RATE_TOLERANCE",
    "Carriage",
    "Codec",
    "Encoded",
    "RatedCodec",
    "Reached",
    "Settings",
    "admit",
    "fitted",
    "too_long",
]

Settings: TypeAlias = Mapping[str, str | int | float | bool]
"""A codec's settings as JSON scalars, keys sorted by the registry where order matters."""

RATE_TOLERANCE = 0.01
"""A code whose size is within this share of the asked size counts as reached."""
EXEMPT_BYTES = 4096
"""Targets below this many bytes are not held to `RATE_TOLERANCE`: headers weigh too much there."""

LONGEST_SIDE = 0xFFFF
"""Of a frame: DICOM and most code streams have 16 bits for it."""


class Reached(enum.StrEnum):
    """Whether the asked size was met, and if not, why."""

    ASKED = "asked"
    """Within `RATE_TOLERANCE`."""
    SMALL_FRAME = "small frame"
    """The target is under `EXEMPT_BYTES` and lies between two sizes that the codec can give; nearest size taken."""
    CODEC_FLOOR = "codec floor"
    """The codec can make it no smaller."""
    CODEC_CEILING = "codec ceiling"
    """The codec can make it no larger."""
    REVERSIBLE_SMALLER = "reversible is smaller"
    """A reversible code is already smaller than the size asked for."""
    COARSE_STEPS = "coarse steps"
    """The sizes that the codec can give lie further apart than `RATE_TOLERANCE`; nearest size taken."""
    BRACKET = "bracket"
    """An integer dial: one of the two settings around the asked size."""
    SETTING = "setting"
    """Asked by setting, not by size."""


@dataclass(frozen=True, slots=True)
class Encoded:
    """A code, and how it came about."""

    code: bytes
    settings: Settings
    """Settings of the codec that wrote it; with them it is written again, byte for byte."""
    reached: Reached
    encodes: int = 1
    """How many times the frame was encoded on the way."""
    neighbour: Encoded | None = None
    """With `Reached.BRACKET`: the code of the next setting, on the other side of the asked size."""


@dataclass(frozen=True, slots=True)
class Carriage:
    """How samples of a format are brought into a code stream, and what the stream says of them.

    A sample s is coded as round(scale * (s + offset)), and read back the other way.
    """

    precision: int
    """Bits a sample that the code stream's header declares."""
    offset: int = 0
    """Stored values added before coding, where a codec takes no sign."""
    scale: float = 1.0
    """Factor before coding, at least 1: where a codec judges error against the full range of its sample type."""
    clipped_on_reading: bool = False
    """Whether what the code holds beyond the range of the bits stored is brought to the nearest value inside."""


@runtime_checkable
class Codec(Protocol):
    """A way to turn a raster into bytes and back."""

    name: ClassVar[str]
    """Word for the codec in plans, commands and rows."""
    archive_can_write: ClassVar[bool]
    """Whether a DICOM transfer syntax exists for it. False: an analysis codec."""
    reversible: ClassVar[bool]
    """Whether `decode(encode(x))` equals x by construction."""

    @property
    def settings(self) -> Settings:
        """What makes two codecs equal, as JSON scalars; `registry.from_settings(name, settings)` gives an equal one."""
        ...

    @property
    def version(self) -> str:
        """Library and version, or the version of our own bitstream."""
        ...

    @property
    def error_bound(self) -> int | None:
        """Largest error in stored values that the settings promise: 0 for a reversible codec; None without promise."""
        ...

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """How samples of a format that the codec takes are brought into its code."""
        ...

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002
        """Why this codec takes no raster of this format and (rows, columns); None where it does."""
        ...

    def encode(self, raster: Raster) -> bytes:
        """Write the raster.

        Raises
        ------
        CannotEncode
            Where `refuses` gives a reason.
        CodecUnavailable
            Where the library is missing.
        """
        ...

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read a code back, from the bytes alone.

        Parameters
        ----------
        code
            Bytes.
        format
            Expected pixel format; a code that says otherwise is corrupt.
        shape
            Expected (rows, columns).

        Returns
        -------
        numpy.ndarray
            (rows, columns) or (rows, columns, 3), dtype ``format.dtype``, within the format's range.

        Raises
        ------
        CorruptCode
            If the bytes cannot be read, or give another shape, precision or range.
        CodecUnavailable
            Where the library is missing.
        """
        ...


@runtime_checkable
class RatedCodec(Codec, Protocol):
    """A codec that can be asked for a size."""

    dial: ClassVar[str]
    """The setting by which its size is set, e.g. quality; the one that `encode_to_size` finds."""

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Write the raster at the asked size, or as near as the codec comes.

        The dial in ``self.settings`` is ignored; the other settings hold. The search starts from the raster alone. A
        dial of whole numbers gives the two settings around the asked size: the smaller code, whose ratio is not below
        the asked one, with the other as its `neighbour`.

        Parameters
        ----------
        raster
            What to write.
        target_bytes
            Positive.

        Raises
        ------
        CannotEncode, CodecUnavailable
            As in `encode`.
        """
        ...


def admit(codec: Codec, raster: Raster) -> None:
    """Raise where a codec takes no such raster, or where a sample lies outside the raster's own format.

    Libraries clip or wrap values beyond the bits they were told, and say nothing.

    Raises
    ------
    CannotEncode
        With the codec's name and the reason.
    """
    reason = codec.refuses(raster.format, raster.shape)
    if reason is not None:
        raise CannotEncode(f"{codec.name}: {reason}")
    lowest, highest = int(raster.samples.min()), int(raster.samples.max())
    if lowest < raster.format.lowest or highest > raster.format.highest:
        raise CannotEncode(
            f"{codec.name}: samples from {lowest} to {highest}, expected "
            f"{raster.format.lowest} to {raster.format.highest} ({raster.format.bits_stored} bits stored)"
        )


def too_long(shape: tuple[int, int]) -> str | None:
    """Why (rows, columns) are more than a header can say; None where they are not."""
    if max(shape) > LONGEST_SIDE:
        return f"{shape[0]} x {shape[1]} pixels, expected at most {LONGEST_SIDE} on each side"
    return None


def fitted(
    decoded: npt.NDArray[Any],
    codec: str,
    form: PixelFormat,
    shape: tuple[int, int],
) -> Samples:
    """Bring what a library decoded into the format's sample type, or say that it is no such raster.

    Parameters
    ----------
    decoded
        Whole numbers of any type.
    codec
        Name of the codec, for the message.
    form, shape
        Expected pixel format and (rows, columns).

    Raises
    ------
    CorruptCode
        If the shape, the kind of number or the range is not the format's.
    """
    expected = shape if form.channels == 1 else (*shape, form.channels)
    if decoded.shape != expected or decoded.dtype.kind not in "iu":
        raise CorruptCode(f"{codec}: decoded to {decoded.dtype} of shape {decoded.shape}, expected {expected}")
    lowest, highest = int(decoded.min()), int(decoded.max())
    if lowest < form.lowest or highest > form.highest:
        raise CorruptCode(
            f"{codec}: decoded to values from {lowest} to {highest}, expected {form.lowest} to {form.highest}"
        )
    return np.ascontiguousarray(decoded, dtype=form.dtype)
