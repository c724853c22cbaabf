"""The ratio ledger: what each candidate saves, on every basis."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from safecheck.record.candidates import CandidateEntry, LedgerEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Bar, Bars, Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import aligned, bytes_text, count, joined, plural
from safecheck.report.sections.view import View, is_analysis, names_with_status, rest_sentence
from safecheck.wording import ANALYSIS_CODEC

__all__ = ["ledger"]

STRATA = 24

_COLUMNS = (
    Column("Candidate"),
    Column("Frames", number=True),
    Column("Code", "MB", number=True),
    Column("Bits per pixel", "bits", number=True),
    Column("total", "to 1", number=True, over="Bits stored"),
    Column("least", "to 1", number=True, over="Bits stored"),
    Column("largest", "to 1", number=True, over="Bits stored"),
    Column("Bits allocated", "to 1", number=True),
    Column("Content", "to 1", number=True),
    Column("lossless", "times", number=True, over="Smaller than"),
    Column("now", "times", number=True, over="Smaller than"),
)


def ledger(view: View) -> Section:
    """The section Ratio ledger."""
    intro = (
        "One code has another ratio on each basis. “10:1” says nothing until the basis is named: bits stored counts "
        "the bits that hold values, bits allocated the bits of the file, content only pixels that are neither padding "
        "nor air. What an archive gains stands in the last two columns: against the smallest reversible code, and "
        "against the bytes that lie there now."
    )
    blocks: list[Block] = [Prose(intro)]
    if any(is_analysis(item) for item in view.candidates):
        blocks.append(Prose(f"* {ANALYSIS_CODEC}. Codecs that an archive can write stand first.", "note"))
    blocks += _reached(view)
    strata = view.record.strata
    for stratum in strata[:STRATA]:
        blocks += _of_stratum(view, stratum)
    rest = rest_sentence(STRATA, len(strata), "their ledgers stand in record.json")
    if rest:
        blocks.append(Prose(rest, "note"))
    return Section("Ratio ledger", tuple(blocks))


def _of_stratum(view: View, stratum: StratumEntry) -> list[Block]:
    """Bars and table of one group."""
    found = [
        (item, view.ledger[item.candidate, stratum.stratum])
        for item in view.candidates
        if (item.candidate, stratum.stratum) in view.ledger
    ]
    if not found:
        return []
    names = _starred([item for item, _ in found])
    entries = [entry for _, entry in found]
    blocks: list[Block] = [Heading(f"Ledger: {stratum.stratum}"), *_bars(names, entries, stratum)]
    cells = zip(
        names,
        [count(item.frames) for item in entries],
        aligned([item.code_bytes / 1e6 for item in entries]),
        aligned([item.bits_per_pixel for item in entries], 2),
        aligned([item.ratio_bits_stored for item in entries], 2),
        aligned([item.ratio_bits_stored_least for item in entries], 2),
        aligned([item.ratio_bits_stored_largest for item in entries], 2),
        aligned([item.ratio_bits_allocated for item in entries], 2),
        aligned([item.ratio_content for item in entries], 2),
        aligned([item.times_smaller_than_lossless for item in entries], 2),
        aligned([item.times_smaller_than_now for item in entries], 2),
        strict=True,
    )
    table = Table(_COLUMNS, tuple(Row(row) for row in cells), note=_reversible(entries))
    return [*blocks, _of_one(table) if stratum.frames == 1 else table]


def _of_one(table: Table) -> Table:
    """The table of a single frame, whose total, least and largest ratio are one."""
    kept = [index for index, column in enumerate(table.columns) if column.head not in ("Frames", "least", "largest")]
    columns = [table.columns[index] for index in kept]
    columns = [replace(column, head=column.over, over="") if column.head == "total" else column for column in columns]
    rows = tuple(Row(tuple(row.cells[index] for index in kept)) for row in table.rows)
    return replace(table, columns=tuple(columns), rows=rows)


def _starred(candidates: Sequence[CandidateEntry]) -> list[str]:
    """Mark analysis codecs with a star."""
    names = names_with_status(candidates)
    return [f"{name} *" if is_analysis(item) else name for name, item in zip(names, candidates, strict=True)]


def _bars(names: Sequence[str], entries: Sequence[LedgerEntry], stratum: StratumEntry) -> list[Block]:
    """Bytes before and after on one scale, where every bar counts the same frames."""
    if any(item.frames != stratum.frames for item in entries):
        return []
    bars = [Bar("as they lie now", stratum.bytes_now, bytes_text(stratum.bytes_now), before=True)]
    if stratum.lossless_bytes is not None:
        text = bytes_text(stratum.lossless_bytes)
        bars.append(Bar("smallest reversible", stratum.lossless_bytes, text, before=True))
    pairs = zip(names, entries, strict=True)
    bars += [Bar(name, item.code_bytes, bytes_text(item.code_bytes)) for name, item in pairs]
    return [Bars(tuple(bars), f"Bytes of the same {plural(stratum.frames, 'frame')}")]


def _reversible(entries: Sequence[LedgerEntry]) -> str:
    """Which codec wrote the reversible code that savings are counted against."""
    codecs = max((item.lossless_codecs for item in entries), key=lambda table: sum(table.values()))
    if not codecs:
        return "No reversible code was written for these frames."
    parts = joined([f"{codec} for {plural(frames, 'frame')}" for codec, frames in sorted(codecs.items())])
    if all(item.frames == 1 for item in entries):
        return f"Smallest reversible code: {parts}."
    return (
        f"Smallest reversible code: {parts}. Ratios are of totals over frames; least and largest are of single frames."
    )


def _reached(view: View) -> list[Block]:
    """Where the ratio asked for was not met."""
    rows = [
        Row((item.candidate, reached, count(frames), count(item.frames)))
        for item in view.candidates
        for reached, frames in sorted(item.reached.items())
        if reached != "asked" and item.ratio_asked is not None and frames
    ]
    if not rows:
        if not view.ran or not any(item.frames and item.ratio_asked for item in view.candidates):
            return []
        return [Prose("Every frame reached the ratio that was asked for.", "note")]
    columns = (
        Column("Candidate"),
        Column("What was reached instead of the ratio asked for"),
        Column("Frames", number=True),
        Column("of", number=True),
    )
    return [Heading("Ratios not reached"), Table(columns, tuple(rows))]
