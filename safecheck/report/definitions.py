"""What each figure of the record means: its formula, the pixels it is taken over, and the source of the formula."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType

from safecheck.report.formulas import FORMULAS

__all__ = ["CONTENT_RULES", "REGION_FIGURES", "TERMS", "Definition", "definition_of", "label_of"]


@dataclass(frozen=True, slots=True)
class Definition:
    """A measure as the record explains it."""

    label: str
    formula: str
    source: str


TERMS: tuple[tuple[str, str], ...] = (
    ("Error", "after minus before, in the unit of the image; never the other way round"),
    (
        "Candidate",
        "one codec at one asked ratio or one setting, or the copies that an archive delivered; only proposed "
        "candidates decide the exit code, those for context are shown beside them",
    ),
    (
        "Dial",
        "the setting by which the size of a codec's code is set: a ratio, a step, a quality, a largest error",
    ),
    (
        "Reference frame",
        "with a ratio per series, the middle frame of those assessed, in order along the normal of the slices, then "
        "instance number, then frame number; where it cannot be read or coded, the next nearest to the middle",
    ),
    (
        "Bases of a ratio",
        "bits stored: pixels × channels × bits stored ÷ 8; bits allocated: the same with bits allocated; content: "
        "the first, content pixels only; lossless: bytes of the smaller of JPEG-LS and JPEG 2000 5/3; now: bytes as "
        "they lie in the archive. The bytes after are those of the code stream alone",
    ),
    ("Content", "pixels that are not padding and, where the rule of the modality says so, not surrounding air"),
    ("Patch", "complete window of 8×8 pixels on a fixed grid from (0, 0), with at least half content"),
    (
        "Window",
        "a display window that turns values into display levels from 0 to 255, here unrounded. A file window is one "
        "that the file carries; its centre and width stand beside its name and with each row of windows.parquet",
    ),
    (
        "Group of like images",
        "images that a policy would treat alike: modality, body part, class of slice thickness, kernel",
    ),
    (
        "Over-compressed control",
        "a recompression far beyond every candidate: a limit that it meets as well cannot tell damage",
    ),
    (
        "Bound",
        "exact one-sided 95 % upper bound (Clopper and Pearson 1934) on the share of patients with an exceedance; "
        "stands only where studies were drawn at random",
    ),
    ("Percentiles", "over frames, with linear interpolation between the two nearest"),
)
"""Words of the record, in the order in which they are explained."""


CONTENT_RULES: MappingProxyType[str, str] = MappingProxyType(
    {
        "ct-air-1": (
            "all but padding and surrounding air: 4-connected areas below −500 HU that touch the frame's border or "
            "padding and whose mean lies below −900 HU"
        ),
        "mr-background-1": (
            "all but padding and background: 4-connected areas that touch the border or padding and, after a mean of "
            "3×3, lie at or below 2.5 σ; σ is the first quartile of the border ÷ 0.7585, as of Rayleigh noise"
        ),
        "padding-only-1": "all but padding: where the modality has no rule of its own, or its rule gives way",
    }
)
"""Content rule -> what it takes for content."""

REGION_FIGURES: tuple[tuple[str, str, str], ...] = (
    (
        "Region: RMSE, mean error",
        "√(Σ w e² ÷ Σ w) and Σ w e ÷ Σ w; w the share of each pixel that the region covers",
        "common definition",
    ),
    ("Region: mean, SD", "m = Σ w x ÷ Σ w and √(Σ w (x − m)² ÷ Σ w): of an area, not of a sample", "common definition"),
    ("Region: contrast", "m of the region − m of its background", "common definition"),
    ("Region: contrast kept", "100 × contrast after ÷ contrast before, per frame", "definition stated here"),
    ("Region: CNR", "|contrast| ÷ SD of the background; null without a background", "common definition"),
    (
        "Region: noise removed",
        "100 × (1 − SD of the background after ÷ before); below 0 where noise was added",
        "definition stated here",
    ),
)
"""Figures of the region tables: name, formula and domain, source."""


def definition_of(measure: str) -> Definition | None:
    """Return the definition of a measure by its name in the tables, or None for a name without one."""
    known = FORMULAS.get(measure)
    return Definition(*known) if known else None


def label_of(measure: str) -> str:
    """Return how the record names a measure; a name without a label stands with its words apart."""
    known = FORMULAS.get(measure)
    return known[0] if known else measure.replace("_", " ")
