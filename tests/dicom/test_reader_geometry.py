"""Place, spacing, functional groups and burned-in text of a frame."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from pydicom.dataset import Dataset

from safecheck.dicom.intake import Include
from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.frames import DisplayWindow, Frame, Rescale
from tests.dicom.factory import BIG_ENDIAN, EXPLICIT, header_for, noise, write_instance
from tests.dicom.made_files import take_in

Array = npt.NDArray[Any]
GREY = noise((12, 10), 12)
SIGNED = noise((12, 10), 12, signed=True, dtype="i2")


def item(**changes: object) -> Dataset:
    made = Dataset()
    for keyword, value in changes.items():
        setattr(made, keyword, value)
    return made


def grey_header(**changes: object) -> Dataset:
    return header_for(GREY, **{"BitsStored": 12, **changes})


def read(
    folder: Path,
    dataset: Dataset,
    samples: Array = GREY,
    syntax: str = EXPLICIT,
    *,
    number: int = 1,
) -> Frame:
    pixels = samples.astype(samples.dtype.newbyteorder(">" if syntax == BIG_ENDIAN else "<")).tobytes()
    instance = write_instance(folder, dataset, pixels, syntax)
    with open_instance(instance) as reader:
        return reader.frame(number)


def test_position_orientation_and_reference_are_read(tmp_path: Path) -> None:
    dataset = grey_header(
        ImagePositionPatient=[-120.5, -80, 33.25],
        ImageOrientationPatient=[1, 0, 0, 0, 0.6, -0.8],
        FrameOfReferenceUID="1.2.840.1",
        PixelSpacing=[0.7, 0.5],
    )
    frame = read(tmp_path, dataset)
    assert frame.geometry is not None
    assert frame.geometry.position_mm == (-120.5, -80, 33.25)
    assert frame.geometry.along_columns == (1, 0, 0)
    assert frame.geometry.along_rows == pytest.approx((0, 0.6, -0.8))
    assert frame.geometry.frame_of_reference == "frame of reference"
    assert frame.spacing_mm == (0.7, 0.5)
    # Normal (1,0,0) x (0,0.6,-0.8) = (0, 0.8, 0.6); computed from the stated definition.
    assert frame.origin.slice_position_mm == pytest.approx(-80 * 0.8 + 33.25 * 0.6)


@pytest.mark.parametrize(
    "orientation", [[1, 0, 0, 1, 0, 0], [0, 0, 0, 0, 1, 0], [2, 0, 0, 0, 1, 0]], ids=["parallel", "zero", "long"]
)
def test_directions_that_span_no_plane_give_no_geometry(tmp_path: Path, orientation: list[float]) -> None:
    dataset = grey_header(ImagePositionPatient=[0, 0, 0], ImageOrientationPatient=orientation)
    frame = read(tmp_path, dataset)
    assert frame.geometry is None
    assert frame.origin.slice_position_mm is None
    assert any("malformed" in note for note in frame.origin.notes)


SPACINGS = [
    pytest.param({}, None, None, id="none"),
    pytest.param({"PixelSpacing": [0.7, 0.5]}, (0.7, 0.5), None, id="in the patient"),
    pytest.param({"PixelSpacing": [0, 0.5]}, None, "zero", id="zero"),
    pytest.param({"PixelSpacing": [-0.5, 0.5]}, None, "zero", id="negative"),
    pytest.param({"PixelSpacing": [0.5]}, None, "zero", id="one value"),
    pytest.param({"ImagerPixelSpacing": [0.1, 0.1]}, (0.1, 0.1), "at the detector", id="detector only"),
    pytest.param(
        {"PixelSpacing": [0.1, 0.1], "ImagerPixelSpacing": [0.1, 0.1]}, (0.1, 0.1), "at the detector", id="copied"
    ),
    pytest.param({"PixelSpacing": [0.08, 0.08], "ImagerPixelSpacing": [0.1, 0.1]}, (0.08, 0.08), None, id="corrected"),
    pytest.param(
        {"PixelSpacing": [0, 0], "ImagerPixelSpacing": [0.1, 0.1]}, (0.1, 0.1), "at the detector", id="zero, detector"
    ),
]


@pytest.mark.parametrize(("changes", "spacing", "note"), SPACINGS)
def test_spacing_is_that_of_the_patient_or_says_what_it_is(
    tmp_path: Path, changes: dict[str, object], spacing: tuple[float, float] | None, note: str | None
) -> None:
    frame = read(tmp_path, grey_header(**changes))
    assert frame.spacing_mm == spacing
    assert bool(frame.origin.notes) == (note is not None)
    assert note is None or any(note in each for each in frame.origin.notes)


def test_the_spacing_of_ultrasound_regions_is_not_used(tmp_path: Path) -> None:
    dataset = grey_header()
    dataset.SequenceOfUltrasoundRegions = [item(PhysicalDeltaX=0.01, PhysicalDeltaY=0.01)]
    instance = write_instance(tmp_path, dataset, GREY.tobytes(), modality="US")
    with open_instance(instance) as reader:
        assert reader.frame(1).spacing_mm is None


# --- enhanced


def enhanced(frames: int) -> Dataset:
    dataset = grey_header(NumberOfFrames=frames, RescaleSlope=99, RescaleIntercept=99)
    dataset.SharedFunctionalGroupsSequence = [
        item(
            PlaneOrientationSequence=[item(ImageOrientationPatient=[1, 0, 0, 0, 1, 0])],
            PixelMeasuresSequence=[item(PixelSpacing=[0.4, 0.4], SliceThickness=2)],
            PixelValueTransformationSequence=[item(RescaleSlope=2, RescaleIntercept=-5, RescaleType="HU")],
            FrameVOILUTSequence=[item(WindowCenter=10, WindowWidth=20)],
            CTImageFrameTypeSequence=[item(FrameType=["ORIGINAL", "PRIMARY", "VOLUME", "NONE"])],
        )
    ]
    dataset.PerFrameFunctionalGroupsSequence = [
        item(PlanePositionSequence=[item(ImagePositionPatient=[0, 0, 3.0 * number])]) for number in range(frames)
    ]
    return dataset


def test_each_frame_of_an_enhanced_object_has_its_own_values(tmp_path: Path) -> None:
    samples = np.stack([noise((12, 10), 12, seed=seed) for seed in range(3)])
    dataset = enhanced(3)
    own = dataset.PerFrameFunctionalGroupsSequence[1]
    own.PixelValueTransformationSequence = [item(RescaleSlope=7, RescaleIntercept=1, RescaleType="US")]
    own.PixelMeasuresSequence = [item(PixelSpacing=[0.5, 0.6], SliceThickness=6)]
    own.FrameVOILUTSequence = [item(WindowCenter=100, WindowWidth=200)]
    own.CTImageFrameTypeSequence = [item(FrameType=["ORIGINAL", "PRIMARY", "LOCALIZER", "NONE"])]
    instance = write_instance(tmp_path, dataset, samples.tobytes())
    with open_instance(instance) as reader:
        frames = [reader.frame(number) for number in (1, 2, 3)]
    for frame, expected in zip(frames, samples, strict=True):
        assert np.array_equal(frame.raster.samples, expected)
    assert [frame.modality_transform for frame in frames] == [Rescale(2, -5), Rescale(7, 1), Rescale(2, -5)]
    assert [frame.unit for frame in frames] == ["HU", "rescaled, unit unspecified", "HU"]
    assert [frame.spacing_mm for frame in frames] == [(0.4, 0.4), (0.5, 0.6), (0.4, 0.4)]
    assert [frame.origin.slice_position_mm for frame in frames] == [0, 3, 6]
    assert [frame.origin.slice_thickness_class for frame in frames] == [
        "over 1 to 3 mm",
        "over 5 mm",
        "over 1 to 3 mm",
    ]
    assert frames[1].displays == (DisplayWindow("file window 1", 100, 200),)
    assert frames[2].displays == (DisplayWindow("file window 1", 10, 20),)
    assert [frame.key.frame for frame in frames] == [1, 2, 3]


def test_functional_groups_for_another_number_of_frames_are_refused(tmp_path: Path) -> None:
    dataset = enhanced(3)
    dataset.NumberOfFrames = 2
    instance = write_instance(tmp_path, dataset, np.stack([GREY, GREY]).tobytes())
    with pytest.raises(InputRefused, match=r"^frames"):
        open_instance(instance)


# --- burned-in text

CT_UID, CAPTURE_UID = "1.2.840.10008.5.1.4.1.1.2", "1.2.840.10008.5.1.4.1.1.7"
TEXTS = [
    pytest.param("CT", CT_UID, {}, False, id="CT"),
    pytest.param("CT", CT_UID, {"BurnedInAnnotation": "NO"}, False, id="CT that says NO"),
    pytest.param("CT", CT_UID, {"BurnedInAnnotation": "YES"}, True, id="CT that says so"),
    pytest.param("CT", CT_UID, {"BurnedInAnnotation": "PERHAPS"}, True, id="CT of another word"),
    pytest.param("CT", CAPTURE_UID, {}, True, id="CT captured"),
    pytest.param("CT", CAPTURE_UID, {"BurnedInAnnotation": "NO"}, True, id="CT captured, NO"),
    pytest.param("CT", CT_UID, {"ImageType": ["DERIVED", "SECONDARY", "OTHER"]}, True, id="CT derived"),
    pytest.param("CT", CT_UID, {"ConversionType": "WSD"}, True, id="CT of a workstation"),
    pytest.param("CT", CT_UID, {"ImageType": ["DERIVED", "SECONDARY"], "BurnedInAnnotation": "NO"}, False, id="CT, NO"),
    pytest.param("US", "1.2.840.10008.5.1.4.1.1.6.1", {}, True, id="US"),
    pytest.param("US", "1.2.840.10008.5.1.4.1.1.6.1", {"BurnedInAnnotation": "NO"}, True, id="US, NO"),
    pytest.param("XC", "1.2.840.10008.5.1.4.1.1.77.1.4", {}, True, id="photograph"),
    pytest.param("CR", "1.2.840.10008.5.1.4.1.1.1", {}, True, id="CR"),
    pytest.param("DX", "1.2.840.10008.5.1.4.1.1.1.1", {"BurnedInAnnotation": "NO"}, False, id="DX, NO"),
    pytest.param(None, CT_UID, {}, True, id="modality unknown"),
]


@pytest.mark.parametrize(("modality", "object_uid", "changes", "expected"), TEXTS)
def test_text_in_the_pixels_is_assumed_unless_ruled_out(
    tmp_path: Path, modality: str | None, object_uid: str, changes: dict[str, object], expected: bool
) -> None:
    dataset = grey_header(Modality=modality, SOPClassUID=object_uid, **changes)
    path = write_instance(tmp_path, dataset, GREY.tobytes()).source.path
    (instance,) = take_in(path, include=Include(secondary_captures=True)).instances
    with open_instance(instance) as reader:
        assert reader.frame(1).origin.may_show_text is expected
