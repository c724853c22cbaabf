"""The worst places: where each candidate moved values most."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np

from safecheck.record.crops import read_crop
from safecheck.record.document import WorstPlaceEntry
from safecheck.report.blocks import Block, Pictures, PlaceCard, Places, Prose, Section
from safecheck.report.definitions import label_of
from safecheck.report.numbers import NONE, count, figure
from safecheck.report.sections.view import View, rest_sentence

__all__ = ["places"]

CARDS = 30
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
    blocks: list[Block] = [Prose(intro, "note"), Places(cards)]
    if rest:
        blocks.append(Prose(rest, "note"))
    return Section("Worst places", tuple(blocks))


def _order(view: View) -> Callable[[WorstPlaceEntry], tuple[int, bool, int, str]]:
    """Sort by rank first, so that a cut list keeps the worst place of every candidate and group."""
    status = {item.candidate: index for index, item in enumerate(view.candidates)}
    proposed = {item.candidate for item in view.candidates if item.status == "proposed"}

    def key(entry: WorstPlaceEntry) -> tuple[int, bool, int, str]:
        order = status.get(entry.candidate, len(status))
        return entry.rank, entry.candidate not in proposed, order, entry.stratum

    return key


def _card(entry: WorstPlaceEntry, crops: Path | None) -> PlaceCard:
    """One card."""
    place = entry.place
    series = NONE if place.series_number is None else count(place.series_number)
    image = NONE if place.instance_number is None else count(place.instance_number)
    lines = [
        ("Group", entry.stratum),
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
        head=f"{entry.candidate}, place\u00a0{entry.rank}",
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
