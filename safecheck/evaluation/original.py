"""What is known of a frame before any candidate: content, windows, regions, noise, reversible size."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor, Future
from dataclasses import dataclass
from functools import partial

import numpy as np

from safecheck.codecs.reversible import Jpeg2000Lossless, Smallest, cheapest
from safecheck.evaluation.assignment import Assignment
from safecheck.frames import Display, DisplayTable, DisplayWindow, Frame, Mask, Raster, Rescale, SizeBasis, Values
from safecheck.measures.baseline import Baseline, prepare_baseline
from safecheck.measures.colour import ColourBaseline, prepare_colour
from safecheck.measures.content import Content, find_content
from safecheck.measures.display import Rendering, default_windows
from safecheck.measures.region import RegionBaseline, prepare_region
from safecheck.policy.plan import WindowPlan
from safecheck.regions.region import Covered, Grid, Region, cover_grid

__all__ = ["Original", "PlacedRegion", "grid_of", "prepare"]


@dataclass(frozen=True, slots=True, eq=False)
class PlacedRegion:
    """A region that covers part of this frame."""

    region: Region
    covered: Covered
    baseline: RegionBaseline
    area_pixels: float


@dataclass(frozen=True, slots=True, eq=False)
class Original:
    """A frame and all that depends on it alone."""

    frame: Frame
    values: Values
    """In the frame's unit."""
    content: Content
    baseline: Baseline
    displays: tuple[Display, ...]
    """In the order of the baseline's windows."""
    regions: tuple[PlacedRegion, ...]
    colour: ColourBaseline | None
    control_code: bytes
    """Code of the cheapest reversible codec: the pipe's control."""
    smallest_sought: Future[Smallest]
    """Smallest reversible code, the slowest part: sought while candidates are run, where there are threads."""

    @property
    def smallest(self) -> Smallest:
        """Smallest reversible code; waits for it."""
        return self.smallest_sought.result()

    def size_bytes(self, basis: SizeBasis) -> float:
        """Bytes before recompression on any basis."""
        raster = self.frame.raster
        if basis is SizeBasis.NOW:
            return float(self.frame.origin.source_bytes)
        if basis is SizeBasis.LOSSLESS:
            return float(self.smallest.size_bytes)
        if basis is SizeBasis.CONTENT:
            return self.content.pixels * raster.format.channels * raster.format.bits_stored / 8
        return raster.size_bytes(basis)


def prepare(frame: Frame, assignment: Assignment, beside: Executor | None = None) -> Original:
    """Prepare a frame for its candidates; with threads beside this one, some of it goes on after the return."""
    raster = frame.raster
    control_code = cheapest().encode(raster)
    smallest_sought = _soon(beside, partial(_smallest, raster, len(control_code)))
    values = frame.values(raster.samples)
    inverted = raster.format.photometric == "MONOCHROME1"
    content = find_content(
        values, modality=frame.origin.modality, unit=frame.unit, padding=raster.padding, inverted=inverted
    )
    displays = _displays(frame, assignment.windows, values[content.mask])
    regions = _place_regions(frame, assignment, values)
    return Original(
        frame=frame,
        values=values,
        content=content,
        baseline=prepare_baseline(
            values,
            content.mask,
            peak_bits=frame.peak_of_bits,
            stored_unit=_stored_unit(frame),
            padding=raster.padding,
            spacing_mm=frame.spacing_mm,
            covered=_union([placed.covered.fractions > 0 for placed in regions]),
            wanted=_union([placed.covered.inside for placed in regions]),
            renderings=tuple(_rendering(display, inverted=inverted) for display in displays),
        ),
        displays=displays,
        regions=regions,
        colour=prepare_colour(raster.samples, content.mask, raster.format.highest)
        if raster.format.channels == 3
        else None,
        control_code=control_code,
        smallest_sought=smallest_sought,
    )


