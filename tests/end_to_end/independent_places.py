"""Where an image changed, its noise and its colours: written from docs/measures.md alone, with nothing of the package.

Patches, edge band and noise: the definitions of the sections "Where" and "Noise" in NumPy and SciPy. Colour difference:
the formula as scikit-image has it, on colours made here by IEC 61966-2-1 and CIE 15.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import numpy.typing as npt
import scipy.ndimage
import skimage.color

__all__ = ["Figure", "colour_difference", "edge_band", "noise", "place_of_largest", "worst_patches", "worst_windows"]

Array = npt.NDArray[Any]
Figure = float | int | str | None
"""What a column should hold; None where it should be empty."""

PATCH = 8
"""Rows and columns of the patch."""
WINDOW_MM = 10
"""Side of the larger patch."""
BAND = 4
"""Rows and columns within which the other side of the edge lies."""
TO_XYZ = np.array([[0.412453, 0.357580, 0.180423], [0.212671, 0.715160, 0.072169], [0.019334, 0.119193, 0.950227]])
"""Linear light of red, green and blue to X, Y and Z."""


def place_of_largest(values: Array, domain: Array, name: str) -> dict[str, Figure]:
    """Row and column of the largest value in the domain, the first row by row."""
    row, column = divmod(int(np.argmax(np.where(domain, values, -np.inf))), values.shape[1])
    return {f"{name}_row": row, f"{name}_column": column}


def _in_patches(values: Array, height: int, width: int) -> Array:
    """The complete patches on the grid from (0, 0): (patch rows, patch columns, pixels of a patch)."""
    down, across = values.shape[0] // height, values.shape[1] // width
    complete = values[: down * height, : across * width].reshape(down, height, across, width)
    return complete.swapaxes(1, 2).reshape(down, across, height * width)


def _rmse_of_patches(error: Array, content: Array, height: int, width: int) -> Array:
    """RMSE over the content of each patch; not-a-number where less than half of it is content."""
    inside = _in_patches(content, height, width)
    squares = np.where(inside, _in_patches(error, height, width) ** 2, 0).sum(axis=2)
    counts = inside.sum(axis=2)
    return np.where(2 * counts >= height * width, np.sqrt(squares / np.maximum(counts, 1)), np.nan)


def _worst(of_patches: Array, height: int, width: int, name: str) -> dict[str, Figure]:
    if np.isnan(of_patches).all():
        return dict.fromkeys((f"{name}_rmse", f"{name}_row", f"{name}_column"))
    row, column = divmod(int(np.nanargmax(of_patches)), of_patches.shape[1])
    figure = float(of_patches[row, column])
    return {f"{name}_rmse": figure, f"{name}_row": row * height, f"{name}_column": column * width}


def worst_patches(error: Array, content: Array, drawn: dict[str, Array]) -> dict[str, Figure]:
    """Worst patch, median and 95th percentile, and the worst one that no drawn region touches.

    `drawn`: label of each region -> where it covers any share of a pixel.
    """
    of_patches = _rmse_of_patches(error, content, PATCH, PATCH)
    figures = _worst(of_patches, PATCH, PATCH, "worst_patch")
    evaluated = of_patches[~np.isnan(of_patches)]
    figures["patch_median_rmse"] = float(np.median(evaluated))
    figures["patch_p95_rmse"] = float(np.percentile(evaluated, 95))
    touched = {label: _in_patches(covers, PATCH, PATCH).max(axis=2) for label, covers in drawn.items()}
    worst = divmod(int(np.nanargmax(of_patches)), of_patches.shape[1])
    figures["worst_patch_region"] = next((label for label, patches in touched.items() if patches[worst]), "")
    clear = np.where(np.any([*touched.values(), np.zeros(of_patches.shape, bool)], axis=0), np.nan, of_patches)
    return figures | _worst(clear, PATCH, PATCH, "worst_outside")


def worst_windows(error: Array, content: Array, spacing_mm: tuple[float, float] | None) -> dict[str, Figure]:
    """Worst patch of 10 mm on each side."""
    height, width = (round(WINDOW_MM / each) for each in spacing_mm) if spacing_mm else (0, 0)
    if height * width <= PATCH * PATCH:
        return dict.fromkeys(("window_mm", "worst_window_rmse", "worst_window_row", "worst_window_column"))
    of_windows = _rmse_of_patches(error, content, height, width)
    return {"window_mm": WINDOW_MM} | _worst(of_windows, height, width, "worst_window")


def edge_band(error: Array, content: Array, padding: Array) -> dict[str, Figure]:
    """Errors within four rows and columns of the other side of the content's edge."""
    near_content, near_rest = (
        scipy.ndimage.maximum_filter(side, 2 * BAND + 1, mode="constant") for side in (content, ~content)
    )
    band = near_content & near_rest & ~padding
    if not band.any():
        return dict.fromkeys(("edge_band_rmse", "edge_band_max", "edge_band_row", "edge_band_column"))
    figures: dict[str, Figure] = {
        "edge_band_rmse": math.sqrt(np.mean(error[band] ** 2)),
        "edge_band_max": float(np.abs(error[band]).max()),
    }
    return figures | place_of_largest(np.abs(error), band, "edge_band")


