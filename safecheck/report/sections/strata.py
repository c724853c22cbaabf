"""Groups of like images, and in each the figures of every candidate with their curves."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

from safecheck.record.candidates import CandidateEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import (
    Block,
    Charts,
    Column,
    Prose,
    Row,
    Section,
    Table,
)
from safecheck.report.definitions import label_of
from safecheck.report.numbers import NONE, aligned, count, joined
from safecheck.report.sections.curves import beyond, curves, left_off
from safecheck.report.sections.view import View, names_with_status, rest_sentence, stratum_line
from safecheck.report.sections.windows import (
    MOST_BESIDE,
    NOTE,
    WINDOW_MEASURES,
    heads,
    part_of,
    window_columns,
    windows,
)
from safecheck.wording import SHORT_CAUTION

__all__ = ["MAIN_MEASURES", "STRATA_IN_DETAIL", "overview", "strata"]

STRATA_IN_DETAIL = 24
FEW, MANY = 4, 8
"""Up to `FEW` candidates two groups of one frame share a page, above `MANY` a group fills one: charts are lower."""

_CAPTION = (
    "Over frames: mark, median; bar, 5th to 95th percentile; short line, largest. Each at the median ratio that its "
    "candidate reached, on the bits-stored basis; the axis of ratios is logarithmic. Curves stand apart by a hair, so "
    "that they do not hide each other."
)
_CAPTION_OF_ONE = "Values of the one frame at the ratio reached, on the bits-stored basis; logarithmic axis of ratios."
_MAIN = ("rmse_content", "max_content", "worst_patch_rmse")
MAIN_MEASURES = (*_MAIN, *WINDOW_MEASURES)
"""Measures that stand with their group; all others stand at the end of the record."""


def strata(view: View) -> tuple[Section, ...]:
    """One section per group."""
    return tuple(_detail(view, stratum) for stratum in view.record.strata[:STRATA_IN_DETAIL])


def overview(view: View) -> Section:
    """The section that lists the groups."""
    columns = (
        Column("Group of like images"),
        Column("Unit of errors"),
        Column("Patients", number=True),
        Column("Studies", number=True),
        Column("Series", number=True),
        Column("Frames", number=True),
        Column("Bytes now", "MB", number=True),
        Column("Best reversible code", "MB", number=True),
    )
    entries = view.record.strata
    now = aligned([item.bytes_now / 1e6 for item in entries])
    least = aligned([None if item.lossless_bytes is None else item.lossless_bytes / 1e6 for item in entries])
    rows = tuple(
        Row(
            (
                item.stratum,
                item.unit,
                count(item.patients),
                count(item.studies),
                count(item.series),
                count(item.frames),
                now[index],
                least[index],
            )
        )
        for index, item in enumerate(entries)
    )
    note = "Studies, not frames, count as independent. A patient may stand in several groups."
    rest = rest_sentence(STRATA_IN_DETAIL, len(entries), "their figures stand in record.json")
    blocks: tuple[Block, ...] = (Table(columns, rows, note=note),)
    if not entries:
        blocks = (Prose("No image was assessed."),)
    if rest:
        blocks = (*blocks, Prose(f"The {STRATA_IN_DETAIL} first groups follow in detail, {rest}.", "note"))
    return Section("Groups of like images", blocks)


def _detail(view: View, stratum: StratumEntry) -> Section:
    """Figures and curves of one group."""
    title = f"Figures: {stratum.stratum}"
    candidates = view.in_stratum(stratum)
    blocks: list[Block] = [Prose(stratum_line(stratum)), Prose(SHORT_CAUTION, "caution")]
    if not candidates:
        return Section(title, (*blocks, Prose("No candidate has figures in this group.")))
    blocks += _charts(view, stratum, candidates)
    if stratum.frames == 1 and len(view.windows(stratum.stratum)) <= MOST_BESIDE:
        blocks.append(_of_one(view, stratum, candidates))
    else:
        blocks += [_errors(view, stratum, candidates), *windows(view, stratum, candidates)]
    return Section(title, tuple(blocks), together=True)


def _charts(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> list[Block]:
    """Curves, or a sentence where nothing changed."""
    found = curves(view, stratum, candidates)
    still = [chart.title for chart in found if not chart.highest]
    charts = tuple(chart for chart in found if chart.highest)
    blocks: list[Block] = []
    if charts:
        caption = _CAPTION_OF_ONE if stratum.frames == 1 else _CAPTION
        text = f"{caption}{left_off(charts)}{beyond(view, stratum, candidates)}"
        blocks.append(Charts(charts, text, size=_size(stratum, len(candidates))))
    if still:
        blocks.append(Prose(f"No chart of {joined(still)}: it is 0 with every candidate.", "note"))
    return blocks


def _size(stratum: StratumEntry, candidates: int) -> Literal["usual", "lower", "low"]:
    """Height of the charts, given up where pages then hold what belongs together."""
    if stratum.frames == 1 and candidates <= FEW:
        return "low"
    return "lower" if candidates > MANY else "usual"


def _errors(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> Table:
    """RMSE, maximum and worst patch beside the ratio that was reached."""
    columns = (
        Column("Candidate"),
        Column("Frames", number=True),
        *heads("Achieved ratio, bits stored", "to 1", "median", "least"),
        *heads("RMSE, content", stratum.unit, "median", "95th percentile", "largest"),
        *heads("Largest error, content", stratum.unit, "median", "largest"),
        *heads("RMSE, worst patch 8×8", stratum.unit, "median", "largest"),
    )
    ledgers = [view.ledger.get((item.candidate, stratum.stratum)) for item in candidates]
    rmse, largest, patch = (
        [view.figure(item.candidate, stratum.stratum, measure) for item in candidates] for measure in _MAIN
    )
    cells = zip(
        names_with_status(candidates),
        [count(item.frames) if item else NONE for item in ledgers],
        aligned([item.ratio_bits_stored_median if item else None for item in ledgers], 2),
        aligned([item.ratio_bits_stored_least if item else None for item in ledgers], 2),
        *_same_decimals(part_of(rmse, "median"), part_of(rmse, "p95"), part_of(rmse, "largest")),
        *_same_decimals(part_of(largest, "median"), part_of(largest, "largest")),
        *_same_decimals(part_of(patch, "median"), part_of(patch, "largest")),
        strict=True,
    )
    return Table(columns, tuple(Row(row) for row in cells), caption="Errors: after minus before, over frames")


def _of_one(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> Table:
    """Errors and window figures of a single frame, which has one value of each."""
    ledgers = [view.ledger.get((item.candidate, stratum.stratum)) for item in candidates]
    columns = [Column("Candidate"), Column("Achieved ratio, bits stored", "to 1", number=True)]
    cells = [
        names_with_status(candidates),
        aligned([item.ratio_bits_stored_median if item else None for item in ledgers], 2),
    ]
    for measure in _MAIN:
        entries = [view.figure(item.candidate, stratum.stratum, measure) for item in candidates]
        columns.append(Column(label_of(measure), stratum.unit, number=True))
        cells.append(aligned(part_of(entries, "median")))
    more, figures = window_columns(view, stratum, candidates)
    rows = tuple(Row(row) for row in zip(*cells, *figures, strict=True))
    caption = "The one frame: errors, after minus before, and what its display windows show"
    return Table((*columns, *more), rows, caption=caption, note=NOTE if more else "")


def _same_decimals(*columns: list[float | None]) -> list[tuple[str, ...]]:
    """Write several columns with the decimals that suit them together."""
    flat = aligned([value for column in columns for value in column])
    size = len(columns[0])
    return [flat[start : start + size] for start in range(0, len(flat), size)]
