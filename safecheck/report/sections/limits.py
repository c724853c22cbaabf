"""Every limit against every candidate, with the place of its worst value."""

from __future__ import annotations

from safecheck.record.document import OutcomeEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import NONE, count, figure
from safecheck.report.sections.front import outcome_order
from safecheck.report.sections.view import View, place_words, rest_sentence
from safecheck.wording import NO_LIMITS, SHORT_CAUTION

__all__ = ["limits"]

LINES = 400

_COLUMNS = (
    Column("Candidate"),
    Column("Outcome"),
    Column("Values", "outside of all", number=True),
    Column("Studies", "within of all", number=True),
    Column("Patients", "within of all", number=True),
    Column("Worst value", "unit of the limit", number=True),
    Column("Bound, and place of the worst value"),
)


def limits(view: View) -> Section:
    """The section Limits and outcomes."""
    outcomes = view.record.outcomes
    if not outcomes:
        return Section("Limits and outcomes", (Prose(f"{NO_LIMITS.capitalize()}."),))
    blocks: list[Block] = [Prose(SHORT_CAUTION, "caution")]
    rows: list[Row] = []
    for name in dict.fromkeys(item.limit for item in outcomes):
        same = sorted((item for item in outcomes if item.limit == name), key=outcome_order)
        rows += [Row((_head(same[0]),), group=True), *(_row(item) for item in same)]
    note = rest_sentence(LINES, len(rows), "all stand in record.json")
    blocks.append(Table(_COLUMNS, tuple(rows[:LINES]), note=note))
    return Section("Limits and outcomes", tuple(blocks))


def _head(item: OutcomeEntry) -> str:
    """The limit in words."""
    unit = "" if item.unit == "1" else f" {item.unit}"
    return (
        f"{item.limit}: {item.measure} {item.side} {figure(item.bound)}{unit}, for {item.scope}. "
        f"Declared by {item.declared_by} on {item.declared_on}."
    )


def _row(item: OutcomeEntry) -> Row:
    """One candidate under the limit."""
    candidate = item.candidate if item.status == "proposed" else f"{item.candidate} (context)"
    outcome = str(item.outcome)
    if item.over_compressed_also_within:
        outcome += "; does not tell the over-compressed control apart"
    if item.reason:
        outcome += f" ({item.reason})"
    missing = f" {count(item.values_missing)} values not evaluated." if item.values_missing else ""
    place = f" {place_words(item.worst)}." if item.worst else ""
    bound = item.bound_text[:1].upper() + item.bound_text[1:]
    return Row(
        (
            candidate,
            outcome,
            f"{count(item.values_outside)} of {count(item.values)}",
            f"{count(item.studies_within)} of {count(item.studies)}",
            f"{count(item.patients_within)} of {count(item.patients)}",
            figure(item.worst_value) if item.worst_value is not None else NONE,
            f"{bound}.{missing}{place[:2].upper()}{place[2:]}",
        ),
        strong=item.outcome == "outside declared limits" and item.status == "proposed",
    )
