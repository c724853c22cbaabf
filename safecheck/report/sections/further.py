"""All other measures of every group of like images, at the end of the record."""

from __future__ import annotations

import math
from collections.abc import Sequence

from safecheck.measures.catalogue import MEASURES
from safecheck.record.candidates import CandidateEntry
from safecheck.record.figures import FigureEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.definitions import label_of
from safecheck.report.numbers import aligned
from safecheck.report.sections.strata import MAIN_MEASURES, STRATA_IN_DETAIL
from safecheck.report.sections.view import View, names_with_status, window_words
from safecheck.wording import SHORT_CAUTION

__all__ = ["further"]

TITLE = "Further measures, all groups"
PER_TABLE = 6
"""Candidates per table: two columns each."""
PER_TABLE_OF_ONE = 8
"""Candidates per table of a group of one frame: a column each."""

_NOISE = ("noise_sd_kept_percent", "rmse_over_noise")
"""Neither stands without the other."""
_NOISE_HEAD = "noise: SD kept in %, RMSE in times the noise SD"


def further(view: View) -> tuple[Section, ...]:
    """The section Further measures; none where there is nothing to show."""
    blocks: list[Block] = []
    for stratum in view.record.strata[:STRATA_IN_DETAIL]:
        blocks += _of_stratum(view, stratum)
    if not blocks:
        return ()
    note = (
        "Worst: the largest value where more is worse, the least where less is worse; of signed measures the one "
        "farther from zero. A group of one frame has one value."
    )
    return (Section(TITLE, (Prose(note, "note"), Prose(SHORT_CAUTION, "caution"), *blocks)),)


def _of_stratum(view: View, stratum: StratumEntry) -> list[Block]:
    """All other measures of one group, candidates side by side."""
    candidates = view.in_stratum(stratum)
    mine = [item for item in view.record.figures if item.stratum == stratum.stratum]
    keys = dict.fromkeys((item.measure, item.window, item.unit) for item in mine)
    others = [key for key in keys if key[0] not in MAIN_MEASURES]
    if not others or not candidates:
        return []
    most = PER_TABLE_OF_ONE if stratum.frames == 1 else PER_TABLE
    size = math.ceil(len(candidates) / math.ceil(len(candidates) / most))
    parts = [candidates[start : start + size] for start in range(0, len(candidates), size)]
    return [
        Heading(f"Further measures: {stratum.stratum}"),
        *(_table(view, stratum, part, others) for part in parts),
    ]


def _table(
    view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry], measures: Sequence[tuple[str, str, str]]
) -> Table:
    """Median and worst of each measure, in groups of one unit."""
    one = stratum.frames == 1
    columns = [Column("Measure")]
    for name in names_with_status(candidates):
        columns += [Column(name, number=True)] if one else _pair_of_columns(name)
    rows: list[Row] = []
    for head in dict.fromkeys(_block(measure, unit) for measure, _, unit in measures):
        rows.append(Row((head,), group=True))
        for measure, window, _ in (key for key in measures if _block(key[0], key[2]) == head):
            entries = [view.figure(item.candidate, stratum.stratum, measure, window) for item in candidates]
            label = f"{label_of(measure)}; {window_words(window, stratum.unit)}" if window else label_of(measure)
            rows.append(Row((label, *aligned(_values(entries, one=one)))))
    return Table(tuple(columns), tuple(rows), note=_without_value(view, stratum.stratum, candidates))


def _pair_of_columns(name: str) -> list[Column]:
    """Median and worst of a candidate."""
    return [Column(part, number=True, over=name) for part in ("median", "worst")]


def _values(entries: Sequence[FigureEntry | None], *, one: bool) -> list[float | None]:
    """Median and worst of each entry, or the one value."""
    if one:
        return [item.median if item else None for item in entries]
    return [part for item in entries for part in (item.median if item else None, _worst(item))]


def _block(measure: str, unit: str) -> str:
    """Head of the rows among which a measure stands."""
    if measure in _NOISE:
        return _NOISE_HEAD
    return {"1": "without unit", "times": "times"}.get(unit, f"in {unit}")


def _without_value(view: View, stratum: str, candidates: Sequence[CandidateEntry]) -> str:
    """Say of which measures some frames have no value, and why."""
    names = {item.candidate for item in candidates}
    found: dict[str, dict[str, None]] = {}
    for item in view.record.figures:
        if item.without_value and item.stratum == stratum and item.candidate in names:
            found.setdefault(item.reason, {})[label_of(item.measure)] = None
    parts = [f"{'; '.join(labels)} ({reason})" for reason, labels in found.items()]
    return f"Some frames have no value of: {'; '.join(parts)}." if parts else ""


def _worst(item: FigureEntry | None) -> float | None:
    """The end of the spread that is worse; of signed measures the farther from zero."""
    if item is None or item.largest is None or item.least is None:
        return None
    known = MEASURES.get(item.measure)
    if known is not None and known.signed:
        return max(item.least, item.largest, key=abs)
    return item.largest if item.worse == "higher" else item.least
