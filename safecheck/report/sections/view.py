"""The record with its entries found by name, and the words that several sections share."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from safecheck.errors import DossierError
from safecheck.record.candidates import CandidateEntry, LedgerEntry
from safecheck.record.document import RecordDocument
from safecheck.record.figures import FigureEntry
from safecheck.record.inputs import StratumEntry
from safecheck.record.outcomes import OutcomeEntry
from safecheck.record.place import Place
from safecheck.record.run import RunFacts
from safecheck.report.numbers import NONE, count, figure, plural
from safecheck.wording import CAUTIONS_WHEN, NO_LIMITS, RECORD_TITLE

__all__ = [
    "View",
    "dash",
    "is_analysis",
    "names_with_status",
    "place_brief",
    "place_short",
    "place_words",
    "rest_sentence",
    "stratum_line",
    "view_of",
    "window_words",
]


@dataclass(frozen=True, slots=True)
class View:
    """What every section reads."""

    record: RecordDocument
    run: RunFacts
    record_sha256: str
    crops: Path | None
    """The folder of crops; None draws without images."""
    candidates: tuple[CandidateEntry, ...]
    """Codecs that an archive can write first, then delivered copies, then analysis codecs."""
    figures: dict[tuple[str, str, str, str], FigureEntry]
    """By candidate, stratum, measure and window."""
    ledger: dict[tuple[str, str], LedgerEntry]
    """By candidate and stratum."""

    @property
    def change(self) -> dict[str, str]:
        """The plan's table on the change, as read; empty where the plan has none."""
        table = self.record.plan.content.get("change")
        return {key: str(value) for key, value in table.items() if value is not None} if isinstance(table, dict) else {}

    @property
    def subject(self) -> str:
        """What is to be decided, in one line."""
        title = self.record.title
        return self.change.get("title") or (title if title != RECORD_TITLE else "")

    @property
    def second_generation(self) -> bool:
        """Whether sources that were already lossy were assessed."""
        return CAUTIONS_WHEN["already_lossy"] in self.record.cautions

    def in_stratum(self, stratum: StratumEntry) -> tuple[CandidateEntry, ...]:
        """Candidates with figures or bytes in a stratum, in order."""
        with_figures = {(candidate, name) for candidate, name, _, _ in self.figures}
        known = with_figures | self.ledger.keys()
        return tuple(entry for entry in self.candidates if (entry.candidate, stratum.stratum) in known)

    def figure(self, candidate: str, stratum: str, measure: str, window: str = "") -> FigureEntry | None:
        """Figures of one measure, or None."""
        return self.figures.get((candidate, stratum, measure, window))

    @property
    def without_limits(self) -> bool:
        """Whether the plan declares no limit."""
        return not self.record.outcomes and self.record.outcomes_text in ("", NO_LIMITS)

    @property
    def ran(self) -> bool:
        """Whether any frame was assessed."""
        return self.record.inputs.frames_assessed > 0

    def outcomes(self, status: str = "") -> list[OutcomeEntry]:
        """Outcomes of all candidates or those of one status: outside first, then not evaluated, then within."""
        rank = {item.candidate: index for index, item in enumerate(self.candidates)}
        wanted = [item for item in self.record.outcomes if status in ("", item.status)]
        return sorted(wanted, key=lambda item: (_ORDER.index(item.outcome), rank.get(item.candidate, len(rank))))

    def windows(self, stratum: str) -> tuple[str, ...]:
        """Labels of the windows that a stratum has figures for, in the record's order."""
        labels = [window for _, name, _, window in self.figures if name == stratum and window]
        return tuple(dict.fromkeys(labels))


_ORDER = ("outside declared limits", "not evaluated", "within declared limits")


def window_words(window: str, unit: str) -> str:
    """Name a window with its setting, and the setting with its unit."""
    return re.sub(r"(width [-+.e\d]+)\)$", lambda found: f"{found.group(1)} {unit})", window)


def view_of(record: RecordDocument, record_sha256: str, run: RunFacts, crops: Path | None) -> View:
    """Index a record.

    Raises
    ------
    DossierError
        If two of its figures or ledgers go by one name, so that one would hide the other.
    """
    rank = {"candidate": 0, "delivered": 1}
    ordered = sorted(record.candidates, key=lambda item: (is_analysis(item), rank[item.role]))
    figures = {(item.candidate, item.stratum, item.measure, item.window): item for item in record.figures}
    ledger = {(item.candidate, item.stratum): item for item in record.ledger}
    if len(figures) != len(record.figures) or len(ledger) != len(record.ledger):
        raise DossierError("the record holds two entries for one candidate, group of like images, measure and window")
    return View(record, run, record_sha256, crops, tuple(ordered), figures, ledger)


def place_words(place: Place) -> str:
    """Name a place in full, under pseudonyms."""
    return f"patient {place.patient}, study {place.study}, {_from_series(place)}"


def place_brief(place: Place) -> str:
    """Name a place in full where room is short: a pseudonym's first letter tells what it is of."""
    return f"{place.patient}, {place.study}, {_from_series(place)}"


def _from_series(place: Place) -> str:
    """Series, and place within it."""
    series = place.series_number if place.series_number is not None else place.series
    return f"series {series}, {place_short(place)}"


def place_short(place: Place) -> str:
    """Name a place within its series: image, frame, row and column, and position along the patient."""
    image = f"image {place.instance_number}" if place.instance_number is not None else place.instance
    parts = [image, f"frame {count(place.frame)}"]
    if place.row is not None and place.column is not None:
        parts.append(f"row {count(place.row)}, column {count(place.column)}")
    if place.slice_position_mm is not None:
        parts.append(f"slice at {figure(place.slice_position_mm, 4)} mm")
    return ", ".join(parts)


def rest_sentence(shown: int, total: int, where: str = "all stand in the tables") -> str:
    """Say how much of a long list was cut, or nothing."""
    return f"and {count(total - shown)} more; {where}" if total > shown else ""


def stratum_line(stratum: StratumEntry) -> str:
    """Counts of a stratum in one sentence."""
    return (
        f"{plural(stratum.frames, 'frame')} of {plural(stratum.series, 'series', 'series')}, "
        f"{plural(stratum.studies, 'study', 'studies')}, {plural(stratum.patients, 'patient')}. "
        f"Errors in {stratum.unit}."
    )


def is_analysis(item: CandidateEntry) -> bool:
    """Whether a candidate's codec is one that no archive can write; delivered copies came from an archive."""
    return item.role == "candidate" and not item.archive_can_write


def names_with_status(candidates: Sequence[CandidateEntry]) -> tuple[str, ...]:
    """Name candidates with what a reader of the row must know: 'context', 'second generation'."""
    return tuple(_name(item) for item in candidates)


def _name(item: CandidateEntry) -> str:
    """One candidate's name with its marks."""
    marks = ["context"] if item.status == "context" else []
    if "second generation" in item.note:
        marks.append("second generation")
    return f"{item.candidate} ({', '.join(marks)})" if marks else item.candidate


def dash(text: str) -> str:
    """Return a dash for an empty text."""
    return text or NONE
