"""Figures: one measure of one candidate in one stratum over its frames, the middle with both tails."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from safecheck.measures.catalogue import IMAGE_UNIT, MEASURES, Measure
from safecheck.record.figures import FigureEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.groups import Groups, Indices, place_at

__all__ = ["MOST_SETTINGS", "ROW_AND_COLUMN", "figures", "worst_index"]

MOST_SETTINGS = 6
"""Settings of one window label in a group that are told apart; MR files often have another for each slice."""

ROW_AND_COLUMN = {
    "max_content": ("max_content_row", "max_content_column"),
    "worst_patch_rmse": ("worst_patch_row", "worst_patch_column"),
    "worst_window_rmse": ("worst_window_row", "worst_window_column"),
    "worst_outside_rmse": ("worst_outside_row", "worst_outside_column"),
    "edge_band_max": ("edge_band_row", "edge_band_column"),
    "ssim_lowest": ("ssim_lowest_row", "ssim_lowest_column"),
    "region_max": ("max_row", "max_column"),
}
"""Measures that come with a place within the frame."""


def figures(measures: Groups, windows: Groups, candidates: tuple[str, ...]) -> Iterator[FigureEntry]:
    """Yield the figures of every candidate, stratum and measure that has any value or a reason for none."""
    for measure in MEASURES.values():
        if measure.table == "measures":
            yield from _of_measure(measures, measure, candidates)
        elif measure.table == "windows":
            yield from _of_window_measure(windows, measure, candidates)


def _of_measure(groups: Groups, measure: Measure, candidates: tuple[str, ...]) -> Iterator[FigureEntry]:
    """One measure of the table of measures."""
    values = groups.reader.numbers(measure.column)
    unit_of, units = groups.reader.codes("unit")
    for candidate in candidates:
        for stratum, rows in groups.by_stratum(groups.of_candidate(candidate)):
            for code in np.unique(unit_of[rows]):
                same_unit = rows[unit_of[rows] == code]
                yield from _entry(groups.reader, measure, candidate, stratum, "", units[code], same_unit, values)


def _of_window_measure(groups: Groups, measure: Measure, candidates: tuple[str, ...]) -> Iterator[FigureEntry]:
    """One measure of the table of windows, each window and setting apart."""
    if not groups.reader.rows:
        return
    values = groups.reader.numbers(measure.column)
    for candidate in candidates:
        for stratum, rows in groups.by_stratum(groups.of_candidate(candidate)):
            for name, same in _by_setting(groups, rows):
                yield from _entry(groups.reader, measure, candidate, stratum, name, "", same, values)


def _by_setting(groups: Groups, rows: Indices) -> Iterator[tuple[str, Indices]]:
    """Split rows by window and setting; a label with more settings than `MOST_SETTINGS` stays one, and says so."""
    label_of, labels = groups.reader.codes("window")
    centre_of, width_of = groups.reader.numbers("centre")[rows], groups.reader.numbers("width")[rows]
    for code in np.unique(label_of[rows]):
        same = label_of[rows] == code
        settings = np.unique(np.stack([centre_of[same], width_of[same]]), axis=1).T
        if np.isnan(settings).any():
            yield f"{labels[code]} (a table)", rows[same]
        elif len(settings) > MOST_SETTINGS:
            yield f"{labels[code]} (another centre and width in each of {len(settings)} settings)", rows[same]
        else:
            for centre, width in settings:
                name = f"{labels[code]} (centre {centre:g}, width {width:g})"
                yield name, rows[same & (centre_of == centre) & (width_of == width)]


def _entry(
    reader: TableReader,
    measure: Measure,
    candidate: str,
    stratum: str,
    window: str,
    image_unit: str,
    rows: Indices,
    values: npt.NDArray[np.float64],
) -> Iterator[FigureEntry]:
    """Yield the entry of one group of rows; none where the measure does not apply to any of its frames."""
    known = rows[~np.isnan(values[rows])]
    missing = len(rows) - len(known)
    if not len(known) and not measure.null_when_equal:
        return
    found = values[known]
    spread = [float(part) for part in np.percentile(found, (50, 5, 95))] if len(known) else [None, None, None]
    row, column = ROW_AND_COLUMN.get(measure.name, ("", ""))
    yield FigureEntry(
        candidate=candidate,
        stratum=stratum,
        measure=measure.name,
        window=window,
        unit=image_unit if measure.unit == IMAGE_UNIT else measure.unit,
        worse=measure.worse,
        frames=len(known),
        without_value=missing,
        reason=_reason(measure, missing),
        median=spread[0],
        p05=spread[1],
        p95=spread[2],
        least=float(found.min()) if len(known) else None,
        largest=float(found.max()) if len(known) else None,
        worst=place_at(reader, worst_index(measure, known, found), row=row, column=column) if len(known) else None,
    )


def _reason(measure: Measure, missing: int) -> str:
    """Why some frames have no value."""
    if not missing:
        return ""
    return "infinite: nothing changed" if measure.null_when_equal else "not evaluated on these frames"


def worst_index(measure: Measure, rows: Indices, values: npt.NDArray[np.float64]) -> int:
    """Row of the worst of some values, none of them NaN; the first of equals."""
    if measure.worse == "lower":
        return int(rows[np.argmin(values)])
    return int(rows[np.argmax(np.abs(values) if measure.signed else values)])
