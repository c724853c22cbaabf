"""Crops of the worst places, written only when asked for, and never of a frame that may carry burned-in text."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from safecheck.dicom.instance import Instance
from safecheck.dicom.reader import open_instance
from safecheck.evaluation.assignment import Assignment
from safecheck.evaluation.crops import take_crop
from safecheck.evaluation.original import Original, prepare
from safecheck.evaluation.treatment import Treated, deliver, recompress
from safecheck.jobs.series import SeriesAssignments
from safecheck.record.crops import CropMeta, write_crop
from safecheck.record.worst import WorstPlaceEntry
from safecheck.wording import DELIVERED_COPIES

__all__ = ["PLACES", "write_places"]

PLACES = "places"


def write_places(
    folder: Path,
    places: tuple[WorstPlaceEntry, ...],
    instances: tuple[Instance, ...],
    pairs: Mapping[str, Instance],
    assignment: Assignment,
) -> tuple[WorstPlaceEntry, ...]:
    """Recompress the frames of the worst places again and write their crops.

    Parameters
    ----------
    folder
        The dossier.
    places
        As the record lists them.
    instances
        Originals of the run.
    pairs
        Input pseudonym of an original -> its delivered copy.
    assignment
        What was done to every frame.

    Returns
    -------
    tuple of WorstPlaceEntry
        With the names of their crops.
    """
    (folder / PLACES).mkdir(exist_ok=True)
    assignments = SeriesAssignments(assignment, instances)
    known = {(each.series, each.instance): each for each in instances}
    shown = []
    for number, entry in enumerate(places, start=1):
        instance = known[entry.place.series, entry.place.instance]
        name = "" if entry.may_show_text else f"place-{number:03d}"
        if name:
            _write(folder / PLACES, name, entry, instance, pairs.get(instance.input), assignments.of(instance))
        shown.append(entry.model_copy(update={"crop": name}))
    return tuple(shown)


def _write(
    folder: Path,
    name: str,
    entry: WorstPlaceEntry,
    instance: Instance,
    delivered: Instance | None,
    assignment: Assignment,
) -> None:
    """Write one crop."""
    row, column = entry.place.row or 0, entry.place.column or 0
    with open_instance(instance) as reader:
        original = prepare(reader.frame(entry.place.frame), assignment)
    treated = _treated(original, entry, delivered, assignment)
    crop = take_crop(original, treated, row, column, entry.size_rows)
    meta = CropMeta(
        unit=entry.unit,
        window=crop.window,
        first_row=crop.first_row,
        first_column=crop.first_column,
        patch_row=row,
        patch_column=column,
        patch_rows=entry.size_rows,
        patch_columns=entry.size_columns,
    )
    write_crop(folder, name, crop.original, crop.recompressed, crop.difference, meta)


def _treated(original: Original, entry: WorstPlaceEntry, delivered: Instance | None, assignment: Assignment) -> Treated:
    """The frame under the entry's candidate, or its delivered copy."""
    if entry.candidate == DELIVERED_COPIES and delivered is not None:
        with open_instance(delivered) as reader:
            return deliver(reader.frame(entry.place.frame))
    candidate = next(each for each in assignment.candidates if each.name == entry.candidate)
    return recompress(original, candidate)[0]
