"""All measures of one frame: what depends on the original is prepared once, then each candidate is measured."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from importlib import import_module

from safecheck.measures.display import Rendering
from safecheck.measures.local import PATCH_SIDE as _SIDE
from safecheck.measures.local import (
    WINDOW_MM,
    EdgeBand,
    PatchFigures,
    PatchGrid,
    find_edge_band,
    lay_grid,
    lay_grid_mm,
    measure_band,
    measure_patches,
)
from safecheck.measures.noise import NoisePlaces, choose_noise_places, measure_noise
from safecheck.measures.planes import Mask, Plane, check_mask, check_plane
from safecheck.measures.pointwise import measure_errors
from safecheck.measures.psnr import measure_psnr_db
from safecheck.measures.structural import WindowBaseline, prepare_window

__all__ = ["Baseline", "FrameFigures", "load_kernels", "measure_frame", "prepare_baseline"]


@dataclass(frozen=True, slots=True, eq=False)
class Baseline:
    """What depends on the original alone; used for every candidate of the frame."""

    values: Plane
    """The original, in its unit."""
    content: Mask
    peak_bits: float
    """Span that the stored bits can express, in the unit."""
    peak_range: float | None
    """Span of the original's content, in the unit; None without content."""
    patches: PatchGrid
    large_patches: PatchGrid | None
    """None without a spacing, or where 10 mm hold no more than an 8x8 patch."""
    band: EdgeBand
    noise: NoisePlaces | None
    """None where noise is not evaluated."""
    windows: tuple[WindowBaseline, ...]
    """In the order of the renderings given."""


@dataclass(frozen=True, slots=True, kw_only=True)
class FrameFigures:
    """Figures of a frame and candidate, as the columns of measures.parquet name them; None where not evaluated."""

    bias_frame: float | None
    rmse_frame: float | None
    mean_absolute_frame: float | None
    max_frame: float | None
    p999_frame: float | None
    bias_content: float | None
    rmse_content: float | None
    mean_absolute_content: float | None
    max_content: float | None
    max_content_row: int | None
    max_content_column: int | None
    p999_content: float | None
    peak_bits: float
    peak_range: float | None
    psnr_peak_bits_db: float | None
    psnr_peak_range_db: float | None
    psnr_peak_bits_content_db: float | None
    psnr_peak_range_content_db: float | None
    worst_patch_rmse: float | None
    worst_patch_row: int | None
    worst_patch_column: int | None
    patch_p95_rmse: float | None
    patch_median_rmse: float | None
    window_mm: float | None
    worst_window_rmse: float | None
    worst_window_row: int | None
    worst_window_column: int | None
    worst_outside_rmse: float | None
    worst_outside_row: int | None
    worst_outside_column: int | None
    edge_band_rmse: float | None
    edge_band_max: float | None
    edge_band_row: int | None
    edge_band_column: int | None
    noise_sd: float | None
    noise_sd_after: float | None
    noise_sd_kept_percent: float | None
    rmse_over_noise: float | None


