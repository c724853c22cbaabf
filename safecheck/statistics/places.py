"""The worst places: where each candidate moved values most, patches of one frame counting once."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from safecheck.record.candidates import CandidateEntry
from safecheck.record.worst import WorstPlaceEntry
from safecheck.statistics.groups import Groups, places_at

__all__ = ["PATCH", "PLACES_PER_STRATUM", "worst_places"]

PLACES_PER_STRATUM = 3
"""Worst places listed per candidate and stratum; all stand in the table of measures."""
PATCH = 8
"""Rows and columns of the patch."""


def worst_places(groups: Groups, candidates: tuple[CandidateEntry, ...]) -> Iterator[WorstPlaceEntry]:
    """Yield the frames with the largest patch RMSE of each candidate in each stratum, worst first."""
    values = groups.reader.numbers("worst_patch_rmse")
    for candidate in candidates:
        for stratum, rows in groups.by_stratum(groups.of_candidate(candidate.candidate)):
            known = rows[~np.isnan(values[rows])]
            # Stable: of equal values the first row stands first, so that the record repeats.
            order = known[np.argsort(-values[known], kind="stable")][:PLACES_PER_STRATUM]
            listed = [int(index) for index in order]
            places = places_at(groups.reader, listed, row="worst_patch_row", column="worst_patch_column")
            extents = groups.reader.at(listed, ("rows", "columns", "unit", "may_show_text", "worst_patch_region"))
            for rank, (index, place, extent) in enumerate(zip(listed, places, extents, strict=True), start=1):
                yield WorstPlaceEntry(
                    candidate=candidate.candidate,
                    stratum=stratum,
                    rank=rank,
                    measure="worst_patch_rmse",
                    unit=extent["unit"],
                    value=float(values[index]),
                    place=place,
                    rows=extent["rows"],
                    columns=extent["columns"],
                    size_rows=PATCH,
                    size_columns=PATCH,
                    in_region=extent["worst_patch_region"],
                    may_show_text=extent["may_show_text"],
                )
