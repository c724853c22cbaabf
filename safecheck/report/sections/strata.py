"""Groups of like images, and in each the figures of every candidate with their curves."""

from __future__ import annotations

import math
from collections.abc import Sequence

from safecheck.measures.catalogue import MEASURES
from safecheck.record.document import CandidateEntry, FigureEntry, StratumEntry
from safecheck.report.blocks import (
    Block,
    Charts,
    Column,
    Heading,
    Prose,
    Row,
    Section,
    Table,
)
from safecheck.report.definitions import label_of
from safecheck.report.numbers import NONE, aligned, count
from safecheck.report.sections.curves import beyond, curves
from safecheck.report.sections.view import View, names_with_status, rest_sentence, stratum_line
from safecheck.wording import SHORT_CAUTION

__all__ = ["strata"]

STRATA_IN_DETAIL = 24
PER_TABLE = 5
"""Candidates per table of further measures: two columns each."""

_SHORT_UNIT = 8
_MAIN = ("rmse_content", "max_content", "worst_patch_rmse")
_WINDOW = ("ssim", "changed_5_levels_percent")


def strata(view: View) -> tuple[Section, ...]:
    """One section that lists the groups, and one per group."""
    shown = view.record.strata[:STRATA_IN_DETAIL]
    return (_overview(view), *(_detail(view, stratum) for stratum in shown))


def _overview(view: View) -> Section:
    """The table of groups."""
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
    charts = tuple(curves(view, stratum, candidates))
    if charts:
        caption = (
            "Over frames: mark, median; bar, 5th to 95th percentile; short line, largest. Each at the median ratio "
            "that its candidate reached, on the bits-stored basis; the axis of ratios is logarithmic. "
            "Curves stand slightly apart, so that bars do not hide each other."
        )
        blocks.append(Charts(charts, f"{caption}{beyond(view, stratum, candidates)}"))
    blocks += [_errors(view, stratum, candidates), *_windows(view, stratum, candidates)]
    blocks += _further(view, stratum, candidates)
    return Section(title, tuple(blocks), room_mm=125)


