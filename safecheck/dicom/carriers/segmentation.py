"""Segmentation -> fractions of pixels on the segmentation's own grids (PS3.3 C.8.20)."""

from __future__ import annotations

import io
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from pydicom.dataset import Dataset

from safecheck.dicom.carriers.carried import Carried
from safecheck.dicom.carriers.labels import label_of, region_name
from safecheck.dicom.carriers.segment_frames import SegmentFrames, open_segment_frames
from safecheck.dicom.elements import items, text, whole_number
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.geometry import read_place
from safecheck.dicom.opened import open_file
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import InputRefused, RegionError
from safecheck.regions.region import Grid, MaskOnGrid, Region

__all__ = ["OBJECT_CLASS", "read_segmentation"]

OBJECT_CLASS = "1.2.840.10008.5.1.4.1.1.66.4"
"""Segmentation Storage."""
_REFERENCE, _INSTANCE = 0x00200052, 0x00081155
_LABEL, _MEANING = 0x00620005, 0x00080104


@dataclass(frozen=True, slots=True)
class _Segment:
    number: int
    """As the frames refer to it."""
    label: str


def read_segmentation(content: bytes, pseudonyms: Pseudonyms) -> Carried:
    """Read the frames of each segment.

    Parameters
    ----------
    content
        A segmentation of type BINARY or FRACTIONAL, as a DICOM file.
    pseudonyms
        Names under the site key, for frames of reference and instances.

    Returns
    -------
    Carried
        Role 'other'. Frames without a pixel of their segment are left out.

    Raises
    ------
    InputRefused
        The pixels would be read on a doubtful path.
    RegionError
        The type is another, or a frame names no segment.
    """
    opened = open_file(io.BytesIO(content))
    dataset = opened.dataset
    frames = open_segment_frames(opened)
    groups = FunctionalGroups(dataset, frames.count)
    segments = _segments(dataset)
    parts: dict[int, list[MaskOnGrid]] = {segment.number: [] for segment in segments}
    for index in range(frames.count):
        number = _segment_of(groups, index)
        if number not in parts:
            raise RegionError("a frame of the segmentation names a segment that is not described")
        fractions = frames.fractions(index)
        if fractions.any():
            parts[number].append(_mask(_grid(dataset, groups, index, frames, pseudonyms), fractions))
    return Carried(
        tuple(
            Region(region_name(place), segment.label, "other", tuple(parts[segment.number]))
            for place, segment in enumerate(segments, start=1)
        )
    )


def _segments(dataset: Dataset) -> list[_Segment]:
    """Segments described, in the order of the file."""
    found = []
    for place, item in enumerate(items(dataset, "SegmentSequence"), start=1):
        coded = [text(code, _MEANING) for code in items(item, "SegmentedPropertyTypeCodeSequence")]
        found.append(_Segment(whole_number(item, "SegmentNumber"), label_of([text(item, _LABEL), *coded], place)))
    if len({segment.number for segment in found}) != len(found):
        raise RegionError("two segments of the segmentation bear one number")
    return found


def _segment_of(groups: FunctionalGroups, index: int) -> int:
    return whole_number(groups.of(index, "SegmentIdentificationSequence"), "ReferencedSegmentNumber")


def _mask(grid: Grid, fractions: npt.NDArray[np.float64]) -> MaskOnGrid:
    """Keep the box that holds the segment alone: as a rule a small part of a frame."""
    rows, columns = np.flatnonzero(fractions.any(axis=1)), np.flatnonzero(fractions.any(axis=0))
    box = fractions[rows[0] : rows[-1] + 1, columns[0] : columns[-1] + 1]
    return MaskOnGrid(grid, np.ascontiguousarray(box), (int(rows[0]), int(columns[0])))


def _grid(
    dataset: Dataset, groups: FunctionalGroups, index: int, frames: SegmentFrames, pseudonyms: Pseudonyms
) -> Grid:
    """Where a frame lies: its own geometry, and the frame of the instance that it was derived from, if only one."""
    reference = text(dataset, _REFERENCE)
    place = read_place(dataset, groups, index, pseudonyms.name("frame", reference) if reference else "")
    instance, number = _source(groups, index, pseudonyms)
    geometry = place.geometry
    return Grid(
        rows=frames.rows,
        columns=frames.columns,
        instance=instance,
        frame=number,
        spacing_mm=place.spacing_mm,
        position_mm=geometry.position_mm if geometry else None,
        along_columns=geometry.along_columns if geometry else None,
        along_rows=geometry.along_rows if geometry else None,
        frame_of_reference=geometry.frame_of_reference if geometry else "",
    )


def _source(groups: FunctionalGroups, index: int, pseudonyms: Pseudonyms) -> tuple[str, int]:
    """(pseudonym, frame number) of the one frame that this one was derived from; ('', 1) for none or several."""
    derivation = groups.find(index, "DerivationImageSequence")
    sources = items(derivation, "SourceImageSequence") if derivation is not None else ()
    if len(sources) != 1:
        return "", 1
    uid = text(sources[0], _INSTANCE)
    try:
        number = whole_number(sources[0], "ReferencedFrameNumber", missing=1)
    except InputRefused:
        # Several frames of one instance: as good as several instances.
        return "", 1
    return (pseudonyms.name("instance", uid), number) if uid else ("", 1)
