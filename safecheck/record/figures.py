"""Entries of the record about what was measured: over frames, and over drawn regions."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document
from safecheck.record.place import Place

__all__ = ["FigureEntry", "RegionEntry"]


class FigureEntry(Document):
    """One measure of one candidate in one stratum, over frames: the middle never without its tail."""

    candidate: str
    stratum: str
    measure: str
    """Name in the table of measures."""
    window: str = ""
    """Window with its setting, for window measures: frames of another setting stand in another entry."""
    unit: str
    worse: Literal["higher", "lower"]
    """Which way the change is larger; of signed measures the size counts."""
    frames: int
    """Frames with a value."""
    without_value: int = 0
    reason: str = ""
    """Why frames have no value, where some have none."""
    median: float | None = None
    p05: float | None = None
    p95: float | None = None
    least: float | None = None
    largest: float | None = None
    worst: Place | None = None
    """Where the worst value was found."""


class RegionEntry(Document):
    """One region under one candidate, over the frames it covers."""

    candidate: str
    region: str
    label: str
    role: str
    unit: str
    frames: int
    area_mm2: float | None = None
    """Median over frames, as are the means, SDs, CNR and noise removed."""
    area_pixels: float
    rmse_median: float | None = None
    rmse_largest: float | None = None
    bias_median: float | None = None
    bias_largest_absolute: float | None = None
    max_largest: float | None = None
    mean_before: float | None = None
    mean_after: float | None = None
    sd_before: float | None = None
    sd_after: float | None = None
    background: str = ""
    contrast_before: float | None = None
    """Median of the mean of the region less that of its background, before."""
    contrast_after: float | None = None
    """The same after."""
    contrast_kept_percent: float | None = None
    """Median over frames of the contrast after by the contrast before."""
    contrast_kept_percent_p05: float | None = None
    """5th percentile of it over frames."""
    contrast_kept_percent_least: float | None = None
    """Least of it over frames."""
    cnr_before: float | None = None
    cnr_after: float | None = None
    cnr_after_least: float | None = None
    """Least over frames."""
    noise_removed_percent: float | None = None
    noise_removed_percent_largest: float | None = None
    """Largest over frames."""
    worst: Place | None = None
    """Where the largest error was found."""