def _errors(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> Table:
    """RMSE, maximum and worst patch beside the ratio that was reached."""
    columns = (
        Column("Candidate"),
        Column("Frames", number=True),
        *_heads("Achieved ratio, bits stored", "to 1", "median", "least"),
        *_heads("RMSE, content", stratum.unit, "median", "95th\u00a0pct.", "largest"),
        *_heads("Largest error, content", stratum.unit, "median", "largest"),
        *_heads("RMSE, worst patch 8×8", stratum.unit, "median", "largest"),
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
        *_same_decimals(_of(rmse, "median"), _of(rmse, "p95"), _of(rmse, "largest")),
        *_same_decimals(_of(largest, "median"), _of(largest, "largest")),
        *_same_decimals(_of(patch, "median"), _of(patch, "largest")),
        strict=True,
    )
    return Table(columns, tuple(Row(row) for row in cells), caption="Errors: after minus before, over frames")


def _heads(over: str, unit: str, *heads: str) -> list[Column]:
    """Columns below a shared head, which takes a unit that is too long for each of them."""
    if len(unit) > _SHORT_UNIT:
        return [Column(head, "", number=True, over=f"{over}; {unit}") for head in heads]
    return [Column(head, unit, number=True, over=over) for head in heads]


def _of(entries: Sequence[FigureEntry | None], part: str) -> list[float | None]:
    """One statistic of each entry."""
    return [None if item is None else getattr(item, part) for item in entries]


def _same_decimals(*columns: list[float | None]) -> list[tuple[str, ...]]:
    """Write several columns with the decimals that suit them together."""
    flat = aligned([value for column in columns for value in column])
    size = len(columns[0])
    return [flat[start : start + size] for start in range(0, len(flat), size)]


def _windows(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> list[Block]:
    """SSIM and share of pixels changed, for each window."""
    columns = (
        Column("Window and candidate"),
        Column("Frames", number=True),
        *_heads("SSIM, content", "1", "median", "5th\u00a0pct.", "least"),
        *_heads("Content changed by 5 levels of 255 or more", "%", "median", "95th\u00a0pct.", "largest"),
    )
    rows: list[Row] = []
    for window in view.windows(stratum.stratum):
        seen = [item for item in candidates if view.figure(item.candidate, stratum.stratum, "ssim", window)]
        ssim, changed = (
            [view.figure(item.candidate, stratum.stratum, measure, window) for item in seen] for measure in _WINDOW
        )
        cells = zip(
            names_with_status(seen),
            [count(item.frames) if item else NONE for item in ssim],
            *(aligned(_of(ssim, part), 4) for part in ("median", "p05", "least")),
            *(aligned(_of(changed, part), 2) for part in ("median", "p95", "largest")),
            strict=True,
        )
        rows += [Row((view.window_words(window),), group=True), *(Row(row) for row in cells)]
    if not rows:
        return [Prose("No window figures: no display window applies to this group.", "note")]
    return [Table(columns, tuple(rows), caption="On the display windows, over frames")]


def _further(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> list[Block]:
    """All other measures, candidates side by side."""
    mine = [item for item in view.record.figures if item.stratum == stratum.stratum]
    keys = dict.fromkeys((item.measure, item.window, item.unit) for item in mine)
    others = [key for key in keys if key[0] not in (*_MAIN, *_WINDOW)]
    if not others:
        return []
    blocks: list[Block] = [Heading("Further measures")]
    size = math.ceil(len(candidates) / math.ceil(len(candidates) / PER_TABLE))
    parts = [candidates[start : start + size] for start in range(0, len(candidates), size)]
    return [*blocks, *(_further_table(view, stratum.stratum, part, others) for part in parts)]


def _further_table(
    view: View, stratum: str, candidates: Sequence[CandidateEntry], measures: Sequence[tuple[str, str, str]]
) -> Table:
    """Median and worst of each measure for up to `PER_TABLE` candidates, in groups of one unit."""
    columns = [Column("Measure")]
    for name in names_with_status(candidates):
        columns += [Column(part, "", number=True, over=name) for part in ("median", "worst")]
    rows: list[Row] = []
    for unit in dict.fromkeys(unit for _, _, unit in measures):
        rows.append(Row((f"in {unit}" if unit != "1" else "plain numbers",), group=True))
        for measure, window, _ in (key for key in measures if key[2] == unit):
            entries = [view.figure(item.candidate, stratum, measure, window) for item in candidates]
            values = [part for item in entries for part in (item.median if item else None, _worst(item))]
            label = f"{label_of(measure)}; {view.window_words(window)}" if window else label_of(measure)
            rows.append(Row((label, *aligned(values))))
    note = (
        "Worst: the largest value where more is worse, the least where less is worse; of signed measures the one "
        "farther from zero."
    )
    return Table(tuple(columns), tuple(rows), note=f"{note}{_without_value(view, stratum, candidates)}")


def _without_value(view: View, stratum: str, candidates: Sequence[CandidateEntry]) -> str:
    """Say of which measures some frames have no value, and why."""
    names = {item.candidate for item in candidates}
    found: dict[str, dict[str, None]] = {}
    for item in view.record.figures:
        if item.without_value and item.stratum == stratum and item.candidate in names:
            found.setdefault(item.reason, {})[label_of(item.measure)] = None
    parts = [f"{'; '.join(labels)} ({reason})" for reason, labels in found.items()]
    return f" Some frames have no value of: {'; '.join(parts)}." if parts else ""


def _worst(item: FigureEntry | None) -> float | None:
    """The end of the spread that is worse; of signed measures the farther from zero."""
    if item is None or item.largest is None or item.least is None:
        return None
    known = MEASURES.get(item.measure)
    if known is not None and known.signed:
        return max(item.least, item.largest, key=abs)
    return item.largest if item.worse == "higher" else item.least
