"""Inputs, strata and candidates, counted so that the sums agree."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal, cast

import numpy as np

from safecheck.policy.plan import Plan
from safecheck.record.document import CandidateEntry, CountEntry, InputCounts, StratumEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.groups import Groups
from safecheck.wording import ANALYSIS_CODEC, sentence_of

__all__ = ["DELIVERED", "candidate_entries", "input_counts", "left_out", "stratum_entries"]

DELIVERED = "delivered copies"
"""Name under which the copies that an archive returned stand among the candidates."""


def input_counts(inputs: TableReader, *, patient_unknown_studies: int) -> InputCounts:
    """Count the files of both sides by what became of them."""
    status_of, statuses = inputs.codes("status")
    side_of, sides = inputs.codes("side")

    def files(side: str, status: str = "") -> int:
        of_side = side_of == (sides.index(side) if side in sides else -1)
        if not status:
            return int(of_side.sum())
        return int((of_side & (status_of == (statuses.index(status) if status in statuses else -1))).sum())

    originals = side_of == (sides.index("original") if "original" in sides else -1)
    assessed = originals & (status_of == (statuses.index("assessed") if "assessed" in statuses else -1))
    return InputCounts(
        files=files("original"),
        assessed=files("original", "assessed"),
        excluded=files("original", "excluded"),
        refused=files("original", "refused"),
        frames_assessed=int(inputs.numbers("frames_assessed")[originals].sum()),
        frames_refused=int(inputs.numbers("frames_refused")[originals].sum()),
        patients=len(np.unique(inputs.codes("patient")[0][assessed])),
        studies=len(np.unique(inputs.codes("study")[0][assessed])),
        series=len(np.unique(inputs.codes("series")[0][assessed])),
        patient_unknown_studies=patient_unknown_studies,
        delivered_files=files("delivered"),
        delivered_assessed=files("delivered", "assessed"),
        delivered_excluded=files("delivered", "excluded"),
        delivered_refused=files("delivered", "refused"),
    )


def left_out(inputs: TableReader) -> Iterator[CountEntry]:
    """Yield the files left out, by side, status and reason."""
    rows = inputs.at(range(inputs.rows), ("side", "status", "reason"))
    counts: dict[tuple[str, str, str], int] = {}
    for row in rows:
        if row["status"] != "assessed":
            key = (row["side"], row["status"], row["reason"])
            counts[key] = counts.get(key, 0) + 1
    for (side, status, reason), files in sorted(counts.items()):
        yield CountEntry(
            side=cast("Literal['original', 'delivered']", side),
            status=cast("Literal['excluded', 'refused']", status),
            reason=reason,
            sentence=sentence_of(reason),
            files=files,
        )


def stratum_entries(groups: Groups) -> Iterator[StratumEntry]:
    """Yield each stratum once, counted over the pipe's reversible control, which runs once on every frame."""
    reader = groups.reader
    patient, study, series = (reader.codes(name)[0] for name in ("patient", "study", "series"))
    now, lossless = reader.numbers("source_bytes"), reader.numbers("lossless_bytes")
    for stratum, rows in groups.by_stratum(groups.of_candidate("reversible")):
        total = float(lossless[rows].sum())
        first = reader.at([int(rows[0])], ("modality", "unit"))[0]
        yield StratumEntry(
            stratum=stratum,
            modality=first["modality"],
            unit=first["unit"],
            patients=len(np.unique(patient[rows])),
            studies=len(np.unique(study[rows])),
            series=len(np.unique(series[rows])),
            frames=len(rows),
            bytes_now=int(now[rows].sum()),
            lossless_bytes=None if np.isnan(total) else int(total),
        )


def candidate_entries(plan: Plan, groups: Groups) -> Iterator[CandidateEntry]:
    """Yield the candidates, codecs that an archive can write first, then the delivered copies."""
    entries = [
        _candidate_entry(groups, candidate.name, candidate.status, candidate.ratio, str(candidate.basis))
        for candidate in plan.candidates
    ]
    yield from sorted(entries, key=lambda entry: not entry.archive_can_write)
    if len(groups.of_role("delivered")):
        yield _candidate_entry(groups, DELIVERED, "proposed", None, "")


def _candidate_entry(
    groups: Groups, name: str, status: Literal["proposed", "context"], ratio: float | None, basis: str
) -> CandidateEntry:
    """Count one candidate's frames by how its ratio was reached."""
    rows = groups.of_candidate(name)
    reached_of, reached = groups.reader.codes("reached")
    first = groups.reader.at([int(rows[0])], ("codec", "archive_can_write")) if len(rows) else []
    second = groups.reader.codes("generation")
    notes = [] if not first or first[0]["archive_can_write"] else [ANALYSIS_CODEC]
    if "second" in second[1] and (second[0][rows] == second[1].index("second")).any():
        notes.append("second generation: some sources were already lossy")
    return CandidateEntry(
        candidate=name,
        codec=first[0]["codec"] if first else name.split(" ")[0],
        role="delivered" if name == DELIVERED else "candidate",
        status=status,
        ratio_asked=ratio,
        basis=basis,
        archive_can_write=bool(first and first[0]["archive_can_write"]),
        note="; ".join(notes),
        frames=len(rows),
        reached={reached[code]: int((reached_of[rows] == code).sum()) for code in np.unique(reached_of[rows])},
    )
