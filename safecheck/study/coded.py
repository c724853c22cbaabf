"""The codec `tiled` at a ratio, its code written and read back, and its squared error told apart by coefficient."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.settings import SIZES as CODEC_SIZES
from safecheck.frames import SizeBasis
from safecheck.study.subject import Subject
from safecheck.study.tiles import SIZES, Reals, as_tiles, basis, forward, in_whole_tiles

__all__ = ["CODED_SIZES", "RATIOS", "Coded", "Split", "code_at", "split_error"]

CODED_SIZES = tuple(size for size in SIZES if size in CODEC_SIZES)
"""Tile sizes studied of which the codec writes codes."""
RATIOS = (5.0, 10.0, 20.0)
"""Ratios studied, on the bits-stored basis."""


@dataclass(frozen=True, slots=True, eq=False)
class Coded:
    """A code and what came back."""

    transform: str
    size: int
    ratio: float
    code_bytes: int
    step: float
    """Step of the quantiser in stored values."""
    error: Reals
    """(rows, columns), after less before, in stored values."""


@dataclass(frozen=True, slots=True)
class Split:
    """The squared error of a code over inner tiles, by what became of each coefficient. Shares are 0 to 1."""

    kept_share: float
    """Coefficients that came back, over all."""
    dropped: float | None
    """Squared error in those that came back as nothing, over all of it; None where there is no error."""
    rounding_over_law: float | None
    """Mean squared error of those that came back, over step**2 / 12; None where none did."""


def code_at(subject: Subject, transform: str, size: int, ratio: float) -> Coded:
    """Write a frame at a ratio and read it back.

    Raises
    ------
    CannotEncode
        If the codec does not take such a frame.
    """
    raster = subject.raster
    codec = Tiled(size=size, transform=transform)
    encoded = codec.encode_to_size(raster, raster.size_bytes(SizeBasis.BITS_STORED) / ratio)
    decoded = codec.decode(encoded.code, raster.format, raster.shape)
    error = decoded.astype(np.float64) - raster.samples
    return Coded(transform, size, ratio, len(encoded.code), float(encoded.settings["step"]), error)


def split_error(coefficients: Reals, inner: npt.NDArray[np.bool_], coded: Coded) -> Split | None:
    """Tell a code's squared error apart by coefficient, over inner tiles; None where there are none.

    A coefficient came back where what was read is at least half a step in size: a level that is not zero is read as
    no less. So the parts are found from what was read alone, whatever rule chose the levels; the rounding of samples
    to whole numbers is within them.

    Parameters
    ----------
    coefficients
        (inner, size * size) of the frame, in stored values.
    inner
        (tiles,), which tiles they are of.
    coded
        The code.
    """
    if not len(coefficients):
        return None
    from safecheck.study.kernels import split_squares

    size, step = coded.size, coded.step
    moved = forward(as_tiles(in_whole_tiles(coded.error, size), size)[inner], basis(coded.transform, size))
    count, total, rounding = split_squares(coefficients, moved, step / 2)
    return Split(
        kept_share=count / moved.size,
        dropped=1 - rounding / total if total > 0 else None,
        rounding_over_law=rounding / count / (step * step / 12) if count else None,
    )
