"""The closed table of measures that a limit may name: what each is, where it stands, and which way is worse."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

__all__ = ["IMAGE_UNIT", "MEASURES", "Measure"]

IMAGE_UNIT = "unit of the image"
"""Unit of a measure whose figures are in the unit that the row names."""


@dataclass(frozen=True, slots=True)
class Measure:
    """One measure."""

    name: str
    """How a plan and the outputs name it."""
    table: Literal["measures", "windows", "regions"]
    """Table of the dossier in which it stands."""
    column: str
    """Column of that table."""
    unit: str
    """`IMAGE_UNIT`, or the unit itself; '1' for a plain number."""
    worse: Literal["higher", "lower"]
    """Which way the change is larger. For `signed` measures the size counts, not the sign."""
    text: str
    """What it is, in one sentence."""
    limitable: bool = True
    """Whether a limit may name it."""
    why_not: str = ""
    """Where no limit may name it, the reason."""
    signed: bool = False
    """Whether it may be negative and a limit bounds its absolute value."""
    null_when_equal: bool = False
    """Whether null stands for infinity where nothing changed."""


_ALONE = "falls as noise rises and shows smoothing as a gain; it never stands without the noise kept"
_RISES = "rises when noise is removed; it never stands without the noise removed"
_OWN = "describes the original"


def _errors(
    prefix: str, suffix: str, table: Literal["measures", "regions"], columns: str, where: str
) -> tuple[Measure, ...]:
    """Errors over one set of pixels; `columns` is the ending of the columns' names."""

    def one(stem: str, text: str, *, signed: bool = False) -> Measure:
        return Measure(
            f"{prefix}{stem}{suffix}",
            table,
            f"{stem}{columns}",
            IMAGE_UNIT,
            "higher",
            f"{text} {where}.",
            signed=signed,
        )

    return (
        one("bias", "Mean error", signed=True),
        one("rmse", "Root mean square error"),
        one("mean_absolute", "Mean absolute error"),
        one("max", "Largest absolute error"),
        one("p999", "99.9th percentile of the absolute error, from 1,000 pixels on,"),
    )


def _ratio_db(name: str, table: Literal["measures", "regions"], column: str, peak: str, where: str) -> Measure:
    """A peak signal-to-noise ratio."""
    text = f"PSNR {where}, peak {peak}; null where nothing changed."
    return Measure(name, table, column, "dB", "lower", text, null_when_equal=True)


_BITS = "the span that the stored bits can express"
_RANGE = "the span of the original's content"

_FRAME = (
    *_errors("", "_frame", "measures", "_frame", "over all pixels of the frame"),
    *_errors("", "_content", "measures", "_content", "over content"),
    _ratio_db("psnr_peak_bits_db", "measures", "psnr_peak_bits_db", _BITS, "over the frame"),
    _ratio_db("psnr_peak_range_db", "measures", "psnr_peak_range_db", _RANGE, "over the frame"),
    _ratio_db("psnr_peak_bits_content_db", "measures", "psnr_peak_bits_content_db", _BITS, "over content"),
    _ratio_db("psnr_peak_range_content_db", "measures", "psnr_peak_range_content_db", _RANGE, "over content"),
)

_PLACES = tuple(
    Measure(name, "measures", name, IMAGE_UNIT, "higher", text)
    for name, text in (
        ("worst_patch_rmse", "Largest RMSE of the 8x8 patches."),
        ("patch_p95_rmse", "95th percentile of the RMSE of the 8x8 patches."),
        ("patch_median_rmse", "Median of the RMSE of the 8x8 patches."),
        ("worst_window_rmse", "Largest RMSE of the patches of 10 mm."),
        ("worst_outside_rmse", "Largest RMSE of the 8x8 patches clear of every drawn region."),
        ("edge_band_rmse", "RMSE within 4 pixels of the content's edge, on both sides."),
        ("edge_band_max", "Largest absolute error within 4 pixels of the content's edge, on both sides."),
    )
)

