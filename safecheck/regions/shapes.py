"""Shapes in a plane: geometry alone, nothing of pixels.

Coordinates are (along rows, along columns): (row, column) in pixels with pixel centres on whole numbers, or millimetres
along the same two directions from the origin of a plane. Every shape gives its boundary as rings of vertices.
"""

from __future__ import annotations

import math
from typing import Annotated, Literal, TypeAlias

import numpy as np
import numpy.typing as npt
from pydantic import Field, model_validator

from safecheck.documents import Document

__all__ = ["ELLIPSE_VERTICES", "Ellipse", "Point", "Polygon", "Rectangle", "Ring", "Shape", "signed_area"]

Point: TypeAlias = tuple[float, float]
Ring: TypeAlias = npt.NDArray[np.float64]
"""(n, 2) vertices of a closed ring; the last is joined to the first and does not repeat it."""

ELLIPSE_VERTICES = 1440
"""Vertices that stand for an ellipse: scaled to its area, they leave the boundary by less than 5e-6 of the axis."""

_Length = Annotated[float, Field(gt=0)]


class Rectangle(Document):
    """A rectangle, turned about its centre."""

    kind: Literal["rectangle"] = "rectangle"
    centre: Point
    height: _Length
    """Extent along rows before turning."""
    width: _Length
    """Extent along columns before turning."""
    angle_degrees: float = 0.0
    """From the direction in which columns grow towards that in which rows grow."""

    def rings(self) -> list[Ring]:
        """Boundary."""
        half = np.array([self.height, self.width]) / 2
        corners = np.array([(-1, -1), (-1, 1), (1, 1), (1, -1)]) * half
        return [_turned(corners, self.angle_degrees) + np.array(self.centre)]


class Ellipse(Document):
    """An ellipse, turned about its centre."""

    kind: Literal["ellipse"] = "ellipse"
    centre: Point
    height: _Length
    """Full extent along rows before turning."""
    width: _Length
    """Full extent along columns before turning."""
    angle_degrees: float = 0.0
    """From the direction in which columns grow towards that in which rows grow."""

    def rings(self) -> list[Ring]:
        """Boundary, as the regular polygon of `ELLIPSE_VERTICES` scaled to the ellipse's own area."""
        step = 2 * math.pi / ELLIPSE_VERTICES
        angles = np.arange(ELLIPSE_VERTICES) * step
        scale = math.sqrt(step / math.sin(step))
        circle = np.column_stack([np.sin(angles), np.cos(angles)]) * scale
        return [_turned(circle * np.array([self.height, self.width]) / 2, self.angle_degrees) + np.array(self.centre)]


class Polygon(Document):
    """One or more rings; a ring inside another cuts a hole (even-odd rule). Rings must not cross themselves."""

    kind: Literal["polygon"] = "polygon"
    outline: Annotated[tuple[tuple[Point, ...], ...], Field(min_length=1)]
    """Rings of at least three vertices; the last vertex is joined to the first."""

    @model_validator(mode="after")
    def _has_area(self) -> Polygon:
        """A ring of fewer than three different vertices encloses nothing."""
        for index, ring in enumerate(self.outline):
            if len(set(ring)) < 3:
                raise ValueError(f"ring {index} has fewer than three different vertices")
        return self

    def rings(self) -> list[Ring]:
        """Boundary."""
        return [np.array(ring, dtype=np.float64) for ring in self.outline]


Shape: TypeAlias = Annotated[Rectangle | Ellipse | Polygon, Field(discriminator="kind")]


def _turned(points: npt.NDArray[np.float64], angle_degrees: float) -> npt.NDArray[np.float64]:
    """Turn (n, 2) points about the origin."""
    angle = math.radians(angle_degrees)
    cosine, sine = math.cos(angle), math.sin(angle)
    rows, columns = points[:, 0], points[:, 1]
    return np.column_stack([cosine * rows + sine * columns, cosine * columns - sine * rows])


def signed_area(ring: Ring) -> float:
    """Area enclosed by a ring (the shoelace formula), negative for the other sense of going round."""
    rows, columns = ring[:, 0], ring[:, 1]
    # About the first vertex: far from the origin the products would lose the digits that the area stands in.
    rows, columns = rows - rows[0], columns - columns[0]
    return float(np.sum(columns * np.roll(rows, -1) - np.roll(columns, -1) * rows) / 2)
