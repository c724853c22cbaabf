"""Every limit against every candidate, with the place of its worst value."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from safecheck.record.outcomes import OutcomeEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import NONE, aligned_beside, count, figure, joined, plural
from safecheck.report.sections.front import limit_words, outcome_words
from safecheck.report.sections.view import View, place_brief, rest_sentence
from safecheck.wording import NO_LIMITS, SHORT_CAUTION

__all__ = ["limits"]

LINES = 400

_BOUND_COLUMN = Column("Bound", "% of patients", number=True)
_COLUMNS: tuple[Column, ...] = (
    Column("Candidate"),
    Column("Outcome"),
    Column("Values outside", number=True),
    Column("studies", number=True, over="Within"),
    Column("patients", number=True, over="Within"),
    _BOUND_COLUMN,
    Column("Worst value", number=True),
    Column("Place of the worst value"),
)
_BOUND = "Bound: at most so many of the patients exceed it, one-sided 95 %; a dash where the sample carries no bound."


def limits(view: View) -> Section:
    """The section Limits and outcomes."""
    outcomes = view.outcomes()
    if not outcomes:
        return Section("Limits and outcomes", (Prose(f"{NO_LIMITS.capitalize()}."),))
    blocks: list[Block] = [Prose(SHORT_CAUTION, "caution")]
    rows: list[Row] = []
    groups = [[item for item in outcomes if item.limit == name] for name in _names(view)]
    for same in groups:
        rows += [Row((_head(same),), group=True), *_rows(same)]
    blocks.append(_table(rows, bounds=not all(map(_one_bound, groups))))
    return Section("Limits and outcomes", tuple(blocks))


def _names(view: View) -> tuple[str, ...]:
    """Names of the limits, in the plan's order."""
    return tuple(dict.fromkeys(item.limit for item in view.record.outcomes))


def _table(rows: Sequence[Row], *, bounds: bool) -> Table:
    """The table; a column of bounds only where candidates under a limit have several."""
    rest = rest_sentence(LINES, len(rows), "all stand in record.json")
    shown = tuple(rows[:LINES])
    if bounds:
        return Table(_COLUMNS, shown, note=f"{_BOUND} {rest}".strip())
    at = _COLUMNS.index(_BOUND_COLUMN)
    shown = tuple(row if row.group else replace(row, cells=row.cells[:at] + row.cells[at + 1 :]) for row in shown)
    return Table(_COLUMNS[:at] + _COLUMNS[at + 1 :], shown, note=rest)


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
    return [_row(item, value) for item, value in zip(same, worst, strict=True)]


def _row(item: OutcomeEntry, worst: str) -> Row:
    """One candidate under the limit."""
    candidate = item.candidate if item.status == "proposed" else f"{item.candidate} (context)"
    outcome = outcome_words(item)
    if item.reason:
        outcome += f" ({item.reason})"
    return Row(
        (
            candidate,
            outcome,
            f"{count(item.values_outside)} of {count(item.values)}",
            f"{count(item.studies_within)} of {count(item.studies)}",
            f"{count(item.patients_within)} of {count(item.patients)}",
            NONE if item.upper_bound_percent is None else figure(item.upper_bound_percent),
            worst,
            " ".join(part for part in (_place(item), *_missing(item)) if part),
        ),
        strong=item.outcome == "outside declared limits" and item.status == "proposed",
    )


def _missing(item: OutcomeEntry) -> Iterator[str]:
    """Yield what gave no value."""
    parts = [
        plural(item.values_missing, "value") if item.values_missing else "",
        plural(item.studies_not_evaluated, "study", "studies") if item.studies_not_evaluated else "",
        plural(item.patients_not_evaluated, "patient") if item.patients_not_evaluated else "",
    ]
    named = joined([part for part in parts if part])
    if named:
        yield f"Not evaluated: {named}."
    if item.frames_not_run:
        yield f"{_capital(plural(item.frames_not_run, 'frame'))} not taken by the codec."


def _place(item: OutcomeEntry) -> str:
    """Where the worst value was found: region, then place."""
    if item.worst is None:
        return ""
    region = f"region {item.worst_region}, " if item.worst_region else ""
    return _capital(f"{region}{place_brief(item.worst)}.")
