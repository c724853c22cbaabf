"""Copies that the archive delivered: pairs, headers as found, and errors."""

from __future__ import annotations

from safecheck.record.delivered import DeliveredEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import aligned, count, header_ratio, joined, plural
from safecheck.report.sections.front import delivered_line
from safecheck.report.sections.view import View, dash, place_short, rest_sentence

__all__ = ["delivered"]


def delivered(view: View) -> Section:
    """The section Delivered copies."""
    found = view.record.delivered
    if found is None:
        text = "No delivered copies were handed in. What the archive really writes was not examined."
        return Section("Delivered copies", (Prose(text),))
    blocks: list[Block] = [Prose(text, "strong") for text in (delivered_line(found),) if not found.pairs_measured]
    how = joined([f"{count(number)} by {name}" for name, number in sorted(found.matched_by.items())])
    line = (
        f"{plural(found.pairs, 'pair')} matched{f' ({how})' if how else ''}. "
        f"{plural(found.originals_without_copy, 'original')} without a copy, "
        f"{plural(found.copies_without_original, 'copy', 'copies')} without an original. Never matched by pixels alone."
    )
    blocks += [Prose(line), Prose(_sum_line(found)), *_headers(found), *_pairs(found)]
    return Section("Delivered copies", tuple(blocks))


def _sum_line(found: DeliveredEntry) -> str:
    """What became of the pairs, with the sum, and how many copies are equal to their originals."""
    rest = found.pairs - found.pairs_measured - found.pairs_out_of_scope
    line = (
        f"{plural(found.pairs, 'pair')} = {count(found.pairs_measured)} measured + "
        f"{count(found.pairs_out_of_scope)} whose original the plan's scope leaves out + {count(rest)} not measured"
    )
    line = f"{line}." if rest >= 0 else f"{line}: THE SUMS DO NOT AGREE."
    if not found.pairs_unchanged:
        return line
    return (
        f"{line} Of those measured, {count(found.pairs_unchanged)} unchanged: every sample of the copy equals the "
        "original's, and their headers are not held against what the standard asks of a lossy copy."
    )


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
        Column("Ratio in header", "as in the header", number=True),
        Column("Bits allocated", "to 1", number=True),
        Column("Bits stored", "to 1", number=True),
        Column("Largest error, frame", number=True),
        Column("RMSE, frame", number=True),
        Column("Unit of errors"),
    )
    cells = zip(
        [f"{item.original.study}, {place_short(item.original)}" for item in shown],
        [item.how for item in shown],
        [dash(header_ratio(item.ratio_header)) for item in shown],
        aligned([item.ratio_bits_allocated for item in shown], 2),
        aligned([item.ratio_bits_stored for item in shown], 2),
        aligned([item.max_frame for item in shown]),
        aligned([item.rmse_frame for item in shown]),
        [item.unit for item in shown],
        strict=True,
    )
    pairs = len({(item.original.study, item.original.instance) for item in shown})
    note = rest_sentence(pairs, found.pairs_measured).replace(" more;", " more pairs;")
    return [Heading("Pairs measured, largest error first"), Table(columns, tuple(Row(row) for row in cells), note=note)]
