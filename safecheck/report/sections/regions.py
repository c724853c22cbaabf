"""The regions that a person drew: errors, and contrast beside the noise that was removed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TypeAlias

from safecheck.record.figures import RegionEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import NONE, aligned, count, figure, joined
from safecheck.report.sections.view import View, place_short, rest_sentence

__all__ = ["regions"]

REGIONS = 60
SHORT_UNIT = 8

Groups: TypeAlias = Sequence[Sequence[RegionEntry]]
"""Candidates of each region."""


def regions(view: View) -> Section:
    """The section Regions."""
    record = view.record
    if not record.regions and not record.regions_without_frame:
        return Section("Regions", (Prose("No region was drawn."),))
    entries = _ordered(view)
    blocks: list[Block] = []
    if record.regions_without_frame:
        names = joined(record.regions_without_frame)
        blocks.append(Prose(f"These regions lie on no frame that was assessed: {names}."))
    keys = list(dict.fromkeys((item.region, item.unit) for item in entries))
    groups = [[item for item in entries if (item.region, item.unit) == key] for key in keys[:REGIONS]]
    labels = {item.region: item.label for item in record.regions}
    for unit in dict.fromkeys(same[0].unit for same in groups):
        of_unit = [same for same in groups if same[0].unit == unit]
        blocks.append(_errors(of_unit, labels))
        with_contrast = [same for same in of_unit if any(item.mean_before is not None for item in same)]
        if with_contrast:
            blocks.append(_contrast(with_contrast, labels))
    rest = rest_sentence(REGIONS, len(keys))
    if rest:
        blocks.append(Prose(rest, "note"))
    return Section("Regions", tuple(blocks))


def _ordered(view: View) -> list[RegionEntry]:
    """Candidates in the order of all tables."""
    order = {item.candidate: index for index, item in enumerate(view.candidates)}
    return sorted(view.record.regions, key=lambda item: order.get(item.candidate, len(order)))


def _head(item: RegionEntry, labels: Mapping[str, str]) -> str:
    """Label, role and area of a region, and its background by label."""
    area = f"{figure(item.area_pixels)} pixels"
    if item.area_mm2 is not None:
        area += f", {figure(item.area_mm2)} mm²"
    background = f"; background: {labels.get(item.background, item.background)}" if item.background else ""
    return f"{item.label} ({item.role}; {area}){background}"


def _table(groups: Groups, labels: Mapping[str, str], parts: Sequence[Part], caption: str, note: str) -> Table:
    """A group of rows per region, a column per part; parts of one kind are written with equal decimals."""
    rows: list[Row] = []
    for same in groups:
        columns: dict[int, tuple[str, ...]] = {}
        for kind in dict.fromkeys(part.kind for part in parts):
            numbers = [index for index, part in enumerate(parts) if part.kind == kind]
            flat = aligned([getattr(item, parts[index].name) for index in numbers for item in same])
            columns |= {index: flat[n * len(same) : (n + 1) * len(same)] for n, index in enumerate(numbers)}
        cells = zip(
            [item.candidate for item in same],
            [count(item.frames) for item in same],
            *(columns[index] for index in range(len(parts))),
            strict=True,
        )
        rows += [Row((_head(same[0], labels),), group=True), *(Row(line) for line in cells)]
    heads = (Column("Region and candidate"), Column("Frames", number=True), *(part.column for part in parts))
    return Table(heads, tuple(rows), caption=caption, note=note)


@dataclass(frozen=True, slots=True)
class Part:
    """A column of figures."""

    name: str
    """Field of the region's entry."""
    kind: str
    """Parts of one kind share their decimals."""
    column: Column


def _part(name: str, kind: str, head: str, over: str, unit: str) -> Part:
    """A column; a unit that is too long for it stands in the shared head."""
    if len(unit) > SHORT_UNIT and over:
        return Part(name, kind, Column(head, number=True, over=f"{over}; {unit}"))
    return Part(name, kind, Column(head, unit, number=True, over=over))


def _errors(groups: Groups, labels: Mapping[str, str]) -> Table:
    """How far values moved."""
    unit, single = groups[0][0].unit, _single(groups)
    if single:
        parts = [
            _part("rmse_median", "rmse", "RMSE", "", unit),
            _part("bias_median", "bias", "Mean error", "", unit),
            _part("max_largest", "max", "Largest error", "", unit),
        ]
    else:
        parts = [
            _part("rmse_median", "rmse", "median", "RMSE", unit),
            _part("rmse_largest", "rmse", "largest", "RMSE", unit),
            _part("bias_median", "bias", "median", "Mean error", unit),
            _part("bias_largest_absolute", "bias", "farthest from 0", "Mean error", unit),
            _part("max_largest", "max", "Largest error", "", unit),
        ]
    note = "Weighted by the exact share of each pixel that the region covers; the largest error counts pixel centres."
    over = "" if single else ", over frames"
    table = _table(groups, labels, parts, f"Errors in regions, in {unit}: after minus before{over}", note)
    places = [place_short(item.worst) if item.worst else NONE for same in groups for item in same]
    found = iter(places)
    rows = tuple(row if row.group else Row((*row.cells, next(found))) for row in table.rows)
    return replace(table, columns=(*table.columns, Column("Place of the largest error")), rows=rows)


def _contrast(groups: Groups, labels: Mapping[str, str]) -> Table:
    """Mean, SD, contrast kept and CNR, with the noise removed beside it."""
    unit, single = groups[0][0].unit, _single(groups)
    kept, cnr, removed = "Contrast kept", "CNR", "Noise removed"
    parts = [
        _part("mean_before", "mean", "before", "Mean", unit),
        _part("mean_after", "mean", "after", "Mean", unit),
        _part("sd_before", "sd", "before", "SD", unit),
        _part("sd_after", "sd", "after", "SD", unit),
    ]
    if single:
        parts += [
            _part("contrast_kept_percent", "kept", kept, "", "%"),
            _part("cnr_before", "cnr", "before", cnr, ""),
            _part("cnr_after", "cnr", "after", cnr, ""),
            _part("noise_removed_percent", "removed", removed, "", "%"),
        ]
    else:
        parts += [
            _part("contrast_kept_percent", "kept", "median", kept, "%"),
            _part("contrast_kept_percent_p05", "kept", "5th perc.", kept, "%"),
            _part("contrast_kept_percent_least", "kept", "least", kept, "%"),
            _part("cnr_before", "cnr", "before", cnr, ""),
            _part("cnr_after", "cnr", "after", cnr, ""),
            _part("cnr_after_least", "cnr", "after, least", cnr, ""),
            _part("noise_removed_percent", "removed", "median", removed, "%"),
            _part("noise_removed_percent_largest", "removed", "largest", removed, "%"),
        ]
    note = (
        "CNR has no unit. A CNR that rises because noise was removed says nothing in favour of the image: read it with "
        "the noise removed, that of the background."
    )
    over = "" if single else "; medians over frames unless the head says otherwise"
    return _table(groups, labels, parts, f"Mean, SD and contrast in regions{over}", note)


def _single(groups: Groups) -> bool:
    """Whether every region lies on one frame, so that there is one value of each."""
    return all(item.frames == 1 for same in groups for item in same)
