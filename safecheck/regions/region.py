"""Regions: what a person drew, where it lies, and which part of a frame it covers."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal, TypeAlias

import numpy as np
import numpy.typing as npt
from pydantic import Field

from safecheck.documents import Document
from safecheck.regions.coverage import Centres, Coverage, cover, find_centres
from safecheck.regions.shapes import Shape

__all__ = [
    "Covered",
    "Grid",
    "InPatient",
    "MaskOnGrid",
    "OnFrames",
    "Part",
    "Region",
    "RegionSet",
    "Role",
    "Vector",
    "cover_grid",
]

Role: TypeAlias = Literal["target", "background", "uniform", "edge", "other"]
Vector: TypeAlias = tuple[float, float, float]
"""Patient millimetres (DICOM LPS)."""

PARALLEL = 0.9998
"""Least cosine between the normals of a frame and a region's plane: within about 1.1 degrees."""
SAME_MM = 0.01
"""Grids whose corners agree this closely are one grid."""


@dataclass(frozen=True, slots=True)
class Grid:
    """The pixels of one frame, as regions need to know them."""

    rows: int
    columns: int
    series: str = ""
    """Pseudonym."""
    instance: str = ""
    """Pseudonym."""
    series_number: int | None = None
    instance_number: int | None = None
    frame: int = 1
    spacing_mm: tuple[float, float] | None = None
    position_mm: Vector | None = None
    along_columns: Vector | None = None
    along_rows: Vector | None = None
    frame_of_reference: str = ""
    """Keyed pseudonym."""


class OnFrames(Document):
    """In pixels of the frames named: every condition given must hold."""

    kind: Literal["frames"] = "frames"
    rows: int
    """Size of the frames that it was drawn on; a frame of another size is not covered."""
    columns: int
    series: str = ""
    """Pseudonym; '' for any."""
    instance: str = ""
    """Pseudonym; '' for any."""
    series_number: int | None = None
    first_instance_number: int | None = None
    last_instance_number: int | None = None
    frame: int | None = None
    """Frame number from 1; null for any."""

    def holds(self, grid: Grid) -> bool:
        """Whether a frame is among those named."""
        number = grid.instance_number
        return (
            (grid.rows, grid.columns) == (self.rows, self.columns)
            and self.series in ("", grid.series)
            and self.instance in ("", grid.instance)
            and self.series_number in (None, grid.series_number)
            and self.frame in (None, grid.frame)
            and (self.first_instance_number is None or (number is not None and number >= self.first_instance_number))
            and (self.last_instance_number is None or (number is not None and number <= self.last_instance_number))
        )


class InPatient(Document):
    """In millimetres of the patient: on a plane, and on frames parallel to it within a depth."""

    kind: Literal["patient"] = "patient"
    frame_of_reference: str
    """Keyed pseudonym of the frame of reference; another one is never matched."""
    origin_mm: Vector
    """Point of the plane from which the shape's coordinates count."""
    along_rows: Vector
    """Unit vector of the shape's first coordinate."""
    along_columns: Vector
    """Unit vector of the shape's second coordinate."""
    depth_mm: Annotated[float, Field(gt=0)]
    """Full depth of the slab, centred on the plane: from -depth/2 up to, not including, +depth/2."""


Placement: TypeAlias = Annotated[OnFrames | InPatient, Field(discriminator="kind")]


class Part(Document):
    """A shape and where it lies."""

    placement: Placement
    shape: Shape


@dataclass(frozen=True, slots=True, eq=False)
class MaskOnGrid:
    """Fractions of pixels on a grid of a segmentation's own; a frame takes them where its grid is the same."""

    grid: Grid
    fractions: npt.NDArray[np.float64]
    """0 to 1; (rows, columns) of the grid, or of a box in it outside which nothing is covered."""
    corner: tuple[int, int] = (0, 0)
    """(row, column) of the box's first pixel."""


@dataclass(frozen=True, slots=True)
class Region:
    """One region: a name, a label and a role, and the parts that make it up."""

    name: str
    """Unique within its file."""
    label: str
    role: Role
    parts: tuple[Part | MaskOnGrid, ...]
    background: str = ""
    """Name of the region that CNR is taken against, or ''."""


@dataclass(frozen=True, slots=True)
class RegionSet:
    """All regions of a run."""

    regions: tuple[Region, ...]
    sha256: str
    """Of the file that they came from."""
    refused: tuple[str, ...] = ()
    """One sentence for each region of the file, or part of one, that was left out."""


