"""The worst studies of each candidate, each with its worst series and frame: a mean over frames would hide them."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from safecheck.measures.catalogue import MEASURES
from safecheck.record.candidates import CandidateEntry
from safecheck.record.worst import WorstStudyEntry
from safecheck.statistics.groups import Groups, Indices, place_at

__all__ = ["STUDIES_PER_STRATUM", "STUDY_MEASURE", "worst_studies"]

STUDIES_PER_STRATUM = 3
"""Worst studies listed per candidate and stratum; all stand in the table of measures."""
STUDY_MEASURE = MEASURES["rmse_content"]
"""Measure by which studies are ranked: by their worst frame."""


def worst_studies(groups: Groups, candidates: tuple[CandidateEntry, ...]) -> Iterator[WorstStudyEntry]:
    """Yield the studies whose worst frame was moved most, by candidate and stratum, worst first."""
    values = groups.reader.numbers(STUDY_MEASURE.column)
    study_of, _ = groups.reader.codes("study")
    for candidate in candidates:
        for stratum, rows in groups.by_stratum(groups.of_candidate(candidate.candidate)):
            known = rows[~np.isnan(values[rows])]
            for rank, study in enumerate(_ranked(study_of[known], values[known]), start=1):
                own = known[study_of[known] == study]
                yield _entry(groups, candidate.candidate, stratum, rank, own, values)


def _ranked(studies: Indices, values: npt.NDArray[np.float64]) -> list[int]:
    """Studies by their largest value, largest first; of equals the first name."""
    codes, inverse = np.unique(studies, return_inverse=True)
    largest = np.full(len(codes), -np.inf)
    np.maximum.at(largest, inverse, values)
    return [int(code) for code in codes[np.argsort(-largest, kind="stable")][:STUDIES_PER_STRATUM]]


def _entry(
    groups: Groups, candidate: str, stratum: str, rank: int, rows: Indices, values: npt.NDArray[np.float64]
) -> WorstStudyEntry:
    """One study."""
    series_of, _ = groups.reader.codes("series")
    worst = int(rows[np.argmax(values[rows])])
    same_series = rows[series_of[rows] == series_of[worst]]
    return WorstStudyEntry(
        candidate=candidate,
        stratum=stratum,
        rank=rank,
        measure=STUDY_MEASURE.name,
        unit=groups.reader.at([worst], ["unit"])[0]["unit"],
        frames=len(rows),
        series=len(np.unique(series_of[rows])),
        median=float(np.median(values[rows])),
        largest=float(values[worst]),
        worst=place_at(groups.reader, worst),
        worst_series_median=float(np.median(values[same_series])),
    )