_NOISE = (
    Measure(
        "noise_sd",
        "measures",
        "noise_sd",
        IMAGE_UNIT,
        "higher",
        "Noise SD of the original.",
        limitable=False,
        why_not=_OWN,
    ),
    Measure(
        "noise_sd_kept_percent",
        "measures",
        "noise_sd_kept_percent",
        "%",
        "lower",
        "Noise SD after over noise SD before, at the same places.",
    ),
    Measure(
        "rmse_over_noise",
        "measures",
        "rmse_over_noise",
        "times",
        "higher",
        "RMSE over content by the noise SD of the original.",
        limitable=False,
        why_not=_ALONE,
    ),
)

_PIXELS = (
    Measure(
        "padding_changed", "measures", "padding_changed", "pixels", "higher", "Padding pixels whose value changed."
    ),
    Measure(
        "became_padding", "measures", "became_padding", "pixels", "higher", "Other pixels that turned into padding."
    ),
    Measure(
        "outside_flattened_max",
        "measures",
        "outside_flattened_max",
        IMAGE_UNIT,
        "higher",
        "Largest change made to flattened air.",
    ),
)

_CHANNELS = tuple(
    Measure(name, "measures", name, "stored levels", "higher", f"{text} of all samples of all channels.")
    for name, text in (("rmse_channels", "Root mean square error"), ("max_channels", "Largest absolute error"))
)

_COLOUR = tuple(
    Measure(
        name, "measures", name, "CIEDE2000", "higher", f"{text} colour difference over content, sRGB and D65 assumed."
    )
    for name, text in (
        ("ciede2000_mean", "Mean"),
        ("ciede2000_p95", "95th percentile of the"),
        ("ciede2000_max", "Largest"),
    )
)

_WINDOWS = (
    Measure("ssim", "windows", "ssim", "1", "lower", "Mean SSIM of display values over content not clipped."),
    Measure("ssim_p05", "windows", "ssim_p05", "1", "lower", "5th percentile of the SSIM map there."),
    Measure("ssim_lowest", "windows", "ssim_lowest", "1", "lower", "Least value of the SSIM map there."),
    Measure(
        "changed_5_levels_percent",
        "windows",
        "changed_5_levels_percent",
        "%",
        "higher",
        "Share of content whose display value moved by 5 of 255 levels or more.",
    ),
    Measure("max_levels", "windows", "max_levels", "levels", "higher", "Largest change of a display value in content."),
    Measure(
        "share_clipped_percent",
        "windows",
        "share_clipped_percent",
        "%",
        "higher",
        "Share of content clipped in the original.",
        limitable=False,
        why_not=_OWN,
    ),
)

_REGIONS = (
    *_errors("region_", "", "regions", "", "in a drawn region"),
    _ratio_db("region_psnr_peak_bits_db", "regions", "psnr_peak_bits_db", _BITS, "in a drawn region"),
    _ratio_db("region_psnr_peak_range_db", "regions", "psnr_peak_range_db", _RANGE, "in a drawn region"),
    Measure("region_ssim", "regions", "ssim", "1", "lower", "Mean SSIM map at the first window in a drawn region."),
    Measure(
        "region_noise_removed_percent",
        "regions",
        "noise_removed_percent",
        "%",
        "higher",
        "Share of the background's SD that is gone.",
        signed=True,
    ),
    Measure(
        "region_cnr_after",
        "regions",
        "cnr_after",
        "1",
        "lower",
        "Contrast of a drawn region over its background's SD, after.",
        limitable=False,
        why_not=_RISES,
    ),
)

MEASURES: MappingProxyType[str, Measure] = MappingProxyType(
    {
        measure.name: measure
        for group in (_FRAME, _PLACES, _NOISE, _PIXELS, _CHANNELS, _COLOUR, _WINDOWS, _REGIONS)
        for measure in group
    }
)
"""All measures by name."""
