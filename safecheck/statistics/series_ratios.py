"""Where one setting serves a series: the ratio that each series got in all, beside the one asked for."""

from __future__ import annotations

import numpy as np

from safecheck.frames import SizeBasis
from safecheck.policy.plan import CandidatePlan
from safecheck.record.candidates import SeriesMissedEntry
from safecheck.statistics.groups import Groups

__all__ = ["TOLERANCE", "series_missed"]

TOLERANCE = 0.01
"""Part of the ratio asked for by which the total of a series may differ before it is told."""

_COLUMNS = {
    SizeBasis.BITS_STORED: "ratio_bits_stored",
    SizeBasis.BITS_ALLOCATED: "ratio_bits_allocated",
    SizeBasis.CONTENT: "ratio_content",
    SizeBasis.LOSSLESS: "times_smaller_than_lossless",
    SizeBasis.NOW: "times_smaller_than_now",
}


def series_missed(groups: Groups, candidate: CandidatePlan) -> SeriesMissedEntry | None:
    """Count the series whose bytes in all, on the basis asked, miss the ratio; None where none does.

    Parameters
    ----------
    groups
        Table of measures.
    candidate
        Any; one that asks for no ratio per series misses none.
    """
    rows = groups.of_candidate(candidate.name)
    if candidate.ratio is None or candidate.per != "series" or not len(rows):
        return None
    code = groups.reader.numbers("code_bytes")[rows]
    before = code * groups.reader.numbers(_COLUMNS[candidate.basis])[rows]
    series_of, _ = groups.reader.codes("series")
    _, each, frames = np.unique(series_of[rows], return_inverse=True, return_counts=True)
    ratios = np.bincount(each, before) / np.bincount(each, code)
    missed = np.abs(ratios / candidate.ratio - 1) > TOLERANCE
    if not missed.any():
        return None
    return SeriesMissedEntry(
        series=int(missed.sum()),
        of_series=len(ratios),
        frames=int(frames[missed].sum()),
        ratio_least=float(ratios[missed].min()),
        ratio_largest=float(ratios[missed].max()),
    )