def _smallest(raster: Raster, control_bytes: int) -> Smallest:
    """The smaller of the control's code, which is there already, and JPEG 2000 5/3."""
    control, other = Smallest(cheapest().name, control_bytes), Jpeg2000Lossless()
    if other.refuses(raster.format, raster.shape) is not None:
        return control
    size = len(other.encode(raster))
    return Smallest(other.name, size) if size < control.size_bytes else control


def _soon(beside: Executor | None, work: Callable[[], Smallest]) -> Future[Smallest]:
    """Start a work beside this thread, or do it here and now."""
    if beside is not None:
        return beside.submit(work)
    done: Future[Smallest] = Future()
    done.set_result(work())
    return done


def _stored_unit(frame: Frame) -> float:
    """Size of one stored step in the frame's unit; 1 where a table makes it vary."""
    transform = frame.modality_transform
    return abs(transform.slope) if isinstance(transform, Rescale) else 1.0


def _union(masks: list[Mask]) -> Mask | None:
    """Pixels of any mask; None of none."""
    return np.logical_or.reduce(masks) if masks else None


def _displays(frame: Frame, plan: tuple[WindowPlan, ...], content: Values) -> tuple[Display, ...]:
    """Windows of the plan, then of the file, then a default; each label and each setting once."""
    wanted: list[Display] = [
        DisplayWindow(window.label, window.centre, window.width, window.function, "plan")
        for window in plan
        if window.unit == frame.unit and window.modality in ("", frame.origin.modality)
    ]
    wanted += frame.displays
    kept: dict[object, Display] = {}
    for display in wanted:
        kept.setdefault(_settings(display), display)
    return tuple(kept.values()) or _defaults(frame, content)


def _settings(display: Display) -> object:
    """What makes two displays the same picture."""
    if isinstance(display, DisplayTable):
        return display.label
    return display.centre, display.width, display.function


def _defaults(frame: Frame, content: Values) -> tuple[Display, ...]:
    """What a frame without any window is shown with."""
    if frame.raster.format.channels == 3:
        # Colour is shown as it is stored: no window applies (PS3.3 C.11.2.1.2).
        top = float(frame.raster.format.highest)
        return (DisplayWindow("full range", top / 2, top, "LINEAR_EXACT", "default"),)
    origin = frame.origin
    ends = (float(content.min()), float(content.max())) if content.size else (None, None)
    found = default_windows(origin.modality, frame.unit, origin.body_part, *ends)
    return tuple(DisplayWindow(each.label, each.centre, each.width, each.function, "default") for each in found)


def _rendering(display: Display, *, inverted: bool) -> Rendering:
    """Settings of a display as the measures take them."""
    if isinstance(display, DisplayTable):
        top = float(2**display.bits - 1)
        return Rendering("TABLE", first=display.first, entries=display.entries, top=top, inverted=inverted)
    return Rendering(display.function, display.centre, display.width, inverted=inverted)


def _place_regions(frame: Frame, assignment: Assignment, values: Values) -> tuple[PlacedRegion, ...]:
    """Regions that cover part of this frame, in the order of their file."""
    if assignment.regions is None:
        return ()
    grid, placed = grid_of(frame), []
    for region in assignment.regions.regions:
        covered = cover_grid(region, grid)
        if covered is not None:
            baseline = prepare_region(values, covered.fractions, covered.inside, frame.raster.padding)
            placed.append(PlacedRegion(region, covered, baseline, float(covered.fractions.sum())))
    return tuple(placed)


def grid_of(frame: Frame) -> Grid:
    """The frame as regions need to know it."""
    place = frame.geometry
    return Grid(
        rows=frame.raster.shape[0],
        columns=frame.raster.shape[1],
        series=frame.key.series,
        instance=frame.key.instance,
        series_number=frame.key.series_number,
        instance_number=frame.key.instance_number,
        frame=frame.key.frame,
        spacing_mm=frame.spacing_mm,
        position_mm=place.position_mm if place else None,
        along_columns=place.along_columns if place else None,
        along_rows=place.along_rows if place else None,
        frame_of_reference=place.frame_of_reference if place else "",
    )
