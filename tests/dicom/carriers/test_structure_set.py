"""RT Structure Sets made by hand, with areas in closed form, and pydicom's own sample."""

from __future__ import annotations

import dataclasses
import math
from pathlib import Path

import numpy as np
import pytest
from pydicom import dcmread
from pydicom.dataset import Dataset
from pydicom.uid import DeflatedExplicitVRLittleEndian, ImplicitVRLittleEndian

from safecheck.dicom.carriers.carrier import read_carrier
from safecheck.errors import RegionError
from safecheck.regions.region import Grid, Region, RegionSet, cover_grid
from safecheck.wording import lint
from tests.dicom.carriers.made import (
    AXIAL,
    FRAME_UID,
    PLANES,
    PSEUDONYMS,
    ROOT,
    Vector,
    as_file,
    contour,
    covered,
    grid_at,
    ring,
    structure_set,
)
from tests.dicom.factory import real_file

MIDDLE = (40.0, 36.0)


def read(dataset: Dataset) -> RegionSet:
    return read_carrier(as_file(dataset), PSEUDONYMS)


def only(dataset: Dataset) -> Region:
    (region,) = read(dataset).regions
    return region


def area_mm2(region: Region, axes: tuple[Vector, Vector], height_mm: float, pixel_mm: float = 0.8) -> float:
    return float(covered(region, grid_at(axes, height_mm, pixel_mm=pixel_mm)).fractions.sum()) * pixel_mm**2


@pytest.mark.parametrize("axes", PLANES.values(), ids=PLANES.keys())
@pytest.mark.parametrize("radius_mm", [0.9, 5.0, 22.3])
def test_a_disc_keeps_its_area_on_its_own_plane(axes: tuple[Vector, Vector], radius_mm: float) -> None:
    region = only(structure_set([[contour(ring(MIDDLE, radius_mm), axes, 0.0)]]))
    assert area_mm2(region, axes, 0.0) == pytest.approx(math.pi * radius_mm**2, rel=1e-3)


@pytest.mark.parametrize("axes", PLANES.values(), ids=PLANES.keys())
def test_a_disc_lies_where_it_was_drawn(axes: tuple[Vector, Vector]) -> None:
    region = only(structure_set([[contour(ring(MIDDLE, 5.0), axes, 0.0)]]))
    fractions = covered(region, grid_at(axes, 0.0)).fractions
    rows, columns = np.indices(fractions.shape)
    centre = [float((fractions * each).sum() / fractions.sum()) * 0.8 for each in (rows, columns)]
    assert centre == pytest.approx(MIDDLE, abs=1e-6)


def test_contours_within_each_other_cut_holes_and_leave_islands() -> None:
    rings = [ring(MIDDLE, 20.0), ring(MIDDLE, 10.0)[::-1], ring(MIDDLE, 4.0), ring((10.0, 10.0), 3.0)]
    region = only(structure_set([[contour(each, AXIAL, 0.0) for each in rings]]))
    assert area_mm2(region, AXIAL, 0.0) == pytest.approx(math.pi * (400 - 100 + 16 + 9), rel=1e-3)
    found = covered(region, grid_at(AXIAL, 0.0))
    assert found.fractions[round(48.0 / 0.8), 45] == pytest.approx(0.0, abs=1e-12)
    assert found.inside[50, 45]


@pytest.mark.parametrize("kind", ["CLOSED_PLANAR", "CLOSEDPLANAR_XOR"])
@pytest.mark.parametrize("turn", [1, -1], ids=["same sense", "other sense"])
def test_a_keyhole_cuts_a_hole(turn: int, kind: str) -> None:
    outer, inner = ring(MIDDLE, 20.0), ring(MIDDLE, 10.0)[::turn]
    keyhole = np.vstack([outer, outer[:1], inner, inner[:1]])
    region = only(structure_set([[contour(keyhole, AXIAL, 0.0, kind)]]))
    assert area_mm2(region, AXIAL, 0.0) == pytest.approx(math.pi * 300, rel=1e-3)
    found = covered(region, grid_at(AXIAL, 0.0))
    assert not found.inside[50, 45]
    assert float(found.inside.sum()) * 0.64 == pytest.approx(math.pi * 300, rel=0.02)


def test_each_plane_of_irregular_spacing_takes_its_own_slices() -> None:
    heights, radii = (0.0, 2.0, 7.0, 8.0), (5.0, 6.0, 7.0, 8.0)
    contours = [contour(ring(MIDDLE, radius), AXIAL, height) for height, radius in zip(heights, radii, strict=True)]
    region = only(structure_set([contours[::-1]]))
    # Slabs meet half way, at 1, 4.5 and 7.5; the outer ones reach as far outwards as inwards, to -1 and 8.5.
    for height, radius in [(-0.9, 5), (0.9, 5), (1.1, 6), (4.4, 6), (4.6, 7), (7.4, 7), (7.6, 8), (8.4, 8)]:
        assert area_mm2(region, AXIAL, height) == pytest.approx(math.pi * radius**2, rel=1e-3)
    assert cover_grid(region, grid_at(AXIAL, -1.1)) is None
    assert cover_grid(region, grid_at(AXIAL, 8.6)) is None