def prepare_baseline(
    values: Plane,
    content: Mask,
    *,
    peak_bits: float,
    stored_unit: float,
    padding: Mask | None = None,
    spacing_mm: tuple[float, float] | None = None,
    covered: Mask | None = None,
    wanted: Mask | None = None,
    renderings: Sequence[Rendering] = (),
) -> Baseline:
    """Prepare what depends on the original alone.

    Parameters
    ----------
    values
        (rows, columns), the original in its unit.
    content
        (rows, columns), boolean.
    peak_bits
        Span that the stored bits can express, in the unit, above 0.
    stored_unit
        Size of one stored step in the unit, above 0: noise below it is not evaluated.
    padding
        (rows, columns), boolean; None where the frame has none.
    spacing_mm
        (between rows, between columns), above 0; None where it is not known.
    covered
        (rows, columns), boolean: pixels that a drawn region covers in part or whole; None where none is drawn.
    wanted
        (rows, columns), boolean: pixels at which the SSIM map of the first window will be read; None for none.
    renderings
        Windows and tables, in the order in which they will be asked for.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    values = check_plane(values)
    content = check_mask(content, values.shape)
    found = values[content]
    return Baseline(
        values=values,
        content=content,
        peak_bits=peak_bits,
        peak_range=float(found.max() - found.min()) if found.size else None,
        patches=lay_grid(content, _SIDE, _SIDE, covered),
        large_patches=lay_grid_mm(content, spacing_mm, covered),
        band=find_edge_band(content, padding),
        noise=choose_noise_places(values, content, stored_unit),
        windows=tuple(
            prepare_window(values, content, rendering, wanted if index == 0 else None)
            for index, rendering in enumerate(renderings)
        ),
    )


def measure_frame(baseline: Baseline, after: Plane) -> FrameFigures:
    """Measure one candidate: all but its windows, regions, padding and colour.

    Parameters
    ----------
    baseline
        Of the original.
    after
        (rows, columns), in the unit of the original.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    after, grid = check_plane(after, baseline.values.shape), baseline.large_patches
    frame, content = measure_errors(baseline.values, after, baseline.content)
    patches = measure_patches(baseline.patches, baseline.values, after)
    large = PatchFigures() if grid is None else measure_patches(grid, baseline.values, after)
    band = measure_band(baseline.band, baseline.values, after)
    noise_sd, noise_sd_after, kept_percent = _noise(baseline.noise, after)
    return FrameFigures(
        bias_frame=frame.bias,
        rmse_frame=frame.rmse,
        mean_absolute_frame=frame.mean_absolute,
        max_frame=frame.max,
        p999_frame=frame.p999,
        bias_content=content.bias,
        rmse_content=content.rmse,
        mean_absolute_content=content.mean_absolute,
        max_content=content.max,
        max_content_row=content.row,
        max_content_column=content.column,
        p999_content=content.p999,
        peak_bits=baseline.peak_bits,
        peak_range=baseline.peak_range,
        psnr_peak_bits_db=measure_psnr_db(frame.rmse, baseline.peak_bits),
        psnr_peak_range_db=measure_psnr_db(frame.rmse, baseline.peak_range),
        psnr_peak_bits_content_db=measure_psnr_db(content.rmse, baseline.peak_bits),
        psnr_peak_range_content_db=measure_psnr_db(content.rmse, baseline.peak_range),
        worst_patch_rmse=patches.worst_rmse,
        worst_patch_row=patches.row,
        worst_patch_column=patches.column,
        patch_p95_rmse=patches.p95_rmse,
        patch_median_rmse=patches.median_rmse,
        window_mm=None if grid is None else WINDOW_MM,
        worst_window_rmse=large.worst_rmse,
        worst_window_row=large.row,
        worst_window_column=large.column,
        worst_outside_rmse=patches.outside_rmse,
        worst_outside_row=patches.outside_row,
        worst_outside_column=patches.outside_column,
        edge_band_rmse=band.rmse,
        edge_band_max=band.max,
        edge_band_row=band.row,
        edge_band_column=band.column,
        noise_sd=noise_sd,
        noise_sd_after=noise_sd_after,
        noise_sd_kept_percent=kept_percent,
        rmse_over_noise=None if not noise_sd or content.rmse is None else content.rmse / noise_sd,
    )


def load_kernels() -> None:
    """Compile the kernels, or take them from the disk: once in a parent process, before workers start."""
    for module in ("colour", "local", "noise", "pointwise", "selection", "structural"):
        import_module(f"safecheck.measures.{module}_kernels")


def _noise(places: NoisePlaces | None, after: Plane) -> tuple[float | None, float | None, float | None]:
    """Noise before, after and what was kept of it in per cent, or none."""
    if places is None:
        return None, None, None
    kept = measure_noise(places, after)
    return places.noise_sd, kept, 100 * kept / places.noise_sd if places.noise_sd and kept is not None else None
