"""The worst places: where each candidate moved values most."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np

from safecheck.record.crops import read_crop
from safecheck.record.worst import WorstPlaceEntry, WorstStudyEntry
from safecheck.report.blocks import Block, Column, Heading, Pictures, PlaceCard, Places, Prose, Row, Section, Table
from safecheck.report.definitions import label_of
from safecheck.report.numbers import NONE, aligned, count, figure
from safecheck.report.sections.view import View, place_short, rest_sentence

__all__ = ["places"]

CARDS = 20
STUDIES = 20
_TEXT = "No picture: the frame may carry text."


def places(view: View) -> Section:
    """The section Worst places."""
    entries = sorted(view.record.worst_places, key=_order(view))
    if not entries:
        return Section("Worst places", (Prose("No worst place is recorded: no patch could be evaluated."),))
    cards = tuple(_card(entry, view.crops) for entry in entries[:CARDS])
    rest = rest_sentence(CARDS, len(entries), "all stand in record.json, and every frame's in measures.parquet")
    intro = (
        "The frames whose worst patch moved most, by candidate and group; each frame once. The outline is the frame, "
        "the small square the patch; the figures at its edges are the first row and column of the patch, from 0, rows "
        "downwards and columns to the right."
    )
    if any(card.pictures for card in cards):
        intro += " The scale of the difference is another on each card: its ends stand below the picture."
    blocks: list[Block] = [Prose(intro, "note"), Places(cards)]
    if rest:
        blocks.append(Prose(rest, "note"))
    return Section("Worst places", (*_studies(view), *blocks))


def _studies(view: View) -> list[Block]:
    """The studies with the worst frames, each with its worst series and frame."""
    entries = sorted(view.record.worst_studies, key=lambda item: (item.rank, *_place_in_order(view, item.candidate)))
    if not entries:
        return []
    shown = entries[:STUDIES]
    over = label_of(shown[0].measure)
    columns = (
        Column("Candidate"),
        Column("Study"),
        Column("Frames", number=True),
        Column("median", number=True, over=over),
        Column("worst frame", number=True, over=over),
        Column("Worst frame"),
        Column("Median of its series", number=True),
    )
    rows: list[Row] = []
    for name, unit in dict.fromkeys((item.stratum, item.unit) for item in shown):
        same = [item for item in shown if (item.stratum, item.unit) == (name, unit)]
        rows += [Row((f"{name}, in {unit}",), group=True), *_rows_of_studies(same)]
    note = rest_sentence(len(shown), len(entries), "all stand in record.json")
    table = Table(columns, tuple(rows), note=note)
    return [Heading("Worst studies, by their worst frame"), table, Heading("Worst patches")]


def _rows_of_studies(same: Sequence[WorstStudyEntry]) -> list[Row]:
    """Studies of one group."""
    flat = aligned([value for item in same for value in (item.median, item.largest, item.worst_series_median)])
    return [
        Row(
            (
                item.candidate,
                item.worst.study,
                count(item.frames),
                flat[3 * index],
                flat[3 * index + 1],
                f"series {_index(item.worst.series_number)}, {place_short(item.worst)}",
                flat[3 * index + 2],
            )
        )
        for index, item in enumerate(same)
    ]


def _order(view: View) -> Callable[[WorstPlaceEntry], tuple[int, bool, int, str]]:
    """Sort by rank first, so that a cut list keeps the worst place of every candidate and group."""

    def key(entry: WorstPlaceEntry) -> tuple[int, bool, int, str]:
        return entry.rank, *_place_in_order(view, entry.candidate), entry.stratum

    return key


def _place_in_order(view: View, candidate: str) -> tuple[bool, int]:
    """Proposed candidates first, each kind in the order of the view."""
    names = [item.candidate for item in view.candidates]
    proposed = {item.candidate for item in view.candidates if item.status == "proposed"}
    return candidate not in proposed, names.index(candidate) if candidate in names else len(names)


def _card(entry: WorstPlaceEntry, crops: Path | None) -> PlaceCard:
    """One card."""
    place = entry.place
    series = NONE if place.series_number is None else count(place.series_number)
    image = NONE if place.instance_number is None else count(place.instance_number)
    lines = [
        ("Patient", place.patient),
        ("Study", place.study),
        ("Series, image, frame", f"{series}, {image}, {count(place.frame)}"),
        ("Row, column", f"{_index(place.row)}, {_index(place.column)}"),
    ]
    if place.slice_position_mm is not None:
        lines.append(("Slice position", f"{figure(place.slice_position_mm, 4)} mm"))
    if entry.in_region:
        lines.append(("Touches region", entry.in_region))
    hidden = entry.may_show_text
    pictures = _pictures(crops, entry) if crops is not None and entry.crop and not hidden else None
    return PlaceCard(
        head=f"{entry.stratum}: {entry.candidate}, place\u00a0{entry.rank}",
        value=figure(entry.value),
        unit=entry.unit,
        measure=label_of(entry.measure),
        lines=tuple(lines),
        rows=entry.rows,
        columns=entry.columns,
        row=place.row,
        column=place.column,
        size_rows=entry.size_rows,
        size_columns=entry.size_columns,
        pictures=pictures,
        without_pictures=_TEXT if crops is not None and hidden else "",
    )


def _index(value: int | None) -> str:
    """A row or column, or a dash."""
    return NONE if value is None else count(value)


def _pictures(folder: Path, entry: WorstPlaceEntry) -> Pictures:
    """The crop, with the difference as grey levels around 128."""
    crop = read_crop(folder, entry.crop)
    about = crop.about
    grey = np.rint(128 + 127 * crop.difference / about.difference_scale)
    return Pictures(
        original=crop.original,
        recompressed=crop.recompressed,
        difference=np.clip(grey, 1, 255).astype(np.uint8),
        scale=about.difference_scale,
        unit=about.unit,
        window=about.window,
        mark=(
            about.patch_row - about.first_row,
            about.patch_column - about.first_column,
            about.patch_rows,
            about.patch_columns,
        ),
    )
