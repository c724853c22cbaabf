"""Copies that the archive delivered: pairs, headers as found, and errors."""

from __future__ import annotations

from safecheck.record.document import DeliveredEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import aligned, count, joined, plural
from safecheck.report.sections.view import View, dash, place_short, rest_sentence

__all__ = ["delivered"]


def delivered(view: View) -> Section:
    """The section Delivered copies."""
    found = view.record.delivered
    if found is None:
        text = "No delivered copies were handed in. What the archive really writes was not examined."
        return Section("Delivered copies", (Prose(text),))
    how = joined([f"{count(number)} by {name}" for name, number in sorted(found.matched_by.items())])
    line = (
        f"{plural(found.pairs, 'pair')} matched{f' ({how})' if how else ''}. "
        f"{plural(found.originals_without_copy, 'original')} without a copy, "
        f"{plural(found.copies_without_original, 'copy', 'copies')} without an original. Never matched by pixels alone."
    )
    return Section("Delivered copies", (Prose(line), *_headers(found), *_pairs(found)))


def _headers(found: DeliveredEntry) -> list[Block]:
    """Attributes as found, beside what the standard asks."""
    if not found.expectations:
        return []
    columns = (
        Column("Attribute"),
        Column("What the standard asks"),
        Column("Found"),
        Column("As asked", "copies", number=True),
        Column("Not as asked", "copies", number=True),
    )
    rows = tuple(
        Row(
            (
                item.attribute,
                item.asked,
                "; ".join(f"{text or 'absent'}: {count(number)}" for text, number in sorted(item.found.items())),
                count(item.as_asked),
                count(item.not_as_asked),
            ),
            strong=bool(item.not_as_asked),
        )
        for item in found.expectations
    )
    return [Heading("Headers of the copies"), Table(columns, rows)]


def _pairs(found: DeliveredEntry) -> list[Block]:
    """The pairs with the largest errors."""
    shown = found.shown
    if not shown:
        return []
    columns = (
        Column("Original"),
        Column("Matched by"),
        Column("Ratio in header", "as written", number=True),
        Column("Bits allocated", "to 1", number=True),
        Column("Bits stored", "to 1", number=True),
        Column("Largest error, frame", number=True),
        Column("RMSE, frame", number=True),
        Column("Unit of errors"),
    )
    cells = zip(
        [f"{item.original.study}, {place_short(item.original)}" for item in shown],
        [item.how for item in shown],
        [dash(item.ratio_header) for item in shown],
        aligned([item.ratio_bits_allocated for item in shown], 2),
        aligned([item.ratio_bits_stored for item in shown], 2),
        aligned([item.max_frame for item in shown]),
        aligned([item.rmse_frame for item in shown]),
        [item.unit for item in shown],
        strict=True,
    )
    note = rest_sentence(len(shown), found.pairs)
    return [Heading("Pairs, largest error first"), Table(columns, tuple(Row(row) for row in cells), note=note)]