@dataclass(frozen=True, slots=True, eq=False)
class Covered:
    """What a region covers of one frame."""

    fractions: Coverage
    """(rows, columns), 0 to 1."""
    inside: Centres
    """(rows, columns): pixels whose centre is inside; of a mask, those covered by half or more."""


def cover_grid(region: Region, grid: Grid) -> Covered | None:
    """Fraction of each pixel of a frame that a region covers; None where it covers none."""
    total: Covered | None = None
    for part in region.parts:
        covered = _of_mask(part, grid) if isinstance(part, MaskOnGrid) else _of_part(part, grid)
        if covered is None or not covered.fractions.any():
            continue
        if total is not None:
            fractions = np.maximum(total.fractions, covered.fractions)
            covered = Covered(fractions, total.inside | covered.inside)
        total = covered
    return total


def _of_part(part: Part, grid: Grid) -> Covered | None:
    """Coverage of one shape."""
    placement = part.placement
    if isinstance(placement, OnFrames):
        rings = part.shape.rings() if placement.holds(grid) else None
    else:
        rings = _on_grid(part.shape, placement, grid)
    if rings is None:
        return None
    return Covered(cover(rings, grid.rows, grid.columns), find_centres(rings, grid.rows, grid.columns))


def _on_grid(shape: Shape, placement: InPatient, grid: Grid) -> list[npt.NDArray[np.float64]] | None:
    """Bring a shape's rings in a plane of the patient to (row, column) of a parallel frame within the slab."""
    if grid.position_mm is None or grid.along_rows is None or grid.along_columns is None or grid.spacing_mm is None:
        return None
    if not grid.frame_of_reference or grid.frame_of_reference != placement.frame_of_reference:
        return None
    down, right = np.array(grid.along_rows), np.array(grid.along_columns)
    normal = np.cross(right, down)
    plane_down, plane_right = np.array(placement.along_rows), np.array(placement.along_columns)
    if abs(float(np.dot(normal, np.cross(plane_right, plane_down)))) < PARALLEL:
        return None
    origin = np.array(placement.origin_mm) - np.array(grid.position_mm)
    distance = float(np.dot(origin, normal))
    if not -placement.depth_mm / 2 < distance <= placement.depth_mm / 2:
        return None
    brought = []
    for ring in shape.rings():
        points = origin + ring[:, :1] * plane_down + ring[:, 1:] * plane_right
        brought.append(np.column_stack([points @ down / grid.spacing_mm[0], points @ right / grid.spacing_mm[1]]))
    return brought


def _of_mask(mask: MaskOnGrid, grid: Grid) -> Covered | None:
    """Fractions of a segmentation on a frame of the same grid."""
    if (mask.grid.rows, mask.grid.columns) != (grid.rows, grid.columns) or not _is_same(mask.grid, grid):
        return None
    (row, column), (height, width) = mask.corner, mask.fractions.shape
    fractions = np.zeros((grid.rows, grid.columns))
    fractions[row : row + height, column : column + width] = mask.fractions
    return Covered(fractions, fractions >= 0.5)


def _is_same(one: Grid, other: Grid) -> bool:
    """Whether two grids lie in one place of one frame of reference; without geometry, whether they are one frame."""
    if one.frame_of_reference and other.frame_of_reference:
        distance_mm = _corner_distance_mm(one, other)
        # The instance that a mask was derived from need not lie on the mask's grid: where both grids say where they
        # lie, that alone counts.
        if one.frame_of_reference != other.frame_of_reference or np.isfinite(distance_mm):
            return one.frame_of_reference == other.frame_of_reference and distance_mm < SAME_MM
    return bool(one.instance) and (one.instance, one.frame) == (other.instance, other.frame)


def _corner_distance_mm(one: Grid, other: Grid) -> float:
    """Largest distance between the same corners of two grids; infinite where one of them has no geometry."""
    ours, theirs = _corners_mm(one), _corners_mm(other)
    return float("inf") if ours is None or theirs is None else float(np.abs(ours - theirs).max())


def _corners_mm(grid: Grid) -> npt.NDArray[np.float64] | None:
    """First pixel, last of the first row, last of the first column."""
    if grid.position_mm is None or grid.along_rows is None or grid.along_columns is None or grid.spacing_mm is None:
        return None
    first = np.array(grid.position_mm)
    right = np.array(grid.along_columns) * grid.spacing_mm[1] * (grid.columns - 1)
    down = np.array(grid.along_rows) * grid.spacing_mm[0] * (grid.rows - 1)
    return np.stack([first, first + right, first + down])
