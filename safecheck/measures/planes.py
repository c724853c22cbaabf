"""The arrays that measures take, and the checks that keep wrong ones out of compiled code."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

__all__ = ["Mask", "Places", "Plane", "Vector", "check_mask", "check_plane", "spread"]

Plane: TypeAlias = npt.NDArray[np.float64]
"""(rows, columns), values in one stated unit."""
Mask: TypeAlias = npt.NDArray[np.bool_]
"""(rows, columns); True where a pixel counts."""
Places: TypeAlias = npt.NDArray[np.int64]
"""One dimension: rows, columns, or row times columns plus column."""
Vector: TypeAlias = npt.NDArray[np.float64]
"""One dimension."""


def check_plane(values: npt.NDArray[Any], shape: tuple[int, ...] | None = None) -> Plane:
    """Return values as a C-contiguous float64 plane, without copying one that already is.

    Raises
    ------
    ValueError
        If the array has not two dimensions of at least one pixel, or not the shape asked for.
    """
    if values.ndim != 2 or values.size == 0:
        raise ValueError(f"expected rows and columns of values, found an array of shape {values.shape}")
    if shape is not None and values.shape != shape:
        raise ValueError(f"expected an array of shape {shape}, found {values.shape}")
    return np.ascontiguousarray(values, dtype=np.float64)


def check_mask(mask: npt.NDArray[Any], shape: tuple[int, ...]) -> Mask:
    """Return a C-contiguous mask.

    Raises
    ------
    ValueError
        If the array is not boolean or not of that shape.
    """
    if mask.dtype != np.bool_ or mask.shape != shape:
        raise ValueError(f"expected a boolean mask of shape {shape}, found {mask.dtype} of shape {mask.shape}")
    return np.ascontiguousarray(mask)


def spread(mask: Mask, reach: int) -> Mask:
    """Pixels within `reach` rows and columns of a True one, itself included."""
    tall = mask.copy()
    for step in range(1, min(reach, mask.shape[0] - 1) + 1):
        tall[step:] |= mask[:-step]
        tall[:-step] |= mask[step:]
    wide = tall.copy()
    for step in range(1, min(reach, mask.shape[1] - 1) + 1):
        wide[:, step:] |= tall[:, :-step]
        wide[:, :-step] |= tall[:, step:]
    return wide
