"""SSIM and the share of pixels changed, on each display window of a group."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.candidates import CandidateEntry
from safecheck.record.figures import FigureEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Table
from safecheck.report.numbers import NONE, aligned, count
from safecheck.report.sections.view import View, names_with_status, window_words

__all__ = ["MOST_BESIDE", "NOTE", "SHORT_UNIT", "WINDOW_MEASURES", "heads", "part_of", "window_columns", "windows"]

WINDOW_MEASURES = ("ssim", "changed_5_levels_percent")
SHORT_UNIT = 8
"""Letters up to which a unit stands below each head."""
MOST_BESIDE = 3
"""Windows that stand side by side."""

_NO_UNIT = "no unit"
_CHANGED = "Content changed by 5 levels of 255 or more"
_CAPTION = "On the display windows"
NOTE = "SSIM over content; changed: content whose display level moved by 5 of 255 or more. A dash: no frame has it."


def heads(over: str, unit: str, *heads: str) -> list[Column]:
    """Columns below a shared head, which takes a unit that is too long for each of them."""
    if len(unit) > SHORT_UNIT:
        return [Column(head, "", number=True, over=f"{over}; {unit}") for head in heads]
    return [Column(head, unit, number=True, over=over) for head in heads]


def part_of(entries: Sequence[FigureEntry | None], part: str) -> list[float | None]:
    """One statistic of each entry."""
    return [None if item is None else getattr(item, part) for item in entries]


def windows(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> list[Block]:
    """SSIM and share of pixels changed: two or three windows beside each other, else below each other."""
    names = view.windows(stratum.stratum)
    if not names:
        return [Prose("No window figures: no display window applies to this group.", "note")]
    if 1 < len(names) <= MOST_BESIDE:
        return [_beside(view, stratum, candidates)]
    return [_below(view, stratum, candidates, names)]


def _pair(
    view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry], window: str
) -> list[list[FigureEntry | None]]:
    """Both measures of each candidate on one window."""
    return [
        [view.figure(item.candidate, stratum.stratum, measure, window) for item in candidates]
        for measure in WINDOW_MEASURES
    ]


def _beside(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> Table:
    """A row per candidate, a few columns per window."""
    more, figures = window_columns(view, stratum, candidates)
    rows = tuple(Row(row) for row in zip(names_with_status(candidates), *figures, strict=True))
    return Table((Column("Candidate"), *more), rows, caption=f"{_CAPTION}, over frames", note=NOTE)


def window_columns(
    view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]
) -> tuple[list[Column], list[Sequence[str]]]:
    """Heads and cells of a few columns per window, for rows of candidates."""
    columns: list[Column] = []
    cells: list[Sequence[str]] = []
    for window in view.windows(stratum.stratum):
        ssim, changed = _pair(view, stratum, candidates, window)
        over = window_words(window, stratum.unit)
        one = all(item is None or item.frames == 1 for item in ssim)
        ends = (("", "median"),) if one else ((" median", "median"), (" least", "least"))
        for words, part in ends:
            columns.append(Column(f"SSIM{words}", _NO_UNIT, number=True, over=over))
            cells.append(aligned(part_of(ssim, part), 4))
        ends = (("", "median"),) if one else ((" median", "median"), (" largest", "largest"))
        for words, part in ends:
            columns.append(Column(f"changed{words}", "%", number=True, over=over))
            cells.append(aligned(part_of(changed, part), 2))
    return columns, cells


def _below(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry], names: Sequence[str]) -> Table:
    """A group of rows per window."""
    one = stratum.frames == 1
    columns: tuple[Column, ...] = (
        Column("Window and candidate"),
        Column("Frames", number=True),
        *heads("SSIM, content", _NO_UNIT, "median", "5th percentile", "least"),
        *heads(_CHANGED, "%", "median", "95th percentile", "largest"),
    )
    parts: tuple[tuple[str, ...], ...] = (("median", "p05", "least"), ("median", "p95", "largest"))
    if one:
        columns = (columns[0], Column("SSIM, content", _NO_UNIT, number=True), Column(_CHANGED, "%", number=True))
        parts = (("median",), ("median",))
    rows: list[Row] = []
    for window in names:
        seen = [item for item in candidates if view.figure(item.candidate, stratum.stratum, "ssim", window)]
        ssim, changed = _pair(view, stratum, seen, window)
        cells = zip(
            names_with_status(seen),
            *([] if one else [[count(item.frames) if item else NONE for item in ssim]]),
            *(aligned(part_of(ssim, part), 4) for part in parts[0]),
            *(aligned(part_of(changed, part), 2) for part in parts[1]),
            strict=True,
        )
        rows += [Row((window_words(window, stratum.unit),), group=True), *(Row(row) for row in cells)]
    return Table(columns, tuple(rows), caption=_CAPTION if one else f"{_CAPTION}, over frames")
