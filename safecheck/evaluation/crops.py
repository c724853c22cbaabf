"""Pictures of a place: original, recompressed and signed difference around one patch."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.evaluation.original import Original
from safecheck.evaluation.treatment import Treated
from safecheck.frames import DisplayWindow, Samples, Values
from safecheck.measures.display import render

__all__ = ["CROP_SIDE", "CropArrays", "take_crop"]

CROP_SIDE = 96
"""Rows and columns of a crop, fewer in a smaller frame."""


@dataclass(frozen=True, slots=True, eq=False)
class CropArrays:
    """What a crop shows."""

    original: npt.NDArray[np.float64]
    """Display levels 0 to 255, (rows, columns) or (rows, columns, 3)."""
    recompressed: npt.NDArray[np.float64]
    difference: Values
    """After less before in the frame's unit."""
    window: str
    """Display window in words."""
    first_row: int
    first_column: int


def take_crop(original: Original, treated: Treated, row: int, column: int, size: int) -> CropArrays:
    """Cut a square around a patch, moved inside the frame where it would reach beyond.

    Parameters
    ----------
    original, treated
        Before and after.
    row, column
        First row and column of the patch.
    size
        Rows and columns of the patch.
    """
    rows, columns = original.values.shape
    first_row = _first(row + size // 2, rows)
    first_column = _first(column + size // 2, columns)
    inside = np.s_[first_row : first_row + CROP_SIDE, first_column : first_column + CROP_SIDE]
    return CropArrays(
        original=_levels(original, original.frame.raster.samples, original.values)[inside],
        recompressed=_levels(original, treated.samples, treated.values)[inside],
        difference=(treated.values - original.values)[inside],
        window=_in_words(original),
        first_row=first_row,
        first_column=first_column,
    )


def _first(centre: int, length: int) -> int:
    """First row or column of a crop about a centre."""
    return max(0, min(centre - CROP_SIDE // 2, length - CROP_SIDE))


def _levels(original: Original, samples: Samples, values: Values) -> npt.NDArray[Any]:
    """Display levels of a whole frame: colour as it is stored, grey at the first window."""
    if samples.ndim == 3:
        return samples.astype(np.float64) * (255.0 / original.frame.raster.format.highest)
    if not original.baseline.windows:
        return np.full(values.shape, 128.0)
    return render(values, original.baseline.windows[0].rendering)


def _in_words(original: Original) -> str:
    """The window shown."""
    if not original.displays:
        return "one grey: constant content"
    display = original.displays[0]
    if isinstance(display, DisplayWindow):
        return f"{display.label} (centre {display.centre:g}, width {display.width:g} {original.frame.unit})"
    return display.label
