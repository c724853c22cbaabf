"""Figures of one drawn region: every pixel counts with the share of it that the region covers."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from safecheck.measures.planes import Mask, Places, Plane, Vector, check_mask, check_plane
from safecheck.measures.pointwise import PERCENTILE_FROM
from safecheck.measures.selection import percentile

__all__ = [
    "LEAST_COVERAGE",
    "ContrastFigures",
    "RegionBaseline",
    "RegionFigures",
    "average_map",
    "measure_contrast",
    "measure_region",
    "prepare_region",
]

LEAST_COVERAGE = 1e-9
"""A smaller share is rounding of the coverage, not a piece of the region."""


@dataclass(frozen=True, slots=True, eq=False)
class RegionBaseline:
    """What depends on the original alone: the pixels that the region covers, as lists in order."""

    shape: tuple[int, int]
    """Rows and columns of the frame."""
    places: Places
    """Row times columns plus column."""
    weights: Vector
    """Share of each that is covered, above 0 to 1."""
    inside: Places
    """Places of pixels whose centre is inside."""
    before: Vector
    """Values of the original at `places`."""
    before_inside: Vector
    """Values of the original at `inside`."""


@dataclass(frozen=True, slots=True)
class RegionFigures:
    """Figures of one region, as the columns of regions.parquet name them; None where it covers no such pixel."""

    bias: float | None = None
    rmse: float | None = None
    mean_absolute: float | None = None
    max: float | None = None
    """Over pixels whose centre is inside."""
    max_row: int | None = None
    max_column: int | None = None
    p999: float | None = None
    """Over pixels whose centre is inside; None under 1,000 of them."""
    mean_before: float | None = None
    mean_after: float | None = None
    sd_before: float | None = None
    sd_after: float | None = None


@dataclass(frozen=True, slots=True)
class ContrastFigures:
    """A target against its background; None where the background has no spread or covers nothing."""

    cnr_before: float | None = None
    cnr_after: float | None = None
    noise_removed_percent: float | None = None
    """Share of the background's standard deviation that is gone; below 0 where it grew."""


def prepare_region(before: Plane, coverage: Plane, inside: Mask, padding: Mask | None = None) -> RegionBaseline:
    """Pick the pixels that a region covers.

    Parameters
    ----------
    before
        (rows, columns), in the frame's unit.
    coverage
        (rows, columns), 0 to 1; below `LEAST_COVERAGE` a pixel takes no part.
    inside
        (rows, columns), boolean: pixels whose centre is inside.
    padding
        (rows, columns), boolean: pixels that take no part.

    Raises
    ------
    ValueError
        If the shapes differ, or a coverage lies outside 0 to 1.
    """
    before = check_plane(before)
    coverage = check_plane(coverage, before.shape)
    inside = check_mask(inside, before.shape)
    if not (coverage.min() >= 0 and coverage.max() <= 1 + 1e-12):
        raise ValueError("a coverage lies outside 0 to 1")
    native = np.ones(before.shape, np.bool_) if padding is None else ~check_mask(padding, before.shape)
    places = np.flatnonzero((coverage > LEAST_COVERAGE) & native)
    centres = np.flatnonzero(inside & native)
    flat = before.ravel()
    shape = (before.shape[0], before.shape[1])
    return RegionBaseline(shape, places, coverage.ravel()[places], centres, flat[places], flat[centres])


def measure_region(baseline: RegionBaseline, after: Plane) -> RegionFigures:
    """Measure one candidate in one region.

    The standard deviation is that of an area, not of a sample: sqrt(sum w (x - mean)^2 / sum w).

    Raises
    ------
    ValueError
        If the shape is not that of the original.
    """
    from safecheck.measures.pointwise_kernels import accumulate_list

    flat = check_plane(after, baseline.shape).ravel()
    largest, row, column, p999 = _largest(baseline, flat)
    values = flat[baseline.places]
    weight, total, absolute, square = accumulate_list(values - baseline.before, baseline.weights)
    if not weight > 0:
        return RegionFigures(max=largest, max_row=row, max_column=column, p999=p999)
    mean_before, sd_before = _mean_and_sd(baseline.before, baseline.weights)
    mean_after, sd_after = _mean_and_sd(values, baseline.weights)
    return RegionFigures(
        bias=total / weight,
        rmse=math.sqrt(square / weight),
        mean_absolute=absolute / weight,
        max=largest,
        max_row=row,
        max_column=column,
        p999=p999,
        mean_before=mean_before,
        mean_after=mean_after,
        sd_before=sd_before,
        sd_after=sd_after,
    )


def measure_contrast(target: RegionFigures, background: RegionFigures) -> ContrastFigures:
    """CNR = |mean of target - mean of background| / SD of background, before and after, and the noise removed.

    A rise of CNR shows only that the background was smoothed: it never stands without the noise removed.
    """
    removed = None
    if background.sd_before and background.sd_after is not None:
        removed = 100 * (1 - background.sd_after / background.sd_before)
    return ContrastFigures(
        _cnr(target.mean_before, background.mean_before, background.sd_before),
        _cnr(target.mean_after, background.mean_after, background.sd_after),
        removed,
    )


def average_map(baseline: RegionBaseline, picture: Plane) -> float | None:
    """Mean of a map over pixels whose centre is inside and where the map is defined (not NaN); None of none."""
    found = check_plane(picture, baseline.shape).ravel()[baseline.inside]
    found = found[~np.isnan(found)]
    return float(found.mean()) if found.size else None


def _largest(baseline: RegionBaseline, flat: Vector) -> tuple[float | None, int | None, int | None, float | None]:
    """Largest absolute error of pixels whose centre is inside, its place, and the 99.9th percentile."""
    if baseline.inside.size == 0:
        return None, None, None, None
    sizes = np.abs(flat[baseline.inside] - baseline.before_inside)
    at = int(sizes.argmax())
    row, column = divmod(int(baseline.inside[at]), baseline.shape[1])
    p999 = percentile(sizes, 99.9) if sizes.size >= PERCENTILE_FROM else None
    return float(sizes[at]), row, column, p999


def _mean_and_sd(values: Vector, weights: Vector) -> tuple[float, float]:
    """Weighted mean, and standard deviation about it."""
    from safecheck.measures.pointwise_kernels import accumulate_list

    # About the first value, so that a large constant costs no digits.
    weight, total, _, _ = accumulate_list(values - values[0], weights)
    mean = float(values[0] + total / weight)
    _, _, _, square = accumulate_list(values - mean, weights)
    return mean, math.sqrt(square / weight)


def _cnr(target: float | None, background: float | None, deviation: float | None) -> float | None:
    """Contrast over noise, or None without either."""
    if target is None or background is None or not deviation:
        return None
    return abs(target - background) / deviation