def seen_from_behind(grid: Grid) -> Grid:
    """The same pixels with columns counted from the other side, so that the normal is the opposite one."""
    assert grid.position_mm is not None
    assert grid.along_columns is not None
    across = np.array(grid.along_columns)
    corner = np.array(grid.position_mm) + across * 0.8 * (grid.columns - 1)
    return dataclasses.replace(grid, position_mm=tuple(corner.tolist()), along_columns=tuple((-across).tolist()))


@pytest.mark.parametrize("axes", PLANES.values(), ids=PLANES.keys())
@pytest.mark.parametrize("turned", [False, True], ids=["same normal", "opposite normal"])
@pytest.mark.parametrize("step", [1, 2, 3, 4])
def test_no_slice_of_a_series_is_lost_or_counted_twice(axes: tuple[Vector, Vector], turned: bool, step: int) -> None:
    # Slices of 1.25 mm, every `step`-th drawn on: for even steps a slice lies exactly between two planes.
    heights = [1.25 * number for number in range(0, 41, step)]
    region = only(structure_set([[contour(ring(MIDDLE, 5.0), axes, height) for height in heights]]))
    for number in range(int(heights[-1] / 1.25) + 1):
        grid = grid_at(axes, 1.25 * number)
        grid = seen_from_behind(grid) if turned else grid
        hits = [part for part in region.parts if cover_grid(dataclasses.replace(region, parts=(part,)), grid)]
        assert len(hits) == 1, number


@pytest.mark.parametrize("axes", PLANES.values(), ids=PLANES.keys())
def test_a_slice_in_the_middle_takes_the_same_plane_from_either_side(axes: tuple[Vector, Vector]) -> None:
    region = only(structure_set([[contour(ring(MIDDLE, 5.0 + height), axes, height) for height in (0.0, 2.5, 5.0)]]))
    # The normal in whose order planes stand has a positive largest component: here it is the frames' own.
    assert np.cross(*axes)[int(np.abs(np.cross(*axes)).argmax())] > 0
    for height, radius in [(1.25, 5.0), (3.75, 7.5), (6.25, 10.0)]:
        grid = grid_at(axes, height)
        for each in (grid, seen_from_behind(grid)):
            area = float(covered(region, each).fractions.sum()) * 0.64
            assert area == pytest.approx(math.pi * radius**2, rel=1e-3)
    assert cover_grid(region, grid_at(axes, -1.25)) is None
    assert cover_grid(region, seen_from_behind(grid_at(axes, -1.25))) is None


def test_a_slice_between_far_planes_is_not_filled_in() -> None:
    heights = [0.0, 2.5, 5.0, 30.0, 32.5]
    region = only(structure_set([[contour(ring(MIDDLE, 5.0), AXIAL, height) for height in heights]]))
    on = [height for height in np.arange(-5, 40, 0.5) if cover_grid(region, grid_at(AXIAL, height))]
    assert on == [*np.arange(-1.0, 6.5, 0.5), *np.arange(29.0, 34.0, 0.5)]


def test_another_frame_of_reference_covers_nothing() -> None:
    drawn = [[contour(ring(MIDDLE, 5.0), AXIAL, 0.0)]]
    assert cover_grid(only(structure_set(drawn)), grid_at(AXIAL, 0.0)) is not None
    assert cover_grid(only(structure_set(drawn, frame_uid=f"{FRAME_UID}.1")), grid_at(AXIAL, 0.0)) is None


@pytest.mark.parametrize("syntax", [ImplicitVRLittleEndian, DeflatedExplicitVRLittleEndian])
def test_any_encoding_gives_the_same_regions(syntax: str) -> None:
    dataset = structure_set([[contour(ring(MIDDLE, 5.0), AXIAL, 0.0)]])
    assert read_carrier(as_file(dataset, syntax), PSEUDONYMS).regions == read(dataset).regions


def test_roles_follow_the_interpreted_type() -> None:
    types = ["GTV", "CTV", "PTV", "ORGAN", "AVOIDANCE", "EXTERNAL", "BOLUS", "", "DOE JANE"]
    drawn = [[contour(ring(MIDDLE, 5.0), AXIAL, 0.0)] for _ in types]
    found = read(structure_set(drawn, types=types))
    assert [region.role for region in found.regions] == ["target"] * 3 + ["other"] * 6


