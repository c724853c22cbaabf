"""What is known of a study because it was made: the truth that measurements are held against."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

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
    properties: dict[str, object] = field(default_factory=dict)
    """What was drawn for it, by name."""

    def regions(self) -> list[dict[str, object]]:
        """Shapes with label, role, pixel and patient coordinates, as plain values for a region file."""
        discs = (*self.targets, *(disc for disc in (self.background, self.uniform) if disc))
        found = [_disc_region(disc) for disc in discs]
        return found + ([_edge_region(self.edge)] if self.edge else [])


def _disc_region(disc: Disc) -> dict[str, object]:
    return {
        "label": disc.label,
        "role": disc.role,
        "shape": "ellipse",
        "centre_pixel": [disc.circle.row, disc.circle.column],
        "radii_pixel": [disc.circle.radius, disc.circle.radius],
        "centre_mm": [disc.x_mm, disc.y_mm],
        "radii_mm": [disc.radius_mm, disc.radius_mm],
    }


def _edge_region(edge: Edge) -> dict[str, object]:
    (top, left), (bottom, right) = edge.start, edge.end
    reach = edge.half_width
    scale = (edge.end_mm[0] - edge.start_mm[0]) / (right - left)
    return {
        "label": edge.label,
        "role": "edge",
        "shape": "rectangle",
        "from_pixel": [min(top, bottom) - reach, left],
        "to_pixel": [max(top, bottom) + reach, right],
        "from_mm": [edge.start_mm[0], min(edge.start_mm[1], edge.end_mm[1]) - reach * scale],
        "to_mm": [edge.end_mm[0], max(edge.start_mm[1], edge.end_mm[1]) + reach * scale],
    }
