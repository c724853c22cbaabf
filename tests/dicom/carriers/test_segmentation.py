"""Segmentations made by hand and pydicom's own samples, their pixels held against pydicom's own decoder."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from pydicom import dcmread
from pydicom.dataset import Dataset
from pydicom.uid import DeflatedExplicitVRLittleEndian, RLELossless

from safecheck.dicom.carriers.carrier import read_carrier
from safecheck.errors import RegionError
from safecheck.regions.region import Grid, MaskOnGrid, Region, RegionSet, cover_grid
from safecheck.wording import lint
from tests.dicom.carriers.made import (
    AXIAL,
    FRAME_UID,
    PLANES,
    PSEUDONYMS,
    ROOT,
    Vector,
    as_file,
    covered,
    grid_at,
    segmentation,
)
from tests.dicom.factory import real_file

# 13 x 11 pixels: no frame but the first begins at a whole byte.
SHAPE = (13, 11)


def masks(frames: int, seed: int = 1) -> npt.NDArray[np.uint8]:
    return np.random.default_rng(seed).integers(0, 2, (frames, *SHAPE)).astype(np.uint8)


def at(height_mm: float, axes: tuple[Vector, Vector] = AXIAL, **changes: Any) -> Grid:
    return grid_at(axes, height_mm, **({"rows": SHAPE[0], "columns": SHAPE[1]} | changes))


def read(dataset: Dataset) -> RegionSet:
    return read_carrier(as_file(dataset), PSEUDONYMS)


def only(dataset: Dataset) -> Region:
    (region,) = read(dataset).regions
    return region


@pytest.mark.parametrize("axes", PLANES.values(), ids=PLANES.keys())
def test_each_frame_lies_on_its_own_slice_alone(axes: tuple[Vector, Vector]) -> None:
    drawn, grids = masks(4), [at(height, axes) for height in (0.0, 1.3, 4.0, 9.9)]
    region = only(segmentation(drawn, grids))
    for mask, grid in zip(drawn, grids, strict=True):
        found = covered(region, grid)
        assert np.array_equal(found.fractions, mask)
        assert np.array_equal(found.inside, mask.astype(bool))
    assert cover_grid(region, at(2.0, axes)) is None


@pytest.mark.parametrize(
    "change",
    [
        {"frame_of_reference": "another"},
        {"spacing_mm": (0.8, 0.81)},
        {"rows": 14},
        {"along_rows": (0.0, -1.0, 0.0)},
        {"frame_of_reference": ""},
    ],
    ids=["frame of reference", "spacing", "size", "direction", "no frame of reference"],
)
def test_a_frame_of_another_grid_is_not_covered(change: dict[str, Any]) -> None:
    region = only(segmentation(masks(1), [at(0.0)]))
    assert cover_grid(region, at(0.0)) is not None
    assert cover_grid(region, at(0.0, **change)) is None


def test_segments_become_regions_in_the_order_of_the_file() -> None:
    drawn, grids = masks(4), [at(0.0), at(0.0), at(5.0), at(5.0)]
    dataset = segmentation(drawn, grids, segments=[2, 1, 2, 1], labels=["Doe, Jane", "Liver"])
    first, second = read(dataset).regions
    assert [(each.name, each.label, each.role) for each in (first, second)] == [
        ("region 1", "region 1", "other"),
        ("region 2", "liver", "other"),
    ]
    assert np.array_equal(covered(first, grids[0]).fractions, drawn[1])
    assert np.array_equal(covered(second, grids[2]).fractions, drawn[2])


def test_a_coded_meaning_stands_in_for_a_label_that_stays_behind() -> None:
    dataset = segmentation(masks(1), [at(0.0)])
    code = Dataset()
    code.CodeMeaning = "Spleen"
    dataset.SegmentSequence[0].SegmentedPropertyTypeCodeSequence = [code]
    assert only(dataset).label == "spleen"


def test_frames_and_segments_without_a_pixel_cover_nothing() -> None:
    drawn = masks(2)
    drawn[1] = 0
    dataset = segmentation(drawn, [at(0.0), at(5.0)], labels=["liver", "spleen"])
    liver, spleen = read(dataset).regions
    assert len(liver.parts) == 1
    assert spleen.parts == ()


def test_the_box_alone_is_kept() -> None:
    drawn = np.zeros((1, *SHAPE), np.uint8)
    drawn[0, 3:5, 7] = 1
    region = only(segmentation(drawn, [at(0.0)]))
    (part,) = region.parts
    assert isinstance(part, MaskOnGrid)
    assert (part.corner, part.fractions.shape) == ((3, 7), (2, 1))
    assert np.array_equal(covered(region, at(0.0)).fractions, drawn[0])


def fractional() -> tuple[npt.NDArray[np.uint8], Dataset]:
    samples = np.random.default_rng(2).integers(0, 201, (3, *SHAPE)).astype(np.uint8)
    return samples, segmentation(samples, [at(float(height)) for height in range(3)], kind="FRACTIONAL")


@pytest.mark.parametrize("syntax", ["uncompressed", "RLE"])
def test_fractions_are_used_as_they_are(syntax: str) -> None:
    samples, dataset = fractional()
    if syntax == "RLE":
        as_file(dataset)
        dataset.set_original_encoding(is_implicit_vr=False, is_little_endian=True)
        dataset.compress(RLELossless, encoding_plugin="pydicom", generate_instance_uid=False)
        region = only_of(as_file(dataset, RLELossless))
    else:
        region = only(dataset)
    for index in range(3):
        found = covered(region, at(float(index)))
        assert np.array_equal(found.fractions, samples[index] / 200)
        assert np.array_equal(found.inside, samples[index] >= 100)


def only_of(content: bytes) -> Region:
    (region,) = read_carrier(content, PSEUDONYMS).regions
    return region


UID_OF_IMAGE = f"{ROOT}4.1"
IMAGE = PSEUDONYMS.name("instance", UID_OF_IMAGE)
NOWHERE: dict[str, Any] = {"position_mm": None, "along_columns": None, "along_rows": None, "frame_of_reference": ""}


@pytest.mark.parametrize("number", [None, 3], ids=["no frame number", "frame 3"])
def test_without_geometry_the_instance_referred_to_decides(number: int | None) -> None:
    dataset = segmentation(masks(1), [at(0.0, **NOWHERE)], sources=[(UID_OF_IMAGE, number)], frame_uid="")
    region = only(dataset)
    assert cover_grid(region, at(0.0, **NOWHERE, instance=IMAGE, frame=number or 1)) is not None
    assert cover_grid(region, at(0.0, instance=IMAGE, frame=number or 1)) is not None
    assert cover_grid(region, at(0.0, **NOWHERE, instance=IMAGE, frame=2)) is None
    assert cover_grid(region, at(0.0, **NOWHERE, instance="another")) is None
    assert cover_grid(region, at(0.0, **NOWHERE)) is None


def test_several_sources_are_none() -> None:
    dataset = segmentation(masks(1), [at(0.0, **NOWHERE)], sources=[(UID_OF_IMAGE, None)], frame_uid="")
    images = dataset.PerFrameFunctionalGroupsSequence[0].DerivationImageSequence[0].SourceImageSequence
    images.append(images[0])
    assert cover_grid(only(dataset), at(0.0, **NOWHERE, instance=IMAGE)) is None
    del images[1]
    images[0].ReferencedFrameNumber = [1, 2]
    assert cover_grid(only(dataset), at(0.0, **NOWHERE, instance=IMAGE)) is None


def test_the_instance_referred_to_does_not_outweigh_geometry() -> None:
    region = only(segmentation(masks(1), [at(0.0)], sources=[(UID_OF_IMAGE, None)]))
    assert cover_grid(region, at(0.0, instance=IMAGE)) is not None
    assert cover_grid(region, at(2.0, instance=IMAGE)) is None
    assert cover_grid(region, at(0.0, instance=IMAGE, frame_of_reference="another")) is None


def _label_map(dataset: Dataset) -> None:
    dataset.SegmentationType = "LABELMAP"


def _unknown(dataset: Dataset) -> None:
    dataset.SegmentationType = "DOE JANE"


def _unnamed_segment(dataset: Dataset) -> None:
    dataset.PerFrameFunctionalGroupsSequence[0].SegmentIdentificationSequence[0].ReferencedSegmentNumber = 9


def _same_number(dataset: Dataset) -> None:
    dataset.SegmentSequence.append(dataset.SegmentSequence[0])


def _short(dataset: Dataset) -> None:
    dataset.PixelData = dataset.PixelData[:-2]


def _long(dataset: Dataset) -> None:
    dataset.PixelData += b"\0\0"


def _frames(dataset: Dataset) -> None:
    dataset.NumberOfFrames = 1


def _huge(dataset: Dataset) -> None:
    dataset.Rows, dataset.Columns = 16384, 16385


@pytest.mark.parametrize(
    ("fault", "sentence"),
    [
        (_label_map, "of type LABELMAP is not read; expected type BINARY or FRACTIONAL"),
        (_unknown, "of an unknown type is not read"),
        (_unnamed_segment, "names a segment that is not described"),
        (_same_number, "two segments of the segmentation bear one number"),
        (_short, "the regions cannot be read: pixel data is shorter than the header declares"),
        (_long, "the regions cannot be read: pixel data is of another length"),
        (_frames, "the regions cannot be read: "),
        (_huge, "the regions cannot be read: .*a frame of 16384 x 16385 pixels"),
    ],
    ids=["label map", "unknown type", "segment", "number", "short", "long", "frames", "huge"],
)
def test_a_doubtful_segmentation_is_refused_by_name(fault: Callable[[Dataset], None], sentence: str) -> None:
    dataset = segmentation(masks(2), [at(0.0), at(5.0)])
    fault(dataset)
    with pytest.raises(RegionError, match=sentence) as caught:
        read(dataset)
    assert "DOE" not in str(caught.value)
    assert not list(lint(str(caught.value)))


def test_a_fraction_above_one_is_refused() -> None:
    _, dataset = fractional()
    dataset.MaximumFractionalValue = 150
    with pytest.raises(RegionError, match="a fraction above 1"):
        read(dataset)


def test_deflated_bits_are_read() -> None:
    dataset = segmentation(masks(3), [at(0.0), at(1.0), at(2.0)])
    assert np.array_equal(
        covered(only_of(as_file(dataset, DeflatedExplicitVRLittleEndian)), at(2.0)).fractions, masks(3)[2]
    )


@pytest.mark.parametrize("name", ["liver.dcm", "liver_expb.dcm"])
def test_the_samples_of_pydicom_give_what_pydicom_decodes(name: str) -> None:
    content = real_file(name).read_bytes()
    source = dcmread(real_file(name))
    found = read_carrier(content, PSEUDONYMS)
    (region,) = found.regions
    assert (region.label, found.refused) == ("liver", ())
    for groups, mask in zip(source.PerFrameFunctionalGroupsSequence, source.pixel_array, strict=True):
        position = tuple(map(float, groups.PlanePositionSequence[0].ImagePositionPatient))
        grid = Grid(
            rows=512,
            columns=512,
            spacing_mm=(0.810547, 0.810547),
            position_mm=(position[0], position[1], position[2]),
            along_columns=(1.0, 0.0, 0.0),
            along_rows=(0.0, 1.0, 0.0),
            frame_of_reference=PSEUDONYMS.name("frame", str(source.FrameOfReferenceUID)),
        )
        assert np.array_equal(covered(region, grid).fractions, mask)
    assert FRAME_UID not in str(region)


@pytest.mark.parametrize("name", ["liver_1frame.dcm", "liver_expb_1frame.dcm"])
def test_samples_that_contradict_themselves_are_refused(name: str) -> None:
    # Cut to one frame of pixels with three frames' functional groups.
    with pytest.raises(RegionError, match="functional groups are not one for each frame"):
        read_carrier(real_file(name).read_bytes(), PSEUDONYMS)
