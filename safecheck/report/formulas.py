"""Labels, formulas and sources of the measures by their name in the tables."""

from __future__ import annotations

from types import MappingProxyType
from typing import TypeAlias

__all__ = ["FORMULAS"]

_STATED = "definition stated here"
_WANG = "Wang et al. 2004, IEEE TIP 13:600"
_COMMON = "common definition"
_CIE = "ISO/CIE 11664-6"
_CIEDE2000 = "CIEDE2000 over content; sRGB and D65 assumed"

_Entry: TypeAlias = tuple[str, str, str]
"""Label, formula with its domain, source."""


def _errors(domain: str, over: str) -> dict[str, _Entry]:
    """Measures of the error alone, which differ by the pixels that they are taken over."""
    tail = f"99.9th percentile of |e| over {over}, from 1,000 pixels on"
    return {
        f"bias_{domain}": (f"Mean error, {domain}", f"Σ e ÷ n over {over}; e = after − before", _COMMON),
        f"rmse_{domain}": (f"RMSE, {domain}", f"√(Σ e² ÷ n) over {over}", _COMMON),
        f"mean_absolute_{domain}": (f"Mean absolute error, {domain}", f"Σ |e| ÷ n over {over}", _COMMON),
        f"max_{domain}": (f"Largest error, {domain}", f"max |e| over {over}", _COMMON),
        f"p999_{domain}": (f"99.9th percentile of error, {domain}", tail, _STATED),
    }


def _psnr(name: str, domain: str, over: str) -> dict[str, _Entry]:
    """PSNR on both peaks."""
    peaks = {
        "bits": ("stored bits", "span that the stored bits can express"),
        "range": ("content range", "span of the original's content"),
    }
    return {
        name.format(key): (
            f"PSNR, {domain}, peak of {peak}",
            f"20 log₁₀(peak ÷ RMSE) over {over}; peak: {span}",
            _COMMON,
        )
        for key, (peak, span) in peaks.items()
    }


FORMULAS: MappingProxyType[str, _Entry] = MappingProxyType(
    {
        **_errors("frame", "all pixels"),
        **_errors("content", "content"),
        **_psnr("psnr_peak_{}_db", "frame", "all pixels"),
        **_psnr("psnr_peak_{}_content_db", "content", "content"),
        "worst_patch_rmse": (
            "RMSE, worst patch 8×8",
            "largest √(Σ e² ÷ 64) of the patches with at least half content",
            _STATED,
        ),
        "patch_p95_rmse": ("RMSE, 95th percentile of patches", "95th percentile of the patches' RMSE", _STATED),
        "patch_median_rmse": ("RMSE, median of patches", "median of the patches' RMSE", _STATED),
        "worst_window_rmse": (
            "RMSE, worst larger patch",
            "as the worst patch, over squares of 10 mm; needs a pixel spacing",
            _STATED,
        ),
        "worst_outside_rmse": (
            "RMSE, worst patch outside regions",
            "largest RMSE of the patches clear of every drawn region",
            _STATED,
        ),
        "edge_band_rmse": (
            "RMSE, band at the content's edge",
            "√(Σ e² ÷ n) within 4 pixels of the content's edge, on both sides",
            _STATED,
        ),
        "edge_band_max": ("Largest error, band at the content's edge", "max |e| over that band", _STATED),
        "noise_sd": (
            "Noise SD, original",
            "√(mean of s²) over patches of 8×8 wholly content and not constant, s² = Σ r² ÷ 61, r the residuals about "
            "the least-squares plane of the original; patches with s above 1.5 × the mode of s hold edges and are left "
            "out. Not evaluated with fewer than 16 patches or below one stored step",
            _STATED,
        ),
        "noise_sd_kept_percent": ("Noise SD kept", "100 × noise SD after ÷ noise SD of the original", _STATED),
        "rmse_over_noise": (
            "RMSE over noise SD",
            "RMSE over content ÷ noise SD of the original; read beside the noise SD kept",
            _STATED,
        ),
        "padding_changed": ("Padding pixels changed", "padding pixels of the original whose value changed", _STATED),
        "became_padding": ("Pixels that became padding", "other pixels whose value lies in the padding range", _STATED),
        "outside_flattened_max": ("Largest change made to air", "max |e| over air that was flattened", _STATED),
        "rmse_channels": (
            "RMSE, colour channels",
            "√(Σ e² ÷ n) over all samples of red, green and blue, in stored levels",
            _COMMON,
        ),
        "max_channels": ("Largest error, colour channels", "max |e| over all samples of red, green and blue", _COMMON),
        "ciede2000_mean": ("Colour difference, mean", f"mean {_CIEDE2000}", _CIE),
        "ciede2000_p95": ("Colour difference, 95th percentile", f"95th percentile of {_CIEDE2000}", _CIE),
        "ciede2000_max": ("Colour difference, largest", f"largest {_CIEDE2000}", _CIE),
        "ssim": (
            "SSIM",
            "mean of the SSIM map of display levels at the window named, over content not clipped in the original; "
            "Gaussian 11×11, σ = 1.5, K1 = 0.01, K2 = 0.03, L = 255, valid part only",
            _WANG,
        ),
        "ssim_p05": ("SSIM, 5th percentile", "5th percentile of the same map", _WANG),
        "ssim_lowest": ("SSIM, least", "least value of the same map", _WANG),
        "share_clipped_percent": (
            "Content clipped",
            "share of content whose display level is at an end of the window in the original",
            _STATED,
        ),
        "changed_5_levels_percent": (
            "Content changed by 5 levels",
            "share of content whose display level moved by 5 of 255 or more at the window named",
            _STATED,
        ),
        "max_levels": ("Largest change of display level", "largest move of the display level over content", _STATED),
        "region_rmse": (
            "RMSE, region",
            "√(Σ w e² ÷ Σ w), w the share of each pixel inside the region",
            _COMMON,
        ),
        "region_bias": ("Mean error, region", "Σ w e ÷ Σ w, w the share of each pixel inside the region", _COMMON),
        "region_mean_absolute": ("Mean absolute error, region", "Σ w |e| ÷ Σ w", _COMMON),
        "region_max": ("Largest error, region", "max |e| over pixels whose centre is inside", _COMMON),
        "region_p999": (
            "99.9th percentile of error, region",
            "99.9th percentile of |e| over pixels whose centre is inside, from 1,000 pixels on",
            _STATED,
        ),
        **_psnr("region_psnr_peak_{}_db", "region", "the region"),
        "region_ssim": (
            "SSIM, region",
            "mean of the SSIM map at the first window over pixels whose centre is inside",
            _WANG,
        ),
        "region_noise_removed_percent": (
            "Noise removed, region",
            "100 × (1 − SD after ÷ SD before) of the region's background",
            _STATED,
        ),
        "region_cnr_after": (
            "CNR after, region",
            "(mean of the region − mean of its background) ÷ SD of that, after; read beside the noise removed",
            _COMMON,
        ),
    }
)
"""Name in the catalogue of measures -> label, formula with its domain, source."""
