"""The ratio ledger: what each candidate saves, on every basis."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from safecheck.record.candidates import CandidateEntry, LedgerEntry, NeighbourEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Bar, Bars, Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import aligned, bytes_text, count, joined, plural
from safecheck.report.sections.view import View, is_analysis, names_with_status, rest_sentence
from safecheck.wording import ANALYSIS_CODEC, ON_REFERENCE

__all__ = ["ledger"]

STRATA = 24

_COLUMNS = (
    Column("Candidate"),
    Column("Frames", number=True),
    Column("Code", "MB", number=True),
    Column("Bits per pixel", "bits", number=True),
    Column("total", "to 1", number=True, over="Bits stored"),
    Column("least", "to 1", number=True, over="Bits stored"),
    Column("5th", "to 1", number=True, over="Bits stored"),
    Column("median", "to 1", number=True, over="Bits stored"),
    Column("95th", "to 1", number=True, over="Bits stored"),
    Column("largest", "to 1", number=True, over="Bits stored"),
    Column("Bits allocated", "to 1", number=True),
    Column("Content", "to 1", number=True),
    Column("lossless", "times", number=True, over="Smaller than"),
    Column("now", "times", number=True, over="Smaller than"),
)


_OVER_FRAMES = ("Frames", "least", "5th", "median", "95th", "largest")
"""Columns that say nothing of a single frame."""


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
    rows = _rows(names, entries, [item.dial for item, _ in found])
    table = Table(_COLUMNS, rows, note=_reversible(entries))
    return [*blocks, _of_one(table) if stratum.frames == 1 else table, *_reversible_codecs(view, stratum)]


def _rows(names: Sequence[str], entries: Sequence[LedgerEntry], dials: Sequence[str]) -> tuple[Row, ...]:
    """A row for each candidate, and below it one for the neighbouring setting, where the two bracket the ratio."""
    lines: list[tuple[str, LedgerEntry, NeighbourEntry | None]] = []
    for name, entry, dial in zip(names, entries, dials, strict=True):
        lines.append((_with_dial(name, dial, entry), entry, None))
        if entry.neighbour is not None:
            low, high = entry.neighbour.dial_least, entry.neighbour.dial_largest
            lines.append((f"beside it: {_between(dial, low, high)}", entry, entry.neighbour))
    shown = [neighbour or entry for _, entry, neighbour in lines]
    alone = [None if neighbour else entry for _, entry, neighbour in lines]
    cells = zip(
        [name for name, _, _ in lines],
        [count(item.frames) for item in shown],
        aligned([item.code_bytes / 1e6 for item in shown]),
        aligned([item.bits_per_pixel if item else None for item in alone], 2),
        aligned([item.ratio_bits_stored for item in shown], 2),
        aligned([item.ratio_bits_stored_least for item in shown], 2),
        aligned([item.ratio_bits_stored_p05 if item else None for item in alone], 2),
        aligned([item.ratio_bits_stored_median for item in shown], 2),
        aligned([item.ratio_bits_stored_p95 if item else None for item in alone], 2),
        aligned([item.ratio_bits_stored_largest for item in shown], 2),
        aligned([item.ratio_bits_allocated if item else None for item in alone], 2),
        aligned([item.ratio_content if item else None for item in alone], 2),
        aligned([item.times_smaller_than_lossless if item else None for item in alone], 2),
        aligned([item.times_smaller_than_now if item else None for item in alone], 2),
        strict=True,
    )
    return tuple(Row(row) for row in cells)


def _with_dial(name: str, dial: str, entry: LedgerEntry) -> str:
    """A candidate's name, with the settings that bracket its ratio."""
    if entry.neighbour is None or entry.dial_least is None or entry.dial_largest is None:
        return name
    return f"{name}: {_between(dial, entry.dial_least, entry.dial_largest)}"


def _between(dial: str, least: float, largest: float) -> str:
    """A dial with its value, or with the range of its values."""
    return f"{dial} {least:g}" if least == largest else f"{dial} {least:g} to {largest:g}"


