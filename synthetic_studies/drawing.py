"""Painting soft-edged shapes, in millimetres, on a grid of values."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import numpy.typing as npt

from synthetic_studies.truth import Grid

__all__ = ["Blob", "Canvas", "Ribbon", "Stroke", "smooth_line"]

Image = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Blob:
    """An ellipse whose outline may wave."""

    x_mm: float
    y_mm: float
    half_width_mm: float
    half_height_mm: float
    turned_deg: float = 0.0
    waves: tuple[tuple[int, float, float], ...] = ()
    """(waves around, relative height, phase)."""
    squareness: float = 2.0
    """Exponent of the superellipse."""

    @property
    def reach_mm(self) -> float:
        """No point of the outline is farther from the centre."""
        wave = sum(abs(height) for _, height, _ in self.waves)
        corner = 2 ** (0.5 - 1 / self.squareness)
        return max(self.half_width_mm, self.half_height_mm) * (1 + wave) * max(corner, 1.0)

    def grown(self, by_mm: float) -> Blob:
        """Give the same shape with each half axis longer by `by_mm`."""
        return Blob(
            self.x_mm,
            self.y_mm,
            max(self.half_width_mm + by_mm, 0.1),
            max(self.half_height_mm + by_mm, 0.1),
            self.turned_deg,
            self.waves,
            self.squareness,
        )

    def distance_mm(self, x_mm: Image, y_mm: Image) -> Image:
        """Distance outside the outline, about; negative inside."""
        turn = math.radians(self.turned_deg)
        along = (x_mm - self.x_mm) * math.cos(turn) + (y_mm - self.y_mm) * math.sin(turn)
        across = (y_mm - self.y_mm) * math.cos(turn) - (x_mm - self.x_mm) * math.sin(turn)
        power = self.squareness
        reached = (np.abs(along / self.half_width_mm) ** power + np.abs(across / self.half_height_mm) ** power) ** (
            1 / power
        )
        limit: Image = np.ones_like(reached)
        if self.waves:
            angle = np.arctan2(across / self.half_height_mm, along / self.half_width_mm)
            for count, height, phase in self.waves:
                limit = limit + height * np.cos(count * angle + phase)
        radius = np.hypot(along, across)
        scale = np.where(reached > 1e-6, radius / np.maximum(reached, 1e-6), self.half_height_mm)
        distance: Image = (reached - limit) * scale
        return distance


@dataclass(frozen=True, slots=True)
class Stroke:
    """A straight stroke with round ends."""

    x0_mm: float
    y0_mm: float
    x1_mm: float
    y1_mm: float
    radius_mm: float

    @property
    def x_mm(self) -> float:
        """Middle, along patient left."""
        return (self.x0_mm + self.x1_mm) / 2

    @property
    def y_mm(self) -> float:
        """Middle, along patient back."""
        return (self.y0_mm + self.y1_mm) / 2

    @property
    def reach_mm(self) -> float:
        """No point of the outline is farther from the middle."""
        return math.hypot(self.x1_mm - self.x0_mm, self.y1_mm - self.y0_mm) / 2 + self.radius_mm

    def grown(self, by_mm: float) -> Stroke:
        """Give the same stroke, thicker by `by_mm` on each side."""
        radius = max(self.radius_mm + by_mm, 0.1)
        return Stroke(self.x0_mm, self.y0_mm, self.x1_mm, self.y1_mm, radius)

    def distance_mm(self, x_mm: Image, y_mm: Image) -> Image:
        """Distance outside the outline; negative inside."""
        run_x, run_y = self.x1_mm - self.x0_mm, self.y1_mm - self.y0_mm
        length = max(run_x * run_x + run_y * run_y, 1e-9)
        share = np.clip(((x_mm - self.x0_mm) * run_x + (y_mm - self.y0_mm) * run_y) / length, 0, 1)
        distance: Image = np.hypot(x_mm - self.x0_mm - share * run_x, y_mm - self.y0_mm - share * run_y)
        return distance - self.radius_mm


@dataclass(frozen=True, slots=True)
class Ribbon:
    """A line through points, of one width or thinning from the first point to the last."""

    points_mm: tuple[tuple[float, float], ...]
    """(x, y), at least two."""
    radius_mm: float
    end_radius_mm: float | None = None

    @property
    def x_mm(self) -> float:
        """Middle of the box around it, along patient left."""
        return (min(x for x, _ in self.points_mm) + max(x for x, _ in self.points_mm)) / 2

    @property
    def y_mm(self) -> float:
        """Middle of the box around it, along patient back."""
        return (min(y for _, y in self.points_mm) + max(y for _, y in self.points_mm)) / 2

    @property
    def reach_mm(self) -> float:
        """No point of the outline is farther from the middle."""
        half = max(math.hypot(x - self.x_mm, y - self.y_mm) for x, y in self.points_mm)
        return half + max(self.radius_mm, self.end_radius_mm or 0.0)

    def grown(self, by_mm: float) -> Ribbon:
        """Give the same line, thicker by `by_mm` on each side."""
        end = self.radius_mm if self.end_radius_mm is None else self.end_radius_mm
        return Ribbon(self.points_mm, max(self.radius_mm + by_mm, 0.1), max(end + by_mm, 0.1))

    def strokes(self) -> list[Stroke]:
        """Give the straight strokes of which it consists, in order."""
        last = self.radius_mm if self.end_radius_mm is None else self.end_radius_mm
        radii = np.linspace(self.radius_mm, last, len(self.points_mm) - 1)
        lines = zip(pairwise(self.points_mm), radii, strict=True)
        return [Stroke(*start, *end, float(radius)) for (start, end), radius in lines]


def smooth_line(numbers: tuple[float, ...], shift_mm: float = 0.0) -> tuple[tuple[float, float], ...]:
    """Points of a smooth curve near x, y, x, y, ... moved back by `shift_mm`.

    Two rounds of corner cutting (Chaikin, Computer Graphics and Image Processing 1974;3:346, from memory).
    """
    points = np.array(numbers, dtype=np.float64).reshape(-1, 2) + np.array([0.0, shift_mm])
    for _ in range(2):
        first, second = points[:-1], points[1:]
        cut = np.stack([0.75 * first + 0.25 * second, 0.25 * first + 0.75 * second], axis=1).reshape(-1, 2)
        points = np.concatenate([points[:1], cut, points[-1:]])
    return tuple((float(x), float(y)) for x, y in points)


Shape = Blob | Stroke | Ribbon
Box = tuple[slice, slice]


def _overlap(inner: Box, outer: Box) -> tuple[Box, Box]:
    """Part of one box inside another, on the grid and counted from the corner of the other."""
    starts = [max(one.start, two.start) for one, two in zip(inner, outer, strict=True)]
    stops = [min(one.stop, two.stop) for one, two in zip(inner, outer, strict=True)]
    stops = [max(start, stop) for start, stop in zip(starts, stops, strict=True)]
    part = (slice(starts[0], stops[0]), slice(starts[1], stops[1]))
    corner = (outer[0].start, outer[1].start)
    place = (slice(starts[0] - corner[0], stops[0] - corner[0]), slice(starts[1] - corner[1], stops[1] - corner[1]))
    return part, place


def _span(middle: float, reach: float, size: int) -> slice:
    """Indices within reach of the middle, of those from 0 to size - 1."""
    start = min(max(0, math.floor(middle - reach)), size)
    return slice(start, max(start, min(size, math.ceil(middle + reach) + 1)))


class Canvas:
    """Values on a grid, with the strength of the texture that is laid over them later."""

    def __init__(self, grid: Grid, value: float) -> None:
        self.grid = grid
        self.values: Image = np.full((grid.rows, grid.columns), value)
        self.texture: Image = np.zeros((grid.rows, grid.columns))
        columns = np.arange(grid.columns, dtype=np.float64) - (grid.columns - 1) / 2
        rows = np.arange(grid.rows, dtype=np.float64) - (grid.rows - 1) / 2
        self.x_mm: Image = columns[None, :] * grid.spacing_mm
        self.y_mm: Image = rows[:, None] * grid.spacing_mm

    def box(self, shape: Shape, soft_mm: float) -> Box:
        """Rows and columns that a shape can touch; empty where it lies outside the grid."""
        row, column = self.grid.pixel(shape.x_mm, shape.y_mm)
        reach = (shape.reach_mm + soft_mm) / self.grid.spacing_mm + 1
        return _span(row, reach, self.grid.rows), _span(column, reach, self.grid.columns)

    def cover(self, shape: Shape, soft_mm: float = 0.0) -> tuple[Box, Image]:
        """Box of a shape and its coverage there, 0 to 1; the outline is a ramp at least one pixel wide."""
        box = self.box(shape, soft_mm)
        if not isinstance(shape, Ribbon):
            return box, self._ramp(shape, box, soft_mm)
        coverage: Image = np.zeros_like(self.values[box])
        for stroke in shape.strokes():
            part, place = _overlap(self.box(stroke, soft_mm), box)
            np.maximum(coverage[place], self._ramp(stroke, part, soft_mm), out=coverage[place])
        return box, coverage

    def _ramp(self, shape: Blob | Stroke, box: Box, soft_mm: float) -> Image:
        """Coverage within a box."""
        width = max(soft_mm, self.grid.spacing_mm)
        distance = shape.distance_mm(self.x_mm[:, box[1]], self.y_mm[box[0], :])
        coverage: Image = np.clip(0.5 - distance / width, 0.0, 1.0)
        return coverage

    def paint(
        self, shape: Shape, value: float, texture: float = 0.0, soft_mm: float = 0.0, strength: float = 1.0
    ) -> None:
        """Lay a shape over what is there."""
        box, coverage = self.cover(shape, soft_mm)
        coverage = coverage * strength
        self.values[box] += coverage * (value - self.values[box])
        self.texture[box] += coverage * (texture - self.texture[box])

    def add(self, shape: Shape, amount: float, soft_mm: float = 0.0) -> None:
        """Add to what is there, as an X-ray projection does."""
        box, coverage = self.cover(shape, soft_mm)
        self.values[box] += amount * coverage

    def raise_to(self, shape: Shape, amount: float, soft_mm: float = 0.0) -> None:
        """Bring what is there up to at least `amount` times the coverage."""
        box, coverage = self.cover(shape, soft_mm)
        np.maximum(self.values[box], amount * coverage, out=self.values[box])

    def add_dome(self, shape: Blob, amount: float, power: float = 0.5) -> None:
        """Add a thickness of `amount` at the middle, nothing at the outline; power 0.5 is an ellipsoid, 1 is softer."""
        box = self.box(shape, 0.0)
        distance = shape.distance_mm(self.x_mm[:, box[1]], self.y_mm[box[0], :])
        depth = np.clip(-distance / min(shape.half_width_mm, shape.half_height_mm), 0.0, 1.0)
        self.values[box] += amount * (depth * (2 - depth)) ** power

    def paint_where(self, coverage: Image, value: float, texture: float = 0.0) -> None:
        """Lay a value over the whole grid by a coverage of 0 to 1."""
        self.values += coverage * (value - self.values)
        self.texture += coverage * (texture - self.texture)
