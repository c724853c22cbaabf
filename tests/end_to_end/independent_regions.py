"""Figures of drawn regions: written from docs/regions.md and docs/measures.md alone, with nothing of the package.

Share of a pixel inside: outlines are cut by the pixel's four sides one after the other (I. E. Sutherland,
G. W. Hodgman, Communications of the ACM 17, 1974, 32-42) and measured by the trapezoidal rule of surveyors. What an
ellipse itself covers, and not the polygon that stands for it, is integrated along its rows by Gauss-Legendre quadrature
between the places where the outline meets the pixel's sides. Neither is quick.
"""

from __future__ import annotations

import itertools
import json
import math
import operator
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from tests.end_to_end.independent_places import Array, Figure, place_of_largest

__all__ = ["Drawn", "coverage_of_ellipse", "measure_region", "read_regions"]

Point = tuple[float, float]
"""Row and column."""
ELLIPSE_VERTICES = 1440
NODES, WEIGHTS = np.polynomial.legendre.leggauss(24)


@dataclass(frozen=True, eq=False)
class Drawn:
    """A region on frames of one size."""

    name: str
    label: str
    role: str
    background: str
    coverage: Array
    """Share of each pixel inside."""
    centres: Array
    """Whether the centre of each pixel is inside."""


def read_regions(path: Path, shape: tuple[int, int]) -> dict[str, Drawn]:
    """Name -> region, of those drawn on frames of this size."""
    found = {}
    for region in json.loads(path.read_text(encoding="utf-8"))["regions"]:
        parts = [
            part["shape"]
            for part in region["parts"]
            if (part["placement"]["rows"], part["placement"]["columns"]) == shape
        ]
        if parts:
            coverage = np.max([_coverage(part, shape) for part in parts], axis=0)
            centres = np.any([_centres(part, shape) for part in parts], axis=0)
            words = (region["name"], region["label"], region["role"], region.get("background", ""))
            found[region["name"]] = Drawn(*words, coverage, centres)
    return found


def _axes(shape: dict[str, Any]) -> tuple[Array, Array]:
    """Half axes along height and along width, each as (row, column)."""
    angle = math.radians(shape.get("angle_degrees", 0))
    down = np.array([math.cos(angle), -math.sin(angle)]) * shape["height"] / 2
    across = np.array([math.sin(angle), math.cos(angle)]) * shape["width"] / 2
    return down, across


def _rings(shape: dict[str, Any]) -> list[list[Point]]:
    """Rings of a polygon, or the one of a rectangle or ellipse."""
    if shape["kind"] == "polygon":
        return [[(row, column) for row, column in ring] for ring in shape["outline"]]
    down, across = _axes(shape)
    corners = np.array([-down - across, -down + across, down + across, down - across])
    if shape["kind"] == "ellipse":
        step = 2 * math.pi / ELLIPSE_VERTICES
        angles = np.arange(ELLIPSE_VERTICES)[:, np.newaxis] * step
        corners = (np.cos(angles) * across + np.sin(angles) * down) * math.sqrt(step / math.sin(step))
    return [[(float(row), float(column)) for row, column in shape["centre"] + corners]]


def _bounds(shape: dict[str, Any]) -> tuple[Array, Array]:
    """Least and largest row and column."""
    points = np.concatenate([np.array(ring) for ring in _rings(shape)])
    return points.min(axis=0), points.max(axis=0)


def _pixels(shape: dict[str, Any], frame: tuple[int, int]) -> Iterator[tuple[int, int]]:
    """Yield the pixels of the frame that the shape may touch."""
    least, largest = _bounds(shape)
    rows, columns = (
        range(max(0, math.floor(low)), min(length, math.ceil(high) + 1))
        for low, high, length in zip(least, largest, frame, strict=True)
    )
    return itertools.product(rows, columns)


def _coverage(shape: dict[str, Any], frame: tuple[int, int]) -> Array:
    coverage = np.zeros(frame)
    rings = _rings(shape)
    for row, pixels in itertools.groupby(_pixels(shape, frame), operator.itemgetter(0)):
        strips = [_cut(ring, 0, row) for ring in rings]
        for _, column in pixels:
            areas = [abs(_area(_cut(strip, 1, column))) for strip in strips]
            coverage[row, column] = areas[0] - sum(areas[1:])
    return coverage


def coverage_of_ellipse(shape: dict[str, Any], frame: tuple[int, int]) -> Array:
    """Share of each pixel within the ellipse itself."""
    coverage = np.zeros(frame)
    for row, column in _pixels(shape, frame):
        coverage[row, column] = _area_of_ellipse(shape, row - 0.5, row + 0.5, column - 0.5, column + 0.5)
    return coverage


def _cut(ring: list[Point], axis: int, pixel: int) -> list[Point]:
    """The part of a ring within the row (axis 0) or column (axis 1) of a pixel."""
    for bound, sign in ((pixel - 0.5, 1), (pixel + 0.5, -1)):
        kept: list[Point] = []
        for first, second in zip(ring, ring[1:] + ring[:1], strict=True):
            depths = sign * (first[axis] - bound), sign * (second[axis] - bound)
            if depths[0] >= 0:
                kept.append(first)
            if (depths[0] >= 0) != (depths[1] >= 0):
                share = depths[0] / (depths[0] - depths[1])
                met = [start + share * (end - start) for start, end in zip(first, second, strict=True)]
                met[axis] = bound
                kept.append((met[0], met[1]))
        ring = kept
    return ring


