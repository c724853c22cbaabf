"""Where an image comes from, in known terms."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from pydicom.dataset import Dataset

from safecheck.dicom.age import under_18
from safecheck.dicom.origin import slice_position_mm, slice_thickness_class
from safecheck.frames import Origin
from tests.dicom.made_files import image, save, take_in


def origin(tmp_path: Path, **changes: Any) -> Origin:
    (found,) = take_in(save(image(**changes), tmp_path / "f")).instances
    return found.origin


@pytest.mark.parametrize(
    ("thickness", "name"),
    [
        ("0.625", "up to 1 mm"),
        ("1", "up to 1 mm"),
        ("1.25", "over 1 to 3 mm"),
        ("3.0", "over 1 to 3 mm"),
        ("5", "over 3 to 5 mm"),
        ("5.01", "over 5 mm"),
        ("0", ""),
        ("-1", ""),
        ("nan", ""),
        ("inf", ""),
        ("", ""),
        ("thick", ""),
    ],
)
def test_slice_thickness_falls_into_its_class(thickness: str, name: str) -> None:
    assert slice_thickness_class(thickness) == name


@pytest.mark.parametrize(
    ("position", "orientation", "along"),
    # Computed from the stated definition: position . (row x column).
    [
        ((1.0, 2.0, 3.0), (1.0, 0.0, 0.0, 0.0, 1.0, 0.0), 3.0),
        ((1.0, 2.0, 3.0), (0.0, 1.0, 0.0, 0.0, 0.0, -1.0), -1.0),
        ((1.0, 2.0, 3.0), (0.6, 0.8, 0.0, 0.0, 0.0, 1.0), -0.4),
        ((1.0, 2.0), (1.0, 0.0, 0.0, 0.0, 1.0, 0.0), None),
        ((1.0, 2.0, 3.0), (1.0, 0.0, 0.0, 1.0, 0.0, 0.0), None),
        ((1.0, 2.0, float("nan")), (1.0, 0.0, 0.0, 0.0, 1.0, 0.0), None),
        ((), (), None),
    ],
)
def test_slice_position_is_measured_along_the_normal(
    position: tuple[float, ...], orientation: tuple[float, ...], along: float | None
) -> None:
    assert slice_position_mm(position, orientation) == (None if along is None else pytest.approx(along, abs=1e-6))


@pytest.mark.parametrize(
    ("changes", "shown"),
    [
        ({}, False),
        ({"BurnedInAnnotation": "NO"}, False),
        ({"BurnedInAnnotation": "YES"}, True),
        ({"Modality": "US"}, True),
        ({"Modality": "US", "BurnedInAnnotation": "NO"}, True),
        ({"Modality": None}, True),
    ],
    ids=str,
)
def test_burned_in_text_is_declared_or_likely(tmp_path: Path, changes: dict[str, Any], shown: bool) -> None:
    assert origin(tmp_path, **changes).may_show_text is shown


def test_functional_groups_of_enhanced_images_are_looked_into(tmp_path: Path) -> None:
    measures, reconstruction, shared = Dataset(), Dataset(), Dataset()
    measures.SliceThickness = "0.5"
    reconstruction.ConvolutionKernel = "B70f"
    shared.PixelMeasuresSequence = [measures]
    shared.CTReconstructionSequence = [reconstruction]
    found = origin(tmp_path, SliceThickness=None, SharedFunctionalGroupsSequence=[shared])
    assert (found.slice_thickness_class, found.kernel) == ("up to 1 mm", "B70f")


@pytest.mark.parametrize(
    ("changes", "minor"),
    [
        ({"PatientAge": "017Y"}, True),
        ({"PatientAge": "018Y"}, False),
        ({"PatientAge": "215M"}, True),
        ({"PatientAge": "216M"}, False),
        ({"PatientAge": "052W"}, True),
        ({"PatientAge": "999D"}, True),
        ({"PatientAge": "OLD"}, False),
        ({"PatientBirthDate": "20000301", "StudyDate": "20180228"}, True),
        ({"PatientBirthDate": "20000301", "StudyDate": "20180301"}, False),
        ({"PatientBirthDate": "20000301", "AcquisitionDate": "20010101"}, True),
        ({"PatientBirthDate": "20200301", "StudyDate": "20180301"}, False),
        ({"PatientBirthDate": "20000301"}, False),
        ({"PatientAge": "040Y", "PatientBirthDate": "20000301", "StudyDate": "20010101"}, False),
        ({}, False),
    ],
    ids=str,
)
def test_minors_are_told_by_age_or_by_dates(changes: dict[str, Any], minor: bool) -> None:
    dataset = Dataset()
    for keyword, value in changes.items():
        dataset.add_new(keyword, "LO", value)
    assert under_18(dataset) is minor
