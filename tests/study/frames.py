"""Frames for the tests of this room: fields of known covariance, and real frames of pydicom-data."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.frames import Frame, PixelFormat, Rescale
from tests.codecs.tile import real_frames
from tests.evaluation.frames import frame, origin

__all__ = ["GREY_12", "REAL", "markov_field", "markov_frame", "real_frame"]

GREY_12 = PixelFormat(16, 12, False, "MONOCHROME2")
REAL = tuple(real_frames.GREY_FILES)


def markov_field(shape: tuple[int, int], correlation: float, seed: int, spread: float = 200.0) -> npt.NDArray[Any]:
    """A separable first-order Gauss-Markov field: covariance spread**2 * correlation**(rows + columns apart)."""
    field = np.random.default_rng(seed).normal(size=shape)
    rest = np.sqrt(1 - correlation**2)
    for axis in (0, 1):
        turned = field if axis == 0 else field.T
        for row in range(1, len(turned)):
            turned[row] = correlation * turned[row - 1] + rest * turned[row]
        field = turned if axis == 0 else turned.T
    return spread * field


def markov_frame(side: int, correlation: float, seed: int = 11) -> Frame:
    """Such a field as a frame of 12 bits, all of it content."""
    samples = np.clip(np.rint(2048 + markov_field((side, side), correlation, seed)), 0, 4095).astype(np.uint16)
    return frame(samples, GREY_12, origin=origin(modality="CR"), unit="stored value", modality_transform=Rescale())


@lru_cache(maxsize=8)
def real_frame(name: str) -> Frame:
    """A real grey frame in stored values, radiographs in part; content is all that is not padding."""
    raster = real_frames.grey(name)
    return frame(
        raster.samples,
        raster.format,
        raster=raster,
        origin=origin(modality="OT"),
        unit="stored value",
        modality_transform=Rescale(),
    )