def noise(before: Array, after: Array, content: Array, step: float) -> dict[str, Figure]:
    """Noise SD before and after, pooled over the patches that are wholly content and hold no structure."""
    values = _in_patches(before, PATCH, PATCH)
    whole = _in_patches(content, PATCH, PATCH).min(axis=2)
    whole[whole] = _residual_variances(values[whole]) > 1e-9 / 61 * step**2
    variances = _residual_variances(values[whole])
    figures: dict[str, Figure] = dict.fromkeys(
        ("noise_sd", "noise_sd_after", "noise_sd_kept_percent", "rmse_over_noise")
    )
    if not variances.size:
        return figures
    deviations = np.sqrt(variances)
    places = deviations <= 1.5 * _half_sample_mode(np.sort(deviations))
    sd = math.sqrt(variances[places].mean())
    if places.sum() < 16 or sd < step:
        return figures
    sd_after = math.sqrt(_residual_variances(_in_patches(after, PATCH, PATCH)[whole][places]).mean())
    rmse = math.sqrt(np.mean((after - before)[content] ** 2))
    return {
        "noise_sd": sd,
        "noise_sd_after": sd_after,
        "noise_sd_kept_percent": 100 * sd_after / sd,
        "rmse_over_noise": rmse / sd,
    }


def _residual_variances(patches: Array) -> Array:
    """Sum of squared residuals about the least-squares plane, over 64 - 3, of each patch."""
    rows, columns = np.indices((PATCH, PATCH)).reshape(2, -1)
    plane = np.column_stack([np.ones(PATCH * PATCH), rows, columns])
    coefficients = np.linalg.lstsq(plane, patches.T, rcond=None)[0]
    return np.asarray(((patches.T - plane @ coefficients) ** 2).sum(axis=0) / (PATCH * PATCH - 3))


def _half_sample_mode(ordered: Array) -> float:
    """Halve a sorted sample again and again to its narrowest half, the first of equal ones."""
    while ordered.size > 2:
        half = math.ceil(ordered.size / 2)
        widths = ordered[half - 1 :] - ordered[: ordered.size - half + 1]
        start = int(np.argmin(widths))
        ordered = ordered[start : start + half]
    return float(ordered.mean())


def colour_difference(before: Array, after: Array, content: Array) -> dict[str, Figure]:
    """CIEDE2000 over content, of samples of 8 bits."""
    differences = skimage.color.deltaE_ciede2000(_lab(before), _lab(after))[content]
    return {
        "ciede2000_mean": float(differences.mean()),
        "ciede2000_p95": float(np.percentile(differences, 95)),
        "ciede2000_max": float(differences.max()),
    }


def _lab(samples: Array) -> Array:
    """CIE L*a*b* of sRGB samples (IEC 61966-2-1) under D65, with the constants that docs/measures.md gives."""
    coded = samples / 255
    linear = np.where(coded <= 0.04045, coded / 12.92, ((coded + 0.055) / 1.055) ** 2.4)
    xyz = linear @ TO_XYZ.T / [0.95047, 1.0, 1.08883]
    root = np.where(xyz > 0.008856, np.cbrt(xyz), 7.787 * xyz + 16 / 116)
    x, y, z = np.moveaxis(root, -1, 0)
    return np.stack([116 * y - 16, 500 * (x - y), 200 * (y - z)], axis=-1)
