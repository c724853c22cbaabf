"""Entries of the record about equal damage: at which ratio a codec does what the reference candidate does."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document

__all__ = ["Between", "EqualDamageEntry"]


class Between(Document):
    """A percentile over frames of which some are only known to lie beyond what was run; often one number."""

    least: float | None = None
    """It is not below this; None: some frames lie below what was run, and nothing is known downwards."""
    most: float | None = None
    """It is not above this; None: some frames lie above what was run. Equal to `least` where it is one number."""


class EqualDamageEntry(Document):
    """The ratio at which one codec does the damage of the reference candidate, by one measure in one stratum."""

    reference: str
    """Name of the reference candidate."""
    codec: str
    """Codec held beside it, with the settings that tell its candidates from those of another entry."""
    stratum: str
    measure: str
    """Name in the table of measures."""
    window: str = ""
    """Label of the window, for window measures."""
    region: str = ""
    """Label of the regions, for region measures; of several with one label on a frame the worst counts."""
    region_role: str = ""
    """Their role."""
    unit: str
    worse: Literal["higher", "lower"]
    """Which way the change is larger; of signed measures the size counts."""
    limits: tuple[str, ...] = ()
    """Names of the plan's limits that name the measure here."""
    candidates: int
    """Candidates of the codec between which the ratio is interpolated."""
    frames: int
    """Frames on which both gave a value and the reference changed something."""
    frames_below: int = 0
    """Of them, on which the codec does more damage even at the smallest ratio that was run on the frame."""
    frames_above: int = 0
    """Of them, on which it does less damage even at the largest."""
    frames_unchanged: int = 0
    """Frames beside them on which the reference changed nothing by this measure: no ratio is equal to that."""
    frames_without: int = 0
    """Frames beside them on which the reference or the codec gave no value."""
    reference_value: float | None = None
    """Median over the frames of the reference's value of the measure."""
    reference_ratio: float | None = None
    """Median over the frames of the reference's achieved ratio, bits-stored basis, to 1."""
    reference_bits_per_pixel: float | None = None
    """Median over the frames of the reference's bits per pixel."""
    ratio_median: Between = Between()
    """Median over the frames of the ratio at which the codec does the same damage, bits-stored basis, to 1."""
    ratio_p05: Between = Between()
    """5th percentile of it over frames."""
    ratio_p95: Between = Between()
    """95th percentile of it over frames."""
    bits_per_pixel_median: Between = Between()
    """Median over the frames of the bits per pixel at that ratio."""