def _reversible_codecs(view: View, stratum: StratumEntry) -> list[Block]:
    """Every reversible codec on the frames that carry the full controls, beside the smallest code of these frames."""
    entries = [item for item in view.record.reversible if item.stratum == stratum.stratum]
    if not entries:
        return []
    columns = (
        Column("Reversible codec"),
        Column("Frames", number=True),
        Column("Code", "MB", number=True),
        Column("Bits stored", "to 1", number=True),
        Column("Smallest reversible code of the ledger", "MB", number=True),
        Column("Of that smallest", "times", number=True),
    )
    sizes = aligned([size / 1e6 for item in entries for size in (item.code_bytes, item.smallest_bytes or 0)])
    shares = [item.code_bytes / item.smallest_bytes if item.smallest_bytes else None for item in entries]
    cells = zip(
        [item.codec for item in entries],
        [count(item.frames) for item in entries],
        sizes[::2],
        aligned([item.ratio_bits_stored for item in entries], 2),
        sizes[1::2],
        aligned(shares, 3),
        strict=True,
    )
    caption = "Reversible codecs, on the frames that carry all controls"
    return [Table(columns, tuple(Row(row) for row in cells), caption=caption)]


def _of_one(table: Table) -> Table:
    """The table of a single frame, whose total, least and largest ratio are one."""
    kept = [index for index, column in enumerate(table.columns) if column.head not in _OVER_FRAMES]
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
        f"Smallest reversible code: {parts}. Ratios are of totals over frames; least, percentiles, median and largest "
        "are of single frames."
    )


def _reached(view: View) -> list[Block]:
    """Where the ratio asked for was not met: by a frame, or by a series in all where one setting serves it."""
    by_series = [item for item in view.candidates if item.asked == "ratio per series"]
    asked = [item for item in view.candidates if item.ratio_asked is not None and item.asked != "ratio per series"]
    rows = [
        Row((item.candidate, reached, count(frames), count(item.frames)))
        for item in asked
        for reached, frames in sorted(item.reached.items())
        if reached not in ("asked", "bracket") and frames
    ]
    rows += [row for item in by_series for row in _reached_by_series(view, item)]
    notes: list[Block] = [Prose(_BRACKET, "note")] if any(item.reached.get("bracket") for item in asked) else []
    if not rows:
        return [*notes, *_all_reached(asked if not notes and view.ran else (), by_series if view.ran else ())]
    columns = (
        Column("Candidate"),
        Column("What was reached instead of the ratio asked for"),
        Column("Frames", number=True),
        Column("of", number=True),
    )
    return [*notes, Heading("Ratios not reached"), Table(columns, tuple(rows))]


def _all_reached(by_frame: Sequence[CandidateEntry], by_series: Sequence[CandidateEntry]) -> list[Block]:
    """Say that nothing missed its ratio, of what was run."""
    said = []
    if any(item.frames for item in by_frame):
        said.append("Every frame reached the ratio that was asked for.")
    if any(item.frames for item in by_series):
        said.append("Every series asked for a ratio in all lies within 1 % of it.")
    return [Prose(" ".join(said), "note")] if said else []


def _reached_by_series(view: View, item: CandidateEntry) -> list[Row]:
    """What series got in all instead, then why it was not met where the setting was sought."""
    missed, of = item.series_missed, count(item.frames)
    rows = []
    if missed is not None:
        totals = aligned((missed.ratio_least, missed.ratio_largest), 2)
        span = " to ".join(dict.fromkeys(totals))
        number = f"{count(missed.series)} of {plural(missed.of_series, 'series', 'series')}"
        text = f"total of the series {span}:1, by more than 1 % other than asked, in {number}"
        rows.append(Row((item.candidate, text, count(missed.frames), of)))
    start = f"{item.candidate}: "
    for note, frames in view.record.notes.items():
        if note.startswith(start) and note.endswith(ON_REFERENCE):
            rows.append(Row((item.candidate, note.removeprefix(start), count(frames), of)))
    return rows


_BRACKET = (
    "A dial of whole numbers seldom meets a ratio, so the two settings around it were run. All tables use the one "
    "whose ratio is not below the one asked for; the other stands beside it here."
)
