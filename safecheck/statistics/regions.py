"""Regions: one line per region and candidate over the frames it covers."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from safecheck.record.candidates import CandidateEntry
from safecheck.record.figures import RegionEntry
from safecheck.statistics.groups import Groups, Indices, place_at

__all__ = ["region_entries"]

_MIDDLES = (
    "area_mm2",
    "area_pixels",
    "mean_before",
    "mean_after",
    "sd_before",
    "sd_after",
    "contrast_before",
    "contrast_after",
    "cnr_before",
    "cnr_after",
    "noise_removed_percent",
)
"""Columns of which the entry holds the median over frames."""


def region_entries(groups: Groups, candidates: tuple[CandidateEntry, ...]) -> Iterator[RegionEntry]:
    """Yield an entry for each candidate, region and unit."""
    if not groups.reader.rows:
        return
    region_of, regions = groups.reader.codes("region")
    unit_of, units = groups.reader.codes("unit")
    numbers = {name: groups.reader.numbers(name) for name in (*_MIDDLES, "rmse", "bias", "max")}
    for candidate in candidates:
        rows = groups.of_candidate(candidate.candidate)
        for region in np.unique(region_of[rows]):
            of_region = rows[region_of[rows] == region]
            for unit in np.unique(unit_of[of_region]):
                same = of_region[unit_of[of_region] == unit]
                yield _entry(groups, candidate.candidate, regions[region], units[unit], same, numbers)


def _entry(
    groups: Groups,
    candidate: str,
    region: str,
    unit: str,
    rows: Indices,
    numbers: dict[str, npt.NDArray[np.float64]],
) -> RegionEntry:
    """Figures of one region under one candidate."""
    texts = groups.reader.at([int(rows[0])], ("label", "region_role", "background"))[0]
    known = rows[~np.isnan(numbers["max"][rows])]
    worst = int(known[np.argmax(numbers["max"][known])]) if len(known) else None
    middles = {name: _median(numbers[name][rows]) for name in _MIDDLES}
    before, after = numbers["contrast_before"][rows], numbers["contrast_after"][rows]
    with np.errstate(divide="ignore", invalid="ignore"):
        kept = np.where(before != 0, 100 * after / before, np.nan)
    return RegionEntry(
        candidate=candidate,
        region=region,
        label=texts["label"],
        role=texts["region_role"],
        unit=unit,
        frames=len(rows),
        area_mm2=middles.pop("area_mm2"),
        area_pixels=middles.pop("area_pixels") or 0.0,
        rmse_median=_median(numbers["rmse"][rows]),
        rmse_largest=_largest(numbers["rmse"][rows]),
        bias_median=_median(numbers["bias"][rows]),
        bias_largest_absolute=_largest(np.abs(numbers["bias"][rows])),
        max_largest=_largest(numbers["max"][rows]),
        background=texts["background"],
        contrast_kept_percent=_median(kept),
        contrast_kept_percent_p05=_percentile(kept, 5),
        contrast_kept_percent_least=_percentile(kept, 0),
        cnr_after_least=_percentile(numbers["cnr_after"][rows], 0),
        noise_removed_percent_largest=_largest(numbers["noise_removed_percent"][rows]),
        worst=None if worst is None else place_at(groups.reader, worst, row="max_row", column="max_column"),
        **middles,
    )


def _known(values: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    return values[~np.isnan(values)]


def _median(values: npt.NDArray[np.float64]) -> float | None:
    """Median of what is known; None of nothing."""
    known = _known(values)
    return float(np.median(known)) if len(known) else None


def _percentile(values: npt.NDArray[np.float64], percent: float) -> float | None:
    """Percentile of what is known, by linear interpolation; None of nothing."""
    known = _known(values)
    return float(np.percentile(known, percent)) if len(known) else None


def _largest(values: npt.NDArray[np.float64]) -> float | None:
    """Largest of what is known; None of nothing."""
    known = _known(values)
    return float(known.max()) if len(known) else None
