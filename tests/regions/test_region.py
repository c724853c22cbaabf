"""Where regions lie: on the frames named, or in the patient's millimetres, and nowhere else."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from safecheck.errors import DocumentError
from safecheck.regions.file import RegionEntry, RegionFile, file_text, json_schema, read_regions
from safecheck.regions.region import Grid, InPatient, MaskOnGrid, OnFrames, Part, Region, cover_grid
from safecheck.regions.shapes import Ellipse, Rectangle

AXIAL = Grid(
    rows=64,
    columns=64,
    series="S-1",
    series_number=2,
    instance_number=5,
    spacing_mm=(0.5, 0.25),
    position_mm=(-10.0, -20.0, 30.0),
    along_columns=(1.0, 0.0, 0.0),
    along_rows=(0.0, 1.0, 0.0),
    frame_of_reference="F",
)
PLANE = InPatient(
    frame_of_reference="F",
    origin_mm=(-10.0, -20.0, 30.0),
    along_rows=(0.0, 1.0, 0.0),
    along_columns=(1.0, 0.0, 0.0),
    depth_mm=3.0,
)
SQUARE = Rectangle(centre=(8.0, 4.0), height=5.0, width=5.0)


def region(placement: OnFrames | InPatient) -> Region:
    return Region("r", "disc", "target", (Part(placement=placement, shape=SQUARE),))


def test_millimetres_become_pixels_by_the_spacing_of_each_direction() -> None:
    covered = cover_grid(region(PLANE), AXIAL)
    assert covered is not None
    # 5 mm x 5 mm over 0.5 mm x 0.25 mm pixels: 10 rows by 20 columns about row 16, column 16.
    assert covered.fractions.sum() == pytest.approx(200)
    assert covered.fractions[16, 16] == 1.0
    assert covered.fractions[16].sum() == pytest.approx(20)


def test_an_oblique_frame_is_covered_where_its_own_plane_lies() -> None:
    # Turned by 30 degrees about the x axis; the region drawn in the same oblique plane.
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    oblique = dataclasses.replace(AXIAL, along_rows=(0.0, c, s))
    plane = PLANE.model_copy(update={"along_rows": (0.0, c, s)})
    covered = cover_grid(region(plane), oblique)
    assert covered is not None
    assert covered.fractions.sum() == pytest.approx(200)
    assert cover_grid(region(PLANE), oblique) is None


@pytest.mark.parametrize(
    ("z", "covered"),
    [(30.0, True), (31.4, True), (28.6, True), (31.6, False), (28.4, False), (28.5, True), (31.5, False)],
)
def test_a_slab_covers_the_frames_within_its_depth_and_each_boundary_once(z: float, covered: bool) -> None:
    grid = dataclasses.replace(AXIAL, position_mm=(-10.0, -20.0, z))
    assert (cover_grid(region(PLANE), grid) is not None) is covered


@pytest.mark.parametrize(
    "change",
    [{"frame_of_reference": "other"}, {"frame_of_reference": ""}, {"spacing_mm": None}, {"position_mm": None}],
    ids=["another frame of reference", "none", "no spacing", "no position"],
)
def test_a_frame_without_the_same_frame_of_reference_is_not_covered(change: dict[str, object]) -> None:
    assert cover_grid(region(PLANE), dataclasses.replace(AXIAL, **change)) is None  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("conditions", "covered"),
    [
        ({}, True),
        ({"series": "S-1"}, True),
        ({"series": "S-2"}, False),
        ({"series_number": 2, "first_instance_number": 5, "last_instance_number": 5}, True),
        ({"first_instance_number": 6}, False),
        ({"last_instance_number": 4}, False),
        ({"frame": 2}, False),
        ({"rows": 65}, False),
    ],
    ids=str,
)
def test_a_region_in_pixels_lies_on_the_frames_it_names(conditions: dict[str, object], covered: bool) -> None:
    placement = OnFrames.model_validate({"rows": 64, "columns": 64} | conditions)
    assert (cover_grid(region(placement), AXIAL) is not None) is covered


def test_a_mask_lies_on_the_same_grid_alone() -> None:
    fractions = np.zeros((64, 64))
    fractions[3, 4] = 1.0
    mask = Region("m", "mask", "other", (MaskOnGrid(AXIAL, fractions),))
    covered = cover_grid(mask, dataclasses.replace(AXIAL, instance="another instance"))
    assert covered is not None
    assert covered.fractions.sum() == 1.0
    assert cover_grid(mask, dataclasses.replace(AXIAL, position_mm=(-10.0, -20.0, 30.5))) is None
    assert cover_grid(mask, dataclasses.replace(AXIAL, spacing_mm=(0.5, 0.26))) is None


FILE = RegionFile(
    version=1,
    regions=(
        RegionEntry(
            name="disc",
            label="disc 20 HU",
            role="target",
            background="liver",
            parts=(Part(placement=PLANE, shape=Ellipse(centre=(1, 2), height=3, width=4, angle_degrees=5)),),
        ),
        RegionEntry(
            name="liver",
            label="liver",
            role="background",
            parts=(Part(placement=OnFrames(rows=64, columns=64), shape=SQUARE),),
        ),
    ),
)


def test_a_region_file_comes_back_as_it_was_written() -> None:
    regions = read_regions(file_text(FILE).encode())
    assert [item.name for item in regions.regions] == ["disc", "liver"]
    assert regions.regions[0].parts == FILE.regions[0].parts
    assert regions.regions[0].background == "liver"


@pytest.mark.parametrize(
    ("found", "put", "message"),
    [
        ('"role": "target"', '"role": "tumour"', r"^regions\[0\]\.role: "),
        ('"background": "liver"', '"background": "bone"', "the background of region 'disc' is expected to be another"),
        ('"name": "liver"', '"name": "disc"', "regions need different names, found 'disc' twice"),
        ('"height": 3.0', '"height": -3.0', r"^regions\[0\]\.parts\[0\].*height: .*greater than 0"),
        ('"version": 1', '"version": 2', r"^version: "),
        ('"version": 1', '"version": 1,', "not a JSON document"),
    ],
    ids=["role", "background", "names", "height", "version", "json"],
)
def test_a_wrong_region_file_names_the_key_at_fault(found: str, put: str, message: str) -> None:
    text = file_text(FILE)
    assert found in text
    with pytest.raises(DocumentError, match=message):
        read_regions(text.replace(found, put, 1).encode())


def test_the_schema_of_the_file_can_be_exported() -> None:
    assert json_schema()["properties"].keys() == {"version", "regions"}
