"""Every limit against every candidate, with the place of its worst value."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.document import OutcomeEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import aligned, count
from safecheck.report.sections.front import limit_words, outcome_words
from safecheck.report.sections.view import View, place_words, rest_sentence
from safecheck.wording import NO_LIMITS, SHORT_CAUTION

__all__ = ["limits"]

LINES = 400

_COLUMNS = (
    Column("Candidate"),
    Column("Outcome"),
    Column("Values outside", number=True),
    Column("Studies within", number=True),
    Column("Patients within", number=True),
    Column("Worst value", number=True),
    Column("Bound, and place of the worst value"),
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
        rows += [Row((_head(same[0]),), group=True), *_rows(same)]
    note = rest_sentence(LINES, len(rows), "all stand in record.json")
    blocks.append(Table(_COLUMNS, tuple(rows[:LINES]), note=note))
    return Section("Limits and outcomes", tuple(blocks))


def _head(item: OutcomeEntry) -> str:
    """The limit in words."""
    unit = f", in {item.unit}" if item.unit != "1" else ""
    return f"{limit_words(item)}. Declared by {item.declared_by} on {item.declared_on}. Worst value{unit}"


def _rows(same: Sequence[OutcomeEntry]) -> list[Row]:
    """All candidates under one limit."""
    worst = aligned([item.worst_value for item in same])
    return [_row(item, value) for item, value in zip(same, worst, strict=True)]


def _row(item: OutcomeEntry, worst: str) -> Row:
    """One candidate under the limit."""
    candidate = item.candidate if item.status == "proposed" else f"{item.candidate} (context)"
    outcome = outcome_words(item)
    if item.reason:
        outcome += f" ({item.reason})"
    missing = f" {count(item.values_missing)} values not evaluated." if item.values_missing else ""
    place = f" At {place_words(item.worst)}." if item.worst else ""
    bound = item.bound_text[:1].upper() + item.bound_text[1:]
    return Row(
        (
            candidate,
            outcome,
            f"{count(item.values_outside)} of {count(item.values)}",
            f"{count(item.studies_within)} of {count(item.studies)}",
            f"{count(item.patients_within)} of {count(item.patients)}",
            worst,
            f"{bound}.{missing}{place}",
        ),
        strong=item.outcome == "outside declared limits" and item.status == "proposed",
    )
