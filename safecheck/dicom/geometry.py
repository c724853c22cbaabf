"""Where a frame lies and how large its pixels are, per frame."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from pydicom.dataset import Dataset

from safecheck.dicom.elements import real_numbers
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.origin import slice_position_mm, slice_thickness_class
from safecheck.frames import Geometry

__all__ = ["Place", "read_place"]

_Triple = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class Place:
    """Geometry and spacing of a frame."""

    geometry: Geometry | None
    spacing_mm: tuple[float, float] | None
    """(between rows, between columns)."""
    slice_position_mm: float | None
    """Along the normal of the frame's plane."""
    slice_thickness_class: str
    """As `Origin` names it; '' where unknown."""
    notes: tuple[str, ...]


def read_place(dataset: Dataset, groups: FunctionalGroups, index: int, reference: str) -> Place:
    """Read geometry of a frame (from 0); what is missing or malformed is None, with a note where it misleads.

    The spacing of ultrasound regions is not used: it holds for parts of the frame only. `reference` is the keyed
    pseudonym of the frame of reference.
    """
    measures = groups.of(index, "PixelMeasuresSequence")
    spacing_mm, notes = _spacing(dataset, measures)
    position = real_numbers(groups.of(index, "PlanePositionSequence"), "ImagePositionPatient")
    orientation = real_numbers(groups.of(index, "PlaneOrientationSequence"), "ImageOrientationPatient")
    thickness = real_numbers(measures, "SliceThickness")
    geometry = _geometry(position, orientation, reference)
    if orientation is not None and position is not None and geometry is None:
        notes = (*notes, "position or orientation in the patient is malformed and was left aside")
    return Place(
        geometry=geometry,
        spacing_mm=spacing_mm,
        slice_position_mm=None if geometry is None else slice_position_mm(position or (), orientation or ()),
        slice_thickness_class=slice_thickness_class(str(thickness[0]) if thickness else ""),
        notes=notes,
    )


def _spacing(dataset: Dataset, measures: Dataset) -> tuple[tuple[float, float] | None, tuple[str, ...]]:
    notes: list[str] = []
    for source, keyword, at_detector in (
        (measures, "PixelSpacing", False),
        (dataset, "ImagerPixelSpacing", True),
    ):
        if keyword not in source:
            continue
        numbers = real_numbers(source, keyword)
        if numbers is None or len(numbers) != 2 or min(numbers) <= 0:
            notes.append(f"{'detector' if at_detector else 'pixel'} spacing is zero or malformed and was left aside")
            continue
        if at_detector or _same_as_detector(dataset, numbers):
            notes.append("spacing is that at the detector")
        return (numbers[0], numbers[1]), tuple(notes)
    return None, tuple(notes)


def _same_as_detector(dataset: Dataset, numbers: tuple[float, ...]) -> bool:
    """Pixel Spacing equal to that of the detector, without calibration, is none of the patient (PS3.3 10.7.1.1)."""
    detector = real_numbers(dataset, "ImagerPixelSpacing")
    return detector == numbers and "PixelSpacingCalibrationType" not in dataset


def _geometry(
    position: tuple[float, ...] | None, orientation: tuple[float, ...] | None, reference: str
) -> Geometry | None:
    if position is None or orientation is None or len(position) != 3 or len(orientation) != 6:
        return None
    across, down = _unit_vector(orientation[:3]), _unit_vector(orientation[3:])
    if across is None or down is None or abs(float(np.dot(across, down))) > 1e-3:
        return None
    return Geometry((position[0], position[1], position[2]), across, down, reference)


def _unit_vector(numbers: tuple[float, ...]) -> _Triple | None:
    """Direction cosines of length 1 within rounding; None for anything else."""
    length = math.sqrt(sum(each * each for each in numbers))
    if not math.isclose(length, 1, abs_tol=1e-3):
        return None
    return numbers[0] / length, numbers[1] / length, numbers[2] / length
