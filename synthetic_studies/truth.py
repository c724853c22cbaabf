"""What is known of a study because it was made: the truth that measurements are held against."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

__all__ = ["Circle", "Disc", "Edge", "Grid", "PairTruth", "Truth"]

Point = tuple[float, float]
"""(row, column) in pixels; the centre of the first pixel is (0, 0)."""


@dataclass(frozen=True, slots=True)
class Grid:
    """A pixel grid whose middle lies at the origin of patient millimetres (LPS, supine, head first)."""

    rows: int
    columns: int
    spacing_mm: float
    """Between rows and between columns alike."""

    def pixel(self, x_mm: float, y_mm: float) -> Point:
        """(row, column) of a point given along patient left and patient back."""
        return (
            y_mm / self.spacing_mm + (self.rows - 1) / 2,
            x_mm / self.spacing_mm + (self.columns - 1) / 2,
        )

    @property
    def corner_mm(self) -> tuple[float, float]:
        """(x, y) of the centre of the first pixel."""
        return -(self.columns - 1) / 2 * self.spacing_mm, -(self.rows - 1) / 2 * self.spacing_mm


@dataclass(frozen=True, slots=True)
class Circle:
    """A circle on the pixel grid."""

    row: float
    column: float
    radius: float
    """In pixels."""


@dataclass(frozen=True, slots=True)
class Disc:
    """A disc of one value in surroundings of one value."""

    label: str
    role: str
    """'target', 'background' or 'uniform'."""
    circle: Circle
    x_mm: float
    """Centre, along patient left."""
    y_mm: float
    """Centre, along patient back."""
    radius_mm: float
    value: float
    """Mean inside, without noise, in the study's unit."""
    contrast: float
    """Value inside less value around."""
    calm_radius: float
    """Up to this radius in pixels, outside the disc, the surroundings are of one value."""
    noise_sd: float
    """SD of the noise at the centre, in the study's unit."""


@dataclass(frozen=True, slots=True)
class Edge:
    """A straight, sharp boundary across a box."""

    label: str
    start: Point
    end: Point
    """The boundary runs from start to end, (row, column)."""
    half_width: float
    """Both sides are of one value up to this distance from the boundary, in pixels."""
    value_above: float
    """On the side of smaller rows."""
    value_below: float
    start_mm: Point
    """(x, y)."""
    end_mm: Point


@dataclass(frozen=True, slots=True)
class PairTruth:
    """One frame before and after a planted change; figures over pixels that are not padding."""

    original: Path
    delivered: Path
    rmse: float
    """In the study's unit."""
    bias: float
    """Mean of after minus before."""
    maximum: float
    """Largest absolute change."""
    rmse_frame: float
    """Over the whole frame, padding included."""
    padding_changed: int
    """Padding pixels whose value changed."""


@dataclass(frozen=True, slots=True)
class Truth:
    """A study, or one series of it, as made."""

    kind: str
    seed: int
    files: tuple[Path, ...]
    """In order of instance number."""
    patient_id: str
    study_uid: str
    series_uid: str
    instance_uids: tuple[str, ...]
    grid: Grid
    unit: str
    frames: int = 1
    """Frames of each file."""
    slice_positions_mm: tuple[float, ...] = ()
    noise_sd: float = 0.0
    """As asked for, at the middle of the image, in the study's unit."""
    padding_value: int | None = None
    """Stored value of padding."""
    field_circle: Circle | None = None
    """Pixels whose centre lies outside hold padding."""
    targets: tuple[Disc, ...] = ()
    background: Disc | None = None
    """The surroundings of the targets, where nothing lies."""
    uniform: Disc | None = None
    edge: Edge | None = None
    lossy_ratio: float | None = None
    """As declared in the header."""
    pairs: tuple[PairTruth, ...] = ()
    """Planted changes, where the study is a copy of another or was made lossy."""
    parts: tuple[Truth, ...] = ()
    """The series or studies of which this one consists."""
    properties: dict[str, Any] = field(default_factory=dict)
    """What was drawn for it, by name."""

    def regions(self) -> list[dict[str, Any]]:
        """Shapes as plain values, from which a region file can be written.

        Each has 'name', 'label', 'role', 'background' (the name of another, or ''), 'shape' ('ellipse' or 'rectangle'),
        and 'centre', 'height' and 'width' twice: with '_pixel' in pixels, the centre (row, column); with '_mm' in
        patient millimetres, the centre (x, y). Shapes lie upright and at the same place in every slice.
        """
        discs = (*self.targets, *(disc for disc in (self.background, self.uniform) if disc))
        behind = self.background.label if self.background else ""
        found = [_disc_region(disc, behind if disc.role == "target" else "") for disc in discs]
        return found + ([_edge_region(self.edge)] if self.edge else [])


def _disc_region(disc: Disc, background: str) -> dict[str, Any]:
    return {
        "name": disc.label,
        "label": disc.label,
        "role": disc.role,
        "background": background,
        "shape": "ellipse",
        "centre_pixel": [disc.circle.row, disc.circle.column],
        "height_pixel": 2 * disc.circle.radius,
        "width_pixel": 2 * disc.circle.radius,
        "centre_mm": [disc.x_mm, disc.y_mm],
        "height_mm": 2 * disc.radius_mm,
        "width_mm": 2 * disc.radius_mm,
    }


def _edge_region(edge: Edge) -> dict[str, Any]:
    """The boundary with what is of one value on both sides."""
    (top, left), (bottom, right) = edge.start, edge.end
    scale = (edge.end_mm[0] - edge.start_mm[0]) / (right - left)
    return {
        "name": edge.label,
        "label": edge.label,
        "role": "edge",
        "background": "",
        "shape": "rectangle",
        "centre_pixel": [(top + bottom) / 2, (left + right) / 2],
        "height_pixel": 2 * edge.half_width,
        "width_pixel": right - left,
        "centre_mm": [(edge.start_mm[0] + edge.end_mm[0]) / 2, (edge.start_mm[1] + edge.end_mm[1]) / 2],
        "height_mm": 2 * edge.half_width * scale,
        "width_mm": edge.end_mm[0] - edge.start_mm[0],
    }
