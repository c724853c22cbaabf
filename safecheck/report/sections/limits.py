"""Every limit against every candidate, with the place of its worst value."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.outcomes import OutcomeEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import aligned_beside, count, plural
from safecheck.report.sections.front import limit_words, outcome_words, studies_words
from safecheck.report.sections.view import View, place_words, rest_sentence
from safecheck.wording import NO_LIMITS, SHORT_CAUTION

__all__ = ["limits"]

LINES = 400

_COLUMNS = (
    Column("Candidate"),
    Column("Outcome"),
    Column("Values outside", number=True),
    Column("Studies, patients"),
    Column("Worst value", number=True),
    Column("Place of the worst value"),
)


def limits(view: View) -> Section:
    """The section Limits and outcomes."""
    outcomes = view.outcomes()
    if not outcomes:
        return Section("Limits and outcomes", (Prose(f"{NO_LIMITS.capitalize()}."),))
    blocks: list[Block] = [Prose(SHORT_CAUTION, "caution")]
    rows: list[Row] = []
    for name in dict.fromkeys(item.limit for item in view.record.outcomes):
        same = [item for item in outcomes if item.limit == name]
        rows += [Row((_head(same),), group=True), *_rows(same)]
    note = rest_sentence(LINES, len(rows), "all stand in record.json")
    blocks.append(Table(_COLUMNS, tuple(rows[:LINES]), note=note))
    return Section("Limits and outcomes", tuple(blocks))


def _head(same: Sequence[OutcomeEntry]) -> str:
    """The limit in words, with the bound where all candidates share it."""
    item = same[0]
    unit = f" Worst value in {item.unit}." if item.unit != "1" else ""
    bound = f" {_capital(item.bound_text)}." if _one_bound(same) else ""
    return f"{limit_words(item)}. Declared by {item.declared_by} on {item.declared_on}.{unit}{bound}"


def _one_bound(same: Sequence[OutcomeEntry]) -> bool:
    """Whether all candidates have the same bound."""
    return len({item.bound_text for item in same}) == 1


def _capital(text: str) -> str:
    """The text with a capital first letter."""
    return text[:1].upper() + text[1:]


def _rows(same: Sequence[OutcomeEntry]) -> list[Row]:
    """All candidates under one limit."""
    worst = aligned_beside([item.worst_value for item in same], same[0].bound)
    shared = _one_bound(same)
    return [_row(item, value, shared=shared) for item, value in zip(same, worst, strict=True)]


def _row(item: OutcomeEntry, worst: str, *, shared: bool) -> Row:
    """One candidate under the limit."""
    candidate = item.candidate if item.status == "proposed" else f"{item.candidate} (context)"
    outcome = outcome_words(item)
    if item.reason:
        outcome += f" ({item.reason})"
    place = [_place(item), "" if shared else f"{_capital(item.bound_text)}."]
    if item.values_missing:
        place.append(f"{plural(item.values_missing, 'value')} not evaluated.")
    return Row(
        (
            candidate,
            outcome,
            f"{count(item.values_outside)} of {count(item.values)}",
            f"{studies_words(item)}; {_patients(item)}" if item.studies else studies_words(item),
            worst,
            " ".join(part for part in place if part),
        ),
        strong=item.outcome == "outside declared limits" and item.status == "proposed",
    )


def _patients(item: OutcomeEntry) -> str:
    """Patients within, of those in scope."""
    missing = f", {count(item.patients_not_evaluated)} not evaluated" if item.patients_not_evaluated else ""
    return f"in {count(item.patients_within)} of {plural(item.patients, 'patient')}{missing}"


def _place(item: OutcomeEntry) -> str:
    """Where the worst value was found: region, then place."""
    if item.worst is None:
        return ""
    region = f"region {item.worst_region}, " if item.worst_region else ""
    return _capital(f"{region}{place_words(item.worst)}.")
