"""Inputs, strata and candidates, counted so that the sums agree."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from typing import Literal, cast

import numpy as np

from safecheck.policy.plan import Plan, asked_of
from safecheck.record.candidates import CandidateEntry
from safecheck.record.inputs import CountEntry, InputCounts, StratumEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.groups import Groups
from safecheck.statistics.series_ratios import series_missed
from safecheck.statistics.spread import spread
from safecheck.wording import ANALYSIS_CODEC, DELIVERED_COPIES, sentence_of

__all__ = ["candidate_entries", "input_counts", "left_out", "stratum_entries"]


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
    """Yield the files left out, and the frames refused inside others, by side, status and reason."""
    rows = inputs.at(range(inputs.rows), ("side", "status", "reason", "frames_refused"))
    files: Counter[tuple[str, str, str]] = Counter()
    frames: Counter[tuple[str, str, str]] = Counter()
    for row in rows:
        if row["status"] != "assessed":
            files[row["side"], row["status"], row["reason"]] += 1
        elif row["frames_refused"]:
            frames[row["side"], "refused", row["reason"]] += row["frames_refused"]
    for side, status, reason in sorted(files.keys() | frames.keys()):
        yield CountEntry(
            side=cast("Literal['original', 'delivered']", side),
            status=cast("Literal['excluded', 'refused']", status),
            reason=reason,
            sentence=sentence_of(reason),
            files=files[side, status, reason],
            frames=frames[side, status, reason],
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


def candidate_entries(plan: Plan, groups: Groups, archive_codecs: frozenset[str]) -> Iterator[CandidateEntry]:
    """Yield the candidates, codecs that an archive can write first, then the delivered copies.

    Parameters
    ----------
    plan
        Names the candidates, whether or not any frame was run with them.
    groups
        Table of measures.
    archive_codecs
        Names of the codecs that a DICOM archive can write.
    """
    for candidate in sorted(plan.candidates, key=lambda candidate: candidate.codec not in archive_codecs):
        can_write = candidate.codec in archive_codecs
        asked = asked_of(candidate.ratio, candidate.per)
        yield CandidateEntry(
            candidate=candidate.name,
            codec=candidate.codec,
            role="candidate",
            status=candidate.status,
            asked=asked,
            ratio_asked=candidate.ratio,
            basis="" if candidate.ratio is None else str(candidate.basis),
            dial=_dial(groups, candidate.name),
            archive_can_write=can_write,
            note=_notes(groups, candidate.name, "" if can_write else ANALYSIS_CODEC),
            frames=len(groups.of_candidate(candidate.name)),
            reached=_reached(groups, candidate.name),
            spread=tuple(spread(groups, candidate.name, asked)),
            series_missed=series_missed(groups, candidate),
        )
    if len(groups.of_role("delivered")):
        yield CandidateEntry(
            candidate=DELIVERED_COPIES,
            codec="delivered",
            role="delivered",
            status="proposed",
            archive_can_write=True,
            note=_notes(groups, DELIVERED_COPIES, ""),
            frames=len(groups.of_candidate(DELIVERED_COPIES)),
            reached={},
            spread=tuple(spread(groups, DELIVERED_COPIES, "")),
        )


def _dial(groups: Groups, name: str) -> str:
    """Name of the setting that sets a candidate's size; '' where no frame was run with it."""
    rows = groups.of_candidate(name)
    dial_of, dials = groups.reader.codes("dial")
    return dials[dial_of[rows[0]]] if len(rows) else ""


def _notes(groups: Groups, name: str, note: str) -> str:
    """A candidate's note, with what must be said of its sources."""
    rows = groups.of_candidate(name)
    generation_of, generations = groups.reader.codes("generation")
    notes = [note] if note else []
    if "second" in generations and (generation_of[rows] == generations.index("second")).any():
        notes.append("second generation: some sources were already lossy")
    return "; ".join(notes)


def _reached(groups: Groups, name: str) -> dict[str, int]:
    """Frames by what `reached` says."""
    rows = groups.of_candidate(name)
    reached_of, words = groups.reader.codes("reached")
    return {words[code]: int((reached_of[rows] == code).sum()) for code in np.unique(reached_of[rows])}
