"""The regions that a person drew: errors, and contrast beside the noise that was removed."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.document import RegionEntry
from safecheck.report.blocks import Block, Column, Prose, Row, Section, Table
from safecheck.report.numbers import NONE, aligned, count, figure, joined
from safecheck.report.sections.view import View, place_short, rest_sentence

__all__ = ["regions"]

REGIONS = 60

_ERRORS = (
    Column("Region and candidate"),
    Column("Frames", number=True),
    Column("median", number=True, over="RMSE"),
    Column("largest", number=True, over="RMSE"),
    Column("median", number=True, over="Mean error"),
    Column("farthest from 0", number=True, over="Mean error"),
    Column("Largest error", number=True),
    Column("Place of the largest RMSE"),
)
_CONTRAST = (
    Column("Region and candidate"),
    Column("before", number=True, over="Mean"),
    Column("after", number=True, over="Mean"),
    Column("before", number=True, over="SD"),
    Column("after", number=True, over="SD"),
    Column("before", number=True, over="CNR"),
    Column("after", number=True, over="CNR"),
    Column("Noise removed", "%", number=True),
)


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
    if groups:
        blocks.append(_errors(groups))
    with_contrast = [same for same in groups if any(item.mean_before is not None for item in same)]
    if with_contrast:
        blocks.append(_contrast(with_contrast))
    rest = rest_sentence(REGIONS, len(keys))
    if rest:
        blocks.append(Prose(rest, "note"))
    return Section("Regions", tuple(blocks))


def _ordered(view: View) -> list[RegionEntry]:
    """Candidates in the order of all tables."""
    order = {item.candidate: index for index, item in enumerate(view.candidates)}
    return sorted(view.record.regions, key=lambda item: order.get(item.candidate, len(order)))


def _head(item: RegionEntry) -> str:
    """Label, role, area and unit of a region."""
    area = f"{figure(item.area_pixels)} pixels"
    if item.area_mm2 is not None:
        area += f", {figure(item.area_mm2)} mm²"
    background = f"; background for CNR: {item.background}" if item.background else ""
    return f"{item.label} ({item.role}; {area}), figures in {item.unit}{background}"


def _errors(groups: Sequence[Sequence[RegionEntry]]) -> Table:
    """How far values moved."""
    rows: list[Row] = []
    for same in groups:
        cells = zip(
            [item.candidate for item in same],
            [count(item.frames) for item in same],
            aligned([item.rmse_median for item in same]),
            aligned([item.rmse_largest for item in same]),
            aligned([item.bias_median for item in same]),
            aligned([item.bias_largest_absolute for item in same]),
            aligned([item.max_largest for item in same]),
            [place_short(item.worst) if item.worst else NONE for item in same],
            strict=True,
        )
        rows += [Row((_head(same[0]),), group=True), *(Row(line) for line in cells)]
    note = "Weighted by the exact share of each pixel that the region covers; the largest error counts pixel centres."
    return Table(_ERRORS, tuple(rows), caption="Errors in regions: after minus before, over frames", note=note)


def _contrast(groups: Sequence[Sequence[RegionEntry]]) -> Table:
    """Mean, SD and CNR before and after."""
    rows: list[Row] = []
    for same in groups:
        cells = zip(
            [item.candidate for item in same],
            *_pair([item.mean_before for item in same], [item.mean_after for item in same]),
            *_pair([item.sd_before for item in same], [item.sd_after for item in same]),
            *_pair([item.cnr_before for item in same], [item.cnr_after for item in same]),
            aligned([item.noise_removed_percent for item in same], 1),
            strict=True,
        )
        rows += [Row((_head(same[0]),), group=True), *(Row(line) for line in cells)]
    note = "A CNR that rises because noise was removed says nothing in favour of the image: read the last column."
    return Table(_CONTRAST, tuple(rows), caption="Mean, SD and contrast in regions: medians over frames", note=note)


def _pair(before: list[float | None], after: list[float | None]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Write two columns with equal decimals."""
    flat = aligned([*before, *after])
    return flat[: len(before)], flat[len(before) :]
