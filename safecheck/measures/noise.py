"""Local noise: the standard deviation about a plane in patches of 8x8 pixels that hold no edge.

Places are chosen in the original and used again in every candidate. The level of noise is taken where most patches
agree (mode of the local standard deviation: Christianson et al., AJR 205, 2015, W93-W99; mode of a sample by halving:
Robertson and Cryer, JASA 69, 1974, 1012-1016); the plane, the bound on edges and the pooling are our own choice.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from safecheck.measures.local import PATCH_SIDE as _SIDE
from safecheck.measures.local import count_patches
from safecheck.measures.planes import Mask, Places, Plane, Vector, check_mask, check_plane

__all__ = ["EDGE_OVER_MODE", "LEAST_PATCHES", "NoisePlaces", "choose_noise_places", "half_sample_mode", "measure_noise"]

EDGE_OVER_MODE = 1.5
"""A patch whose standard deviation exceeds the mode this many times holds an edge or structure."""
LEAST_PATCHES = 16
"""With fewer places noise is not evaluated."""
_DEGREES = 61


@dataclass(frozen=True, slots=True, eq=False)
class NoisePlaces:
    """Patches of 8x8 pixels in which noise is measured."""

    rows: Places
    """First row of each."""
    columns: Places
    """First column of each."""
    shape: tuple[int, int]
    """Rows and columns of the frame."""
    noise_sd: float
    """Of the original, in its unit."""


def choose_noise_places(before: Plane, content: Mask, stored_unit: float) -> NoisePlaces | None:
    """Choose the patches in which noise is measured, from the original alone.

    Patches of the grid of 8x8 pixels from (0, 0) that are wholly content and not constant; of these, those whose
    standard deviation about their plane is at most `EDGE_OVER_MODE` times its mode.

    Parameters
    ----------
    before
        (rows, columns), in the frame's unit.
    content
        (rows, columns), boolean.
    stored_unit
        Size of one stored step in the unit, above 0: noise below it is not evaluated.

    Returns
    -------
    NoisePlaces or None
        None with fewer than `LEAST_PATCHES` places, or where the noise is below one stored step.
    """
    before = check_plane(before)
    rows, columns = _content_patches(check_mask(content, before.shape))
    squares = _plane_residuals(before, rows, columns)
    kept = squares > 1e-9 * stored_unit**2
    if np.count_nonzero(kept) < LEAST_PATCHES:
        return None
    rows, columns, squares = rows[kept], columns[kept], squares[kept]
    deviations = np.sqrt(squares / _DEGREES)
    flat = deviations <= EDGE_OVER_MODE * half_sample_mode(deviations)
    noise_sd = _pooled(squares[flat])
    if np.count_nonzero(flat) < LEAST_PATCHES or noise_sd < stored_unit:
        return None
    shape = (before.shape[0], before.shape[1])
    return NoisePlaces(rows[flat].copy(), columns[flat].copy(), shape, noise_sd)


def measure_noise(places: NoisePlaces, after: Plane) -> float:
    """Noise standard deviation of a candidate at the places chosen in the original, in its unit.

    Raises
    ------
    ValueError
        If the shape is not that of the original.
    """
    after = check_plane(after, places.shape)
    return _pooled(_plane_residuals(after, places.rows, places.columns))


def half_sample_mode(values: Vector) -> float:
    """Mode of a sample: the half with the least spread, again and again, until two or fewer remain.

    Parameters
    ----------
    values
        At least one, finite.
    """
    ordered = np.sort(values)
    while ordered.size > 2:
        half = (ordered.size + 1) // 2
        spreads = ordered[half - 1 :] - ordered[: ordered.size - half + 1]
        start = int(spreads.argmin())
        ordered = ordered[start : start + half]
    return float(ordered.mean())


def _content_patches(content: Mask) -> tuple[Places, Places]:
    """First rows and columns of the complete patches that are wholly content."""
    rows, columns = np.nonzero(count_patches(content, _SIDE, _SIDE) == _SIDE * _SIDE)
    return rows * _SIDE, columns * _SIDE


def _plane_residuals(values: Plane, rows: Places, columns: Places) -> Vector:
    """Sum of squared residuals of each patch."""
    from safecheck.measures.noise_kernels import fit_planes

    squares = np.empty(rows.size)
    fit_planes(values, rows, columns, squares)
    return squares


def _pooled(squares: Vector) -> float:
    """Root of the mean variance, 61 degrees of freedom a patch."""
    return math.sqrt(float(squares.sum()) / (_DEGREES * squares.size)) if squares.size else 0.0
