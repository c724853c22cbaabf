"""A frame as it is studied: one grey plane of whole numbers, its content, and the regions that lie on it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from safecheck.codecs.tile.planes import centre, to_planes
from safecheck.evaluation.original import grid_of
from safecheck.frames import Frame, ModalityTable, Raster, luma
from safecheck.measures.content import Content, find_content
from safecheck.regions.region import Region, RegionSet, cover_grid
from safecheck.study.areas import Area
from safecheck.study.tiles import Reals, as_tiles

__all__ = ["Subject", "subject_of"]


@dataclass(frozen=True, slots=True, eq=False)
class Subject:
    """What is studied of a frame."""

    frame: Frame
    raster: Raster
    """Grey."""
    scale: float
    """Size of one stored step in `unit`."""
    unit: str
    content: Content
    areas: tuple[Area, ...]
    """The content first."""
    notes: tuple[str, ...]
    """How it differs from the frame, one sentence each."""

    def tiles(self, size: int) -> Reals:
        """Stored values less a constant, (tiles, size * size); padding and what lies beyond the frame is filled.

        This is what the codec `tiled` transforms.
        """
        centres = centre(self.raster.samples, self.raster.padding)
        (plane,) = to_planes(self.raster.samples, self.raster.padding, centres, size)
        return as_tiles(plane, size)


def subject_of(frame: Frame, regions: RegionSet | None) -> Subject | None:
    """Make a frame ready for study; None where every pixel is padding."""
    values = frame.values(frame.raster.samples)
    raster, scale, unit, notes = _grey(frame)
    content = find_content(
        values,
        modality=frame.origin.modality,
        unit=frame.unit,
        padding=raster.padding,
        inverted=raster.format.photometric == "MONOCHROME1",
    )
    if not content.pixels:
        return None
    areas = (Area("content", content.mask.astype(np.float64)), *_regions(frame, regions))
    return Subject(frame, raster, scale, unit, content, areas, notes)


def _grey(frame: Frame) -> tuple[Raster, float, str, tuple[str, ...]]:
    """The plane of whole numbers studied, the size of a step, the unit of errors, and what to say of it."""
    raster, transform = frame.raster, frame.modality_transform
    if raster.format.channels == 3:
        grey = replace(raster.format, photometric="MONOCHROME2")
        samples = np.rint(luma(raster.samples)).astype(grey.dtype)
        note = "Colour: its luma, rounded to whole levels, was studied as a grey image."
        return Raster(samples, grey, raster.padding), 1.0, frame.unit, (note,)
    if isinstance(transform, ModalityTable):
        note = "Its values come by a table: errors are in stored values."
        return raster, 1.0, "stored value", (note,)
    return raster, abs(transform.slope), frame.unit, ()


def _regions(frame: Frame, regions: RegionSet | None) -> tuple[Area, ...]:
    """Areas of the regions that cover part of the frame outside padding."""
    if regions is None:
        return ()
    grid, padding = grid_of(frame), frame.raster.padding
    found = []
    for region in regions.regions:
        covered = cover_grid(region, grid)
        if covered is None:
            continue
        weights = covered.fractions if padding is None else np.where(padding, 0.0, covered.fractions)
        if weights.any():
            found.append(Area(f"region {_label(region, regions)}", weights))
    return tuple(found)


def _label(region: Region, regions: RegionSet) -> str:
    """A region's label, with its name where another has the same label."""
    shared = sum(other.label == region.label for other in regions.regions) > 1
    return f"{region.label} ({region.name})" if shared else region.label