def _area(ring: list[Point]) -> float:
    pairs = zip(ring, ring[1:] + ring[:1], strict=True)
    return sum((second[1] - first[1]) * (second[0] + first[0]) / 2 for first, second in pairs) if ring else 0.0


def _area_of_ellipse(shape: dict[str, Any], top: float, bottom: float, left: float, right: float) -> float:
    """Area of the pixel within the ellipse, its rows written as centre + half height times the sine of an angle."""
    down, across = _axes(shape)
    spread = np.outer(down, down) + np.outer(across, across)
    half_rows = math.sqrt(spread[0, 0])
    lean = spread[0, 1] / half_rows
    half_chord = math.sqrt(spread[1, 1] - lean**2)
    row, column = shape["centre"]
    start, end = (math.asin(max(-1.0, min(1.0, (side - row) / half_rows))) for side in (top, bottom))
    corners = {start, end}
    reach = math.hypot(lean, half_chord)
    for side, sign in itertools.product((left - column, right - column), (1, -1)):
        # lean sin(t) + sign half_chord cos(t) = side, the two ends of the chord
        if abs(side) < reach:
            phase, angle = math.atan2(sign * half_chord, lean), math.asin(side / reach)
            met = (angle - phase, math.pi - angle - phase)
            corners |= {turned for each in met for turned in (each, each - 2 * math.pi, each + 2 * math.pi)}
    area = 0.0
    for low, high in itertools.pairwise(sorted(each for each in corners if start <= each <= end)):
        angles = (low + high) / 2 + (high - low) / 2 * NODES
        middle, half = column + lean * np.sin(angles), half_chord * np.cos(angles)
        chords = np.minimum(middle + half, right) - np.maximum(middle - half, left)
        area += (high - low) / 2 * float(WEIGHTS @ (np.maximum(chords, 0) * half_rows * np.cos(angles)))
    return area


def _centres(shape: dict[str, Any], frame: tuple[int, int]) -> Array:
    inside = np.zeros(frame, bool)
    for pixel in _pixels(shape, frame):
        if shape["kind"] == "ellipse":
            place = np.linalg.solve(np.column_stack(_axes(shape)), np.array(pixel) - shape["centre"])
            inside[pixel] = place @ place <= 1
        else:
            inside[pixel] = sum(_crossings(pixel, ring) for ring in _rings(shape)) % 2 == 1
    return inside


def _crossings(pixel: tuple[int, int], ring: list[Point]) -> int:
    """How often a ray along the row meets the ring."""
    row, column = pixel
    return sum(
        (first[0] > row) != (second[0] > row)
        and first[1] + (row - first[0]) / (second[0] - first[0]) * (second[1] - first[1]) > column
        for first, second in zip(ring, ring[1:] + ring[:1], strict=True)
    )


def _mean_and_sd(values: Array, weights: Array) -> tuple[float, float]:
    mean = float((weights * values).sum() / weights.sum())
    return mean, math.sqrt((weights * (values - mean) ** 2).sum() / weights.sum())


def measure_region(
    before: Array,
    after: Array,
    padding: Array,
    drawn: Drawn,
    background: Drawn | None,
    pixel_mm2: float | None,
) -> dict[str, Figure]:
    """Columns of regions.csv that need neither window nor peak."""
    weights = np.where(padding, 0, drawn.coverage)
    centres = drawn.centres & ~padding
    error = after - before
    absolute = np.abs(error)
    area = float(drawn.coverage.sum())
    (mean_before, sd_before), (mean_after, sd_after) = (_mean_and_sd(each, weights) for each in (before, after))
    figures: dict[str, Figure] = {
        "label": drawn.label,
        "region_role": drawn.role,
        "background": drawn.background,
        "area_pixels": area,
        "area_mm2": None if pixel_mm2 is None else area * pixel_mm2,
        "bias": float((weights * error).sum() / weights.sum()),
        "rmse": math.sqrt((weights * error**2).sum() / weights.sum()),
        "mean_absolute": float((weights * absolute).sum() / weights.sum()),
        "max": float(absolute[centres].max()),
        "p999": float(np.percentile(absolute[centres], 99.9)) if centres.sum() >= 1000 else None,
        "mean_before": mean_before,
        "mean_after": mean_after,
        "sd_before": sd_before,
        "sd_after": sd_after,
    }
    return figures | place_of_largest(absolute, centres, "max") | _contrast(before, after, padding, drawn, background)


def _contrast(before: Array, after: Array, padding: Array, drawn: Drawn, background: Drawn | None) -> dict[str, Figure]:
    """Contrast and CNR against the background, with the share of its SD that is gone."""
    if background is None:
        names = ("contrast_before", "contrast_after", "cnr_before", "cnr_after", "noise_removed_percent")
        return dict.fromkeys(names)
    figures: dict[str, Figure] = {}
    deviations = []
    for values, when in ((before, "before"), (after, "after")):
        mean = _mean_and_sd(values, np.where(padding, 0, drawn.coverage))[0]
        other, deviation = _mean_and_sd(values, np.where(padding, 0, background.coverage))
        figures[f"contrast_{when}"] = mean - other
        figures[f"cnr_{when}"] = abs(mean - other) / deviation if deviation else None
        deviations.append(deviation)
    figures["noise_removed_percent"] = 100 * (1 - deviations[1] / deviations[0]) if deviations[0] else None
    return figures
