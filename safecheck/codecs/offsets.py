"""Samples brought into the unsigned types that most libraries take, and back."""

from __future__ import annotations

import numpy as np

from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["narrow_type", "offset_of", "to_signed", "to_unsigned", "within"]


def narrow_type(form: PixelFormat, *, signed: bool = False) -> np.dtype[np.integer]:
    """Give the least sample type of whole bytes that holds the bits stored."""
    return np.dtype(f"{'i' if signed else 'u'}{1 if form.bits_stored <= 8 else 2}")


def offset_of(form: PixelFormat) -> int:
    """Give what is added to signed samples: half their range; 0 for unsigned ones."""
    return -form.lowest


def to_unsigned(raster: Raster) -> Samples:
    """Samples plus `offset_of`, in `narrow_type`, each row after the other in memory."""
    offset = offset_of(raster.format)
    shifted = raster.samples.astype(np.int32) + np.int32(offset) if offset else raster.samples
    return np.ascontiguousarray(shifted, dtype=narrow_type(raster.format))


def to_signed(decoded: Samples, form: PixelFormat) -> Samples:
    """Take `offset_of` away again, in a type that holds the difference."""
    offset = offset_of(form)
    return decoded.astype(np.int32) - np.int32(offset) if offset else decoded


def within(decoded: Samples, form: PixelFormat) -> Samples:
    """Decoded samples clipped to the range of their format.

    Irreversible codes overshoot at edges; where the code stream holds more bits than are stored, no library clips that
    for us. An original never lies outside, so the clip makes no error larger.
    """
    return np.clip(decoded, form.lowest, form.highest)
