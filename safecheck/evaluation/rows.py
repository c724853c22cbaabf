"""Measures of a treated frame as the rows of the tables."""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING, Any

import numpy as np

from safecheck.evaluation.original import Original, PlacedRegion
from safecheck.evaluation.treatment import Treated
from safecheck.frames import DisplayWindow, Rescale, SizeBasis, Values
from safecheck.measures.baseline import measure_frame
from safecheck.measures.colour import ColourFigures, measure_colour
from safecheck.measures.local import PATCH_SIDE
from safecheck.measures.padding import count_became_padding, count_padding_changed
from safecheck.measures.psnr import measure_psnr_db
from safecheck.measures.region import RegionFigures, average_map, measure_contrast, measure_region
from safecheck.measures.structural import measure_window
from safecheck.record.rows import MeasureRow, RegionRow, WindowRow
from safecheck.wording import ANALYSIS_CODEC

if TYPE_CHECKING:
    from _typeshed import DataclassInstance

__all__ = ["measure_row", "region_rows", "window_rows"]


def measure_row(original: Original, treated: Treated) -> MeasureRow:
    """Measure a treated frame over all its pixels and its content."""
    figures = measure_frame(original.baseline, treated.values)
    samples = original.frame.raster.samples
    return MeasureRow(
        **_named(original, treated),
        **_described(original),
        **_written(original, treated),
        **_columns(figures),
        **_padding(original, treated),
        **_columns(_colour(original, treated)),
        worst_patch_region=_touched(original, figures.worst_patch_row, figures.worst_patch_column),
        outside_flattened_max=treated.flattened_max,
        unchanged=samples.shape == treated.samples.shape and bool(np.array_equal(samples, treated.samples)),
    )


def _columns(noun: DataclassInstance) -> dict[str, Any]:
    """Fields of a flat dataclass by name; `dataclasses.asdict` copies every value, which takes longer than measures."""
    return {item.name: getattr(noun, item.name) for item in dataclasses.fields(noun)}


def _named(original: Original, treated: Treated) -> dict[str, Any]:
    """Columns that name a frame and what was done to it."""
    frame = original.frame
    return {
        **_columns(frame.key),
        "stratum": frame.stratum,
        "modality": frame.origin.modality,
        "body_part": frame.origin.body_part,
        "unit": frame.unit,
        "role": treated.role,
        "candidate": treated.candidate,
    }


def _described(original: Original) -> dict[str, Any]:
    """Columns on the frame itself."""
    frame, origin = original.frame, original.frame.origin
    form, transform = frame.raster.format, frame.modality_transform
    padding = frame.raster.padding
    return {
        "slice_position_mm": origin.slice_position_mm,
        "slice_thickness_class": origin.slice_thickness_class,
        "kernel": origin.kernel,
        "manufacturer": origin.manufacturer,
        "rows": frame.raster.shape[0],
        "columns": frame.raster.shape[1],
        "channels": form.channels,
        "photometric": form.photometric,
        "bits_allocated": form.bits_allocated,
        "bits_stored": form.bits_stored,
        "bits_used": frame.bits_used,
        "signed": form.signed,
        "slope": transform.slope if isinstance(transform, Rescale) else None,
        "content_rule": original.content.rule,
        "content_reason": original.content.reason,
        "content_pixels": original.content.pixels,
        "padding_pixels": 0 if padding is None else int(padding.sum()),
        "source_syntax": origin.source_syntax,
        "source_bytes": origin.source_bytes,
        "source_lossy": origin.history.lossy,
        "generation": "second" if origin.history.lossy else "first",
        "under_18": origin.under_18,
        "may_show_text": origin.may_show_text,
    }


def _written(original: Original, treated: Treated) -> dict[str, Any]:
    """Columns on the code and its size on every basis."""
    code_bytes, smallest = treated.code_bytes, original.smallest
    content_bytes = original.size_bytes(SizeBasis.CONTENT)
    return {
        **_carried(treated),
        "codec": treated.codec,
        "codec_version": treated.codec_version,
        "settings": treated.settings,
        "archive_can_write": treated.archive_can_write,
        "codec_note": "" if treated.archive_can_write or treated.role == "planted" else ANALYSIS_CODEC,
        "asked": treated.asked,
        "ratio_asked": treated.ratio_asked,
        "basis": treated.basis,
        "reached": treated.reached.value,
        "encodes": treated.encodes,
        "code_bytes": code_bytes,
        "code_crc32": treated.code_crc32,
        "bits_per_pixel": 8 * code_bytes / original.frame.raster.pixels,
        "ratio_bits_stored": original.size_bytes(SizeBasis.BITS_STORED) / code_bytes,
        "ratio_bits_allocated": original.size_bytes(SizeBasis.BITS_ALLOCATED) / code_bytes,
        "ratio_content": content_bytes / code_bytes if content_bytes else None,
        "lossless_bytes": smallest.size_bytes,
        "lossless_codec": smallest.codec,
        "times_smaller_than_lossless": smallest.size_bytes / code_bytes,
        "times_smaller_than_now": original.frame.origin.source_bytes / code_bytes,
    }


