"""The grid on which quantiser steps lie, and the step of each coefficient."""

from __future__ import annotations

import bisect
from functools import lru_cache
from math import isqrt

import numpy as np
import numpy.typing as npt

__all__ = [
    "ANNEX_K_CHROMINANCE",
    "ANNEX_K_LUMINANCE",
    "FINEST_STEP",
    "STEPS",
    "STEPS_PER_OCTAVE",
    "coefficient_steps",
    "nearest_step",
    "step_at",
    "weights",
]

STEPS_PER_OCTAVE = 128
STEPS = 25 * STEPS_PER_OCTAVE + 1
"""Steps on the grid: from 1/8 to 2**22 stored units, in ratios of 2**(1/128)."""
FINEST_STEP = 0.125
STEP_GRID = 1 << 14
"""Steps in coefficient units are multiples of one over this, so that a level times its step is exact."""

ANNEX_K_LUMINANCE = (
    (16, 11, 10, 16, 24, 40, 51, 61),
    (12, 12, 14, 19, 26, 58, 60, 55),
    (14, 13, 16, 24, 40, 57, 69, 56),
    (14, 17, 22, 29, 51, 87, 80, 62),
    (18, 22, 37, 56, 68, 109, 103, 77),
    (24, 35, 55, 64, 81, 104, 113, 92),
    (49, 64, 78, 87, 103, 121, 120, 101),
    (72, 92, 95, 98, 112, 100, 103, 99),
)
"""ITU-T T.81 table K.1."""
ANNEX_K_CHROMINANCE = (
    (17, 18, 24, 47, 99, 99, 99, 99),
    (18, 21, 26, 66, 99, 99, 99, 99),
    (24, 26, 56, 99, 99, 99, 99, 99),
    (47, 66, 99, 99, 99, 99, 99, 99),
    *((99,) * 8,) * 4,
)
"""ITU-T T.81 table K.2."""


@lru_cache(maxsize=1)
def _steps() -> tuple[float, ...]:
    """All steps; mantissas are floor(2**32 * 2**(k/128)) / 2**32, by whole-number roots."""
    mantissas = []
    for k in range(STEPS_PER_OCTAVE):
        root = 1 << (k + 32 * STEPS_PER_OCTAVE)
        for _ in range(7):
            root = isqrt(root)
        mantissas.append(root / 2**32)
    octaves = range(STEPS // STEPS_PER_OCTAVE + 1)
    return tuple(FINEST_STEP * 2**octave * mantissa for octave in octaves for mantissa in mantissas)[:STEPS]


def step_at(index: int) -> float:
    """Step of an index from 0 (`FINEST_STEP`) to `STEPS` - 1, in stored units."""
    return _steps()[index]


def nearest_step(step: float) -> int:
    """Index of the step on the grid that is nearest to any positive step, by difference; the finer on a tie."""
    steps = _steps()
    above = bisect.bisect_left(steps, step)
    if above == 0:
        return 0
    if above == STEPS:
        return STEPS - 1
    return above if steps[above] - step < step - steps[above - 1] else above - 1


@lru_cache(maxsize=8)
def weights(weighting: str, size: int, chroma: bool) -> npt.NDArray[np.float64]:
    """Factor on the step of each coefficient, (size, size), row frequency first; 1 for the constant.

    ``perceptual`` takes T.81 table K.1 (K.2 for chroma) over its first entry, read at the frequencies of the tile:
    every second or each entry for 4 and 8, linear interpolation between entries for larger tiles.
    """
    if weighting == "flat":
        return np.ones((size, size))
    table = np.array(ANNEX_K_CHROMINANCE if chroma else ANNEX_K_LUMINANCE, dtype=np.float64)
    at = np.arange(size) * 8 / size
    low = np.minimum(at.astype(int), 7)
    high = np.minimum(low + 1, 7)
    share = at - low
    rows = table[low] * (1 - share)[:, None] + table[high] * share[:, None]
    factors: npt.NDArray[np.float64] = (rows[:, low] * (1 - share) + rows[:, high] * share) / table[0, 0]
    return factors


def coefficient_steps(
    step: float, scale: float, weight: npt.NDArray[np.float64], order: npt.NDArray[np.int32]
) -> npt.NDArray[np.float64]:
    """Steps of one plane in scan order, in coefficient units (1/256), multiples of 1/`STEP_GRID`.

    Parameters
    ----------
    step
        In stored units.
    scale
        Length of the plane's colour axis (see `planes`), 1 for grey.
    weight
        (size, size), of `weights`.
    order
        Of `transform.scan_order`.
    """
    flat = weight.ravel()[order] * (step * scale * 256.0)
    steps: npt.NDArray[np.float64] = np.floor(flat * STEP_GRID + 0.5) / STEP_GRID
    return steps
