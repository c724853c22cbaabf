"""Files are valid enough for any reader: File Meta, mandatory attributes, UIDs, whole pixel data."""

from __future__ import annotations

from pathlib import Path

import pytest
from pydicom import Dataset, dcmread
from pydicom.uid import UID

import synthetic_studies as made

COMMON = (
    "SOPClassUID SOPInstanceUID StudyInstanceUID SeriesInstanceUID Modality SamplesPerPixel PhotometricInterpretation "
    "Rows Columns BitsAllocated BitsStored HighBit PixelRepresentation PixelData"
)
# Type 1 attributes of the image modules, PS3.3 annex A (from memory).
MANDATORY = {
    "CT": "ImageType RescaleIntercept RescaleSlope PixelSpacing ImagePositionPatient ImageOrientationPatient "
    "FrameOfReferenceUID",
    "MR": "ImageType ScanningSequence SequenceVariant PixelSpacing ImagePositionPatient ImageOrientationPatient "
    "FrameOfReferenceUID",
    "CR": "InstanceNumber",
    "US": "NumberOfFrames FrameIncrementPointer FrameTime BurnedInAnnotation",
    "XA": "ImageType PixelIntensityRelationship RadiationSetting NumberOfFrames FrameIncrementPointer",
}
PRESENT = "PatientName PatientID PatientBirthDate PatientSex StudyDate StudyTime AccessionNumber ReferringPhysicianName"


@pytest.fixture(scope="module")
def headers(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Dataset]:
    folder = tmp_path_factory.mktemp("all")
    truths = (
        made.ct_body(folder / "ct", seed=1, rows=64, columns=64, slices=1),
        made.mr_head(folder / "mr", seed=1, rows=64, columns=64, slices=1),
        made.radiograph(folder / "cr", seed=1, rows=96, columns=80),
        made.us_cine(folder / "us", seed=1, rows=120, columns=160, frames=3),
        made.big_multiframe(folder / "xa.dcm", 3, 32, 40),
    )
    found = [dcmread(truth.files[0]) for truth in truths]
    return {header.Modality: header for header in found}


@pytest.mark.parametrize("modality", MANDATORY)
def test_every_mandatory_attribute_has_a_value(headers: dict[str, Dataset], modality: str) -> None:
    header = headers[modality]
    for keyword in (COMMON + " " + MANDATORY[modality]).split():
        assert keyword in header, keyword
        assert header[keyword].value not in (None, "", []), keyword
    for keyword in PRESENT.split():
        assert keyword in header, keyword


@pytest.mark.parametrize("modality", MANDATORY)
def test_uids_are_valid_and_follow_from_the_seed(headers: dict[str, Dataset], modality: str) -> None:
    header = headers[modality]
    for keyword in ("SOPInstanceUID", "StudyInstanceUID", "SeriesInstanceUID"):
        assert UID(header[keyword].value).is_valid
        assert header[keyword].value.startswith("2.25.")
    meta = header.file_meta
    assert meta.MediaStorageSOPInstanceUID == header.SOPInstanceUID
    assert meta.MediaStorageSOPClassUID == header.SOPClassUID


@pytest.mark.parametrize("modality", MANDATORY)
def test_pixels_have_the_declared_shape(headers: dict[str, Dataset], modality: str) -> None:
    header = headers[modality]
    frames = () if header.get("NumberOfFrames", 1) == 1 else (header.NumberOfFrames,)
    colour = (3,) if header.SamplesPerPixel == 3 else ()
    assert header.pixel_array.shape == (*frames, header.Rows, header.Columns, *colour)


@pytest.mark.parametrize("modality", MANDATORY)
def test_the_patient_is_plainly_invented(headers: dict[str, Dataset], modality: str) -> None:
    header = headers[modality]
    assert str(header.PatientName).startswith("Synthetic^Body")
    assert header.PatientID.startswith("SYN-")
    assert "invented" in header.InstitutionName


def test_a_run_too_long_for_its_length_field_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="expected under 4 GiB"):
        made.big_multiframe(tmp_path / "big.dcm", 2048, 1024, 1024)


def test_a_package_import_brings_in_nothing_but_numpy_and_pydicom() -> None:
    folder = Path(made.__file__).parent
    for path in folder.glob("*.py"):
        text = path.read_text(encoding="utf-8")
        for name in ("safecheck", "scipy", "skimage", "PIL", "imagecodecs"):
            assert f"import {name}" not in text
            assert f"from {name}" not in text


def test_the_truth_names_the_instances_as_they_are_written(tmp_path: Path) -> None:
    truth = made.ct_body(tmp_path, seed=1, rows=32, columns=32, slices=3)
    headers = [dcmread(path, stop_before_pixels=True) for path in truth.files]
    assert tuple(header.SOPInstanceUID for header in headers) == truth.instance_uids
    assert {header.SeriesInstanceUID for header in headers} == {truth.series_uid}
    assert [header.InstanceNumber for header in headers] == [1, 2, 3]
