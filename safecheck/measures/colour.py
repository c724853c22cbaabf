"""Colour difference: CIEDE2000, with samples assumed to be sRGB (IEC 61966-2-1) under D65.

CIEDE2000: CIE 142-2001; G. Sharma, W. Wu, E. N. Dalal, Color Research and Application 30(1), 2005, 21-30.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.measures.planes import Mask, Vector, check_mask
from safecheck.measures.selection import percentile

__all__ = ["ColourBaseline", "ColourFigures", "measure_colour", "prepare_colour", "to_lab"]

_RGB = npt.NDArray[np.integer[Any]]


@dataclass(frozen=True, slots=True, eq=False)
class ColourBaseline:
    """What depends on the original alone."""

    samples: npt.NDArray[np.uint16]
    """(rows, columns, 3), stored levels."""
    lab: npt.NDArray[np.float64]
    """(rows, columns, 3): L*, a*, b*."""
    light: Vector
    """Linear light of each stored level."""
    content: Mask
    pixels: int


@dataclass(frozen=True, slots=True)
class ColourFigures:
    """Errors of the channels over the frame, and CIEDE2000 over content; None where there is none."""

    rmse_channels: float | None = None
    """Root mean square error of all samples of all channels, in stored levels."""
    max_channels: float | None = None
    """Largest absolute error of any sample of any channel, in stored levels."""

    ciede2000_mean: float | None = None
    ciede2000_p95: float | None = None
    ciede2000_max: float | None = None


def prepare_colour(before: _RGB, content: Mask, highest: int) -> ColourBaseline:
    """Turn the original into L*a*b*.

    Parameters
    ----------
    before
        (rows, columns, 3), stored RGB levels 0 to `highest`.
    content
        (rows, columns), boolean.
    highest
        Level of full light, 1 to 65535.

    Raises
    ------
    ValueError
        If the shapes differ, or a level lies out of range.
    """
    samples = _levels(before, before.shape, highest)
    content = check_mask(content, before.shape[:2])
    light = _linear_light(highest)
    return ColourBaseline(samples, _lab(samples, light), light, content, int(np.count_nonzero(content)))


def measure_colour(baseline: ColourBaseline, after: _RGB) -> ColourFigures:
    """Measure the colour difference of one candidate.

    Parameters
    ----------
    baseline
        Of the original.
    after
        (rows, columns, 3), stored RGB levels.

    Raises
    ------
    ValueError
        If the shape is not that of the original, or a level lies out of range.
    """
    from safecheck.measures.colour_kernels import fill_differences

    samples = _levels(after, baseline.samples.shape, baseline.light.size - 1)
    errors = samples.astype(np.float64) - baseline.samples
    of_channels = float(np.sqrt(np.mean(errors * errors))), float(np.abs(errors).max())
    if baseline.pixels == 0:
        return ColourFigures(*of_channels)
    found = np.empty(baseline.pixels)
    fill_differences(baseline.samples, baseline.lab, samples, baseline.light, baseline.content, found)
    return ColourFigures(*of_channels, float(found.mean()), percentile(found, 95), float(found.max()))


def to_lab(samples: _RGB, highest: int) -> npt.NDArray[np.float64]:
    """L*a*b* of stored RGB levels, (rows, columns, 3)."""
    return _lab(_levels(samples, samples.shape, highest), _linear_light(highest))


def _levels(samples: _RGB, shape: tuple[int, ...], highest: int) -> npt.NDArray[np.uint16]:
    """Stored levels as the kernels take them; a level out of range would be read past the table."""
    if samples.ndim != 3 or samples.shape[2] != 3 or samples.shape != shape or samples.size == 0:
        raise ValueError(f"expected RGB samples of shape {shape}, found {samples.shape}")
    if samples.min() < 0 or samples.max() > highest:
        raise ValueError(f"a level lies outside 0 to {highest}")
    return np.ascontiguousarray(samples, dtype=np.uint16)


def _linear_light(highest: int) -> Vector:
    """Linear light of each level (IEC 61966-2-1)."""
    if not 1 <= highest <= 65535:
        raise ValueError(f"the level of full light is {highest}, expected 1 to 65535")
    share = np.arange(highest + 1) / highest
    return np.where(share > 0.04045, ((share + 0.055) / 1.055) ** 2.4, share / 12.92)


def _lab(samples: npt.NDArray[np.uint16], light: Vector) -> npt.NDArray[np.float64]:
    """L*a*b* of every pixel."""
    from safecheck.measures.colour_kernels import fill_lab

    lab = np.empty(samples.shape)
    fill_lab(samples, light, lab)
    return lab
