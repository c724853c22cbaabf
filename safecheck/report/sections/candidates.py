"""What was asked of each candidate's codec, and how far that which was left open spread over frames."""

from __future__ import annotations

import math
from collections.abc import Iterator

from safecheck.record.candidates import CandidateEntry, SpreadEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.definitions import label_of
from safecheck.report.numbers import aligned, count
from safecheck.report.sections.view import View, dash, names_with_status

__all__ = ["candidates"]

_INTRO = (
    "Of ratio, setting and error a codec can be given one; the others follow from the image. By ratio per frame the "
    "setting is sought for every frame; by ratio per series one setting, found on the middle frame of a series, serves "
    "all its frames; by setting the ratio is what comes of it."
)
_MOST_DECIMALS = 9
_COLUMNS = (
    Column("Candidate"),
    Column("What was asked"),
    Column("Frames", number=True),
    Column("Least", number=True),
    Column("5th percentile", number=True),
    Column("Median", number=True),
    Column("95th percentile", number=True),
    Column("Largest", number=True),
)


def candidates(view: View) -> tuple[Section, ...]:
    """The section on what was asked; none where no candidate ran on more than one frame."""
    spread = [(item, each) for item in view.candidates for each in item.spread]
    if not any(each.frames > 1 for _, each in spread):
        return ()
    rows = [row for head, part in _groups(spread) for row in _rows(head, part)]
    note = "Over all frames of the run; group by group the ratios stand in the ledger and the errors with their group."
    blocks: tuple[Block, ...] = (Prose(_INTRO), Table(_COLUMNS, tuple(rows), note=note))
    return (Section("Candidates: what was asked, and what was left open", blocks),)


def _groups(
    spread: list[tuple[CandidateEntry, SpreadEntry]],
) -> Iterator[tuple[str, list[tuple[CandidateEntry, SpreadEntry]]]]:
    """Yield what was left open with the candidates that left it open: ratios, then errors by unit, then dials."""
    heads = {_head(*pair): pair[1].figure for pair in spread}
    order = ("ratio_bits_stored", "rmse_content", "dial_value")
    for head in sorted(heads, key=lambda head: order.index(heads[head])):
        yield head, [pair for pair in spread if _head(*pair) == head]


def _head(item: CandidateEntry, entry: SpreadEntry) -> str:
    """Name of what was left open, with its unit."""
    if entry.figure == "ratio_bits_stored":
        return "Achieved ratio, bits stored, to 1"
    if entry.figure == "rmse_content":
        return f"{label_of(entry.figure)}, in {entry.unit}"
    return f"Setting found: {item.dial} of {item.codec}"


def _rows(head: str, spread: list[tuple[CandidateEntry, SpreadEntry]]) -> Iterator[Row]:
    """Yield the rows of one group, its figures with equal decimals."""
    yield Row((head,), group=True)
    names = names_with_status([item for item, _ in spread])
    parts = [value for _, entry in spread for value in _parts(entry)]
    cells = aligned(parts, _decimals(spread[0][1], parts))
    size = len(parts) // len(spread)
    for index, ((item, entry), name) in enumerate(zip(spread, names, strict=True)):
        figures = cells[index * size : (index + 1) * size]
        yield Row((name, dash(item.asked), count(entry.frames), *figures))


def _decimals(entry: SpreadEntry, parts: list[float]) -> int | None:
    """Ratios as in the ledger; a dial of whole numbers without decimals, others with three digits that count."""
    if entry.figure == "ratio_bits_stored":
        return 2
    if entry.figure != "dial_value":
        return None
    if all(value == round(value) for value in parts):
        return 0
    least = min(abs(value) for value in parts if value)
    return min(max(2 - math.floor(math.log10(least)), 0), _MOST_DECIMALS)


def _parts(entry: SpreadEntry) -> tuple[float, ...]:
    """Figures of a spread from least to largest."""
    return entry.least, entry.p05, entry.median, entry.p95, entry.largest