def _carried(treated: Treated) -> dict[str, Any]:
    """Columns on the dial, and on how samples were brought into the code."""
    carriage = treated.carriage
    return {
        "dial": treated.dial,
        "dial_value": treated.dial_value,
        "code_precision": carriage.precision if carriage else None,
        "sample_offset": carriage.offset if carriage else None,
        "sample_scale": carriage.scale if carriage else None,
        "clipped_on_reading": carriage.clipped_on_reading if carriage else None,
    }


def _touched(original: Original, row: int | None, column: int | None) -> str:
    """Label of the first region that touches a patch, or ''."""
    if row is None or column is None:
        return ""
    inside = np.s_[row : row + PATCH_SIDE, column : column + PATCH_SIDE]
    touching = (placed.region.label for placed in original.regions if placed.covered.fractions[inside].any())
    return next(touching, "")


def _padding(original: Original, treated: Treated) -> dict[str, Any]:
    """Columns on padding, counted in stored values."""
    frame = original.frame
    if frame.padding_range is None:
        return {"padding_changed": 0, "became_padding": 0}
    padding = frame.raster.padding
    if padding is None:
        padding = np.zeros(frame.raster.shape, dtype=np.bool_)
    return {
        "padding_changed": count_padding_changed(frame.raster.samples, treated.samples, padding),
        "became_padding": count_became_padding(treated.samples, padding, *frame.padding_range),
    }


def _colour(original: Original, treated: Treated) -> ColourFigures:
    """Columns on colour; empty for grey."""
    return measure_colour(original.colour, treated.samples) if original.colour else ColourFigures()


def window_rows(original: Original, treated: Treated) -> tuple[list[WindowRow], Values | None]:
    """Measure a treated frame at every window; the SSIM map of the first where regions ask for it."""
    rows, first_map = [], None
    for index, (display, baseline) in enumerate(zip(original.displays, original.baseline.windows, strict=True)):
        wants_map = index == 0 and bool(original.regions)
        figures, picture = measure_window(baseline, treated.values, with_map=wants_map)
        first_map = picture if wants_map else first_map
        window = display if isinstance(display, DisplayWindow) else None
        rows.append(
            WindowRow(
                **_named(original, treated),
                window=display.label,
                window_source=display.source,
                centre=window.centre if window else None,
                width=window.width if window else None,
                function=window.function if window else "TABLE",
                **_columns(figures),
            )
        )
    return rows, first_map


def region_rows(original: Original, treated: Treated, ssim_map: Values | None) -> list[RegionRow]:
    """Measure a treated frame in every region that covers part of it."""
    figures = {placed.region.name: measure_region(placed.baseline, treated.values) for placed in original.regions}
    return [_region_row(original, treated, placed, figures, ssim_map) for placed in original.regions]


def _region_row(
    original: Original,
    treated: Treated,
    placed: PlacedRegion,
    figures: dict[str, RegionFigures],
    ssim_map: Values | None,
) -> RegionRow:
    """One region; CNR only where its background covers part of the same frame."""
    region, spacing = placed.region, original.frame.spacing_mm
    own, background = figures[region.name], figures.get(region.background)
    contrast = _contrast(own, background) if background else {}
    baseline = original.baseline
    return RegionRow(
        **_named(original, treated),
        region=region.name,
        label=region.label,
        region_role=region.role,
        area_pixels=placed.area_pixels,
        area_mm2=placed.area_pixels * spacing[0] * spacing[1] if spacing else None,
        **_columns(own),
        psnr_peak_bits_db=measure_psnr_db(own.rmse, baseline.peak_bits),
        psnr_peak_range_db=measure_psnr_db(own.rmse, baseline.peak_range),
        background=region.background if background else "",
        **contrast,
        ssim=None if ssim_map is None else average_map(placed.baseline, ssim_map),
        ssim_window=original.displays[0].label if ssim_map is not None else "",
    )


def _contrast(own: RegionFigures, background: RegionFigures) -> dict[str, Any]:
    """Columns of a region against its background."""
    found = _columns(measure_contrast(own, background))
    for when in ("before", "after"):
        mean, other = getattr(own, f"mean_{when}"), getattr(background, f"mean_{when}")
        found[f"contrast_{when}"] = None if mean is None or other is None else mean - other
    return found