def test_typed_names_stay_behind() -> None:
    drawn = [[contour(ring(MIDDLE, 5.0), AXIAL, 0.0)] for _ in range(3)]
    found = read(structure_set(drawn, names=["Doe, Jane 1950", "Lung_L", "MRN 12345"]))
    assert [region.label for region in found.regions] == ["region 1", "lung l", "region 3"]
    assert [region.name for region in found.regions] == ["region 1", "region 2", "region 3"]


def point(kind: str) -> Dataset:
    return contour(ring(MIDDLE, 5.0)[:1], AXIAL, 0.0, kind)


CLOSED = contour(ring(MIDDLE, 5.0), AXIAL, 0.0)


@pytest.mark.parametrize(
    ("contours", "sentence"),
    [
        ([point("POINT")], r"contours enclose no area \(1 of type POINT\); expected type CLOSED_PLANAR"),
        (
            [point("OPEN_PLANAR"), point("OPEN_NONPLANAR"), point("OPEN_PLANAR"), CLOSED],
            r"\(1 of type OPEN_NONPLANAR, 2 of type OPEN_PLANAR\)",
        ),
        ([point("DOE JANE"), point("")], r"\(2 of type unknown\)"),
        ([], "no contour is drawn"),
        ([contour(ring(MIDDLE, 5.0)[:2], AXIAL, 0.0)], "no contour encloses an area"),
    ],
    ids=["point", "open", "unknown", "none", "line"],
)
def test_what_is_no_area_is_refused_by_name(contours: list[Dataset], sentence: str) -> None:
    with pytest.raises(RegionError, match=rf"no region of the file can be used: region 1: .*{sentence}"):
        read(structure_set([contours]))
    found = read(structure_set([contours, [CLOSED]]))
    assert [region.name for region in found.regions] == ["region 2"]
    (refused,) = found.refused
    assert refused.startswith("region 1: ")
    assert "DOE" not in refused
    assert not list(lint(refused))


@pytest.mark.parametrize(
    ("changes", "sentence"),
    [
        ({"NumberOfContourPoints": 7}, "another number of points than it declares"),
        ({"ContourData": ["1", "2", "3", "4"]}, "not triples of numbers"),
        ({"ContourData": None}, "contour data is missing"),
    ],
    ids=["count", "triples", "missing"],
)
def test_contour_data_that_contradicts_itself_is_refused(changes: dict[str, object], sentence: str) -> None:
    broken = contour(ring(MIDDLE, 5.0), AXIAL, 0.0)
    for keyword, value in changes.items():
        setattr(broken, keyword, value)
    with pytest.raises(RegionError, match=f"region 1: .*{sentence}"):
        read(structure_set([[broken]]))


def test_contours_without_area_beside_others_are_named() -> None:
    line = contour(np.array([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)]), AXIAL, 0.0)
    assert read(structure_set([[CLOSED, line]])).refused == ("region 1: 1 contours without area were left aside",)


def test_a_region_without_frame_of_reference_is_refused_unless_the_object_names_one() -> None:
    dataset = structure_set([[CLOSED]], frame_uid="")
    with pytest.raises(RegionError, match="no frame of reference is named"):
        read(dataset)
    dataset.ReferencedFrameOfReferenceSequence = [Dataset()]
    dataset.ReferencedFrameOfReferenceSequence[0].FrameOfReferenceUID = FRAME_UID
    assert cover_grid(only(dataset), grid_at(AXIAL, 0.0)) is not None
    dataset.ReferencedFrameOfReferenceSequence.append(Dataset())
    dataset.ReferencedFrameOfReferenceSequence[1].FrameOfReferenceUID = f"{ROOT}5"
    with pytest.raises(RegionError, match="no frame of reference is named"):
        read(dataset)


def test_the_sample_of_pydicom_gives_its_body_and_names_its_points() -> None:
    path: Path = real_file("rtstruct.dcm")
    found = read_carrier(path.read_bytes(), PSEUDONYMS)
    (body,) = found.regions
    assert [refused[:9] for refused in found.refused] == ["region 2:", "region 3:"]
    # Areas by the shoelace formula over the file's own numbers, on frames of 2 mm at the three heights.
    source = dcmread(path, force=True)
    frame = PSEUDONYMS.name("frame", source.StructureSetROISequence[0].ReferencedFrameOfReferenceUID)
    for drawn in source.ROIContourSequence[0].ContourSequence:
        x, y, z = np.array(drawn.ContourData, dtype=float).reshape(-1, 3).T
        expected = abs(float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y))) / 2
        grid = dataclasses.replace(
            grid_at(AXIAL, 0.0, size=260, pixel_mm=2.0),
            position_mm=(-259.0, -259.0, float(z[0])),
            frame_of_reference=frame,
        )
        assert covered(body, grid).fractions.sum() * 4 == pytest.approx(expected, rel=1e-9)
