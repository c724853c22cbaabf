"""Region files of every kind, told by their content, on a synthetic series."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from pydicom import Dataset, dcmread

import synthetic_studies
from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.reader import open_instance
from safecheck.errors import DocumentError, UsageError
from safecheck.evaluation import Assignment, Candidate, evaluate
from safecheck.frames import Frame, SizeBasis
from safecheck.jobs.regions import load_regions
from safecheck.regions.file import RegionEntry, RegionFile, file_text
from safecheck.regions.region import Grid, OnFrames, Part, RegionSet, Vector
from safecheck.regions.shapes import Ellipse, Rectangle
from tests.dicom.carriers.made import as_file, contour, ring, segmentation, structure_set
from tests.dicom.factory import real_file

PSEUDONYMS = Pseudonyms(b"key of the tests, not of any site")
SLICES, SIZE = 4, 128


@pytest.fixture(scope="module")
def series(tmp_path_factory: pytest.TempPathFactory) -> tuple[synthetic_studies.Truth, list[Dataset], list[Frame]]:
    folder = tmp_path_factory.mktemp("ct")
    truth = synthetic_studies.ct_body(folder, seed=3, rows=SIZE, columns=SIZE, slices=SLICES)
    found = gather([folder], pseudonyms=PSEUDONYMS).instances
    frames = []
    for instance in found:
        with open_instance(instance) as reader:
            frames.append(reader.frame(1))
    return truth, [dcmread(path) for path in truth.files], frames


def hounsfield(source: Dataset) -> npt.NDArray[np.float64]:
    """Values in HU by pydicom and NumPy alone."""
    values: npt.NDArray[np.float64] = source.pixel_array * float(source.RescaleSlope) + float(source.RescaleIntercept)
    return values


def lattice(source: Dataset) -> Grid:
    """The grid of a slice, from its header."""
    right, down = source.ImageOrientationPatient[:3], source.ImageOrientationPatient[3:]

    def vector(numbers: Sequence[float]) -> Vector:
        return float(numbers[0]), float(numbers[1]), float(numbers[2])

    return Grid(
        rows=SIZE,
        columns=SIZE,
        spacing_mm=(float(source.PixelSpacing[0]), float(source.PixelSpacing[1])),
        position_mm=vector(source.ImagePositionPatient),
        along_columns=vector(right),
        along_rows=vector(down),
    )


def load(content: bytes | str, folder: Path) -> RegionSet:
    path = folder / "regions.of.any.name"
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return load_regions(path, PSEUDONYMS)


def figures(frame: Frame, regions: RegionSet) -> dict[str, tuple[float, float | None, float | None]]:
    """Area, mean and SD before, of each region on a frame, as the main job writes them."""
    candidate = Candidate("jpeg2000 10:1", "jpeg2000", 10.0, SizeBasis.BITS_STORED)
    result = evaluate(frame, Assignment((candidate,), (), regions), full_controls=False)
    return {row.region: (row.area_pixels, row.mean_before, row.sd_before) for row in result.regions}


@pytest.mark.parametrize("kind", ["BINARY", "FRACTIONAL"])
def test_a_segmentation_gives_the_mean_that_numpy_gives_over_its_mask(
    series: tuple[synthetic_studies.Truth, list[Dataset], list[Frame]], tmp_path: Path, kind: str
) -> None:
    _, sources, frames = series
    rows, columns = np.indices((SIZE, SIZE))
    drawn = np.stack([(rows - 60) ** 2 + (columns - 50 - number) ** 2 < 150 for number in range(SLICES)])
    masks = drawn.astype(np.uint8)
    if kind == "FRACTIONAL":
        masks = np.where(drawn, 40 + (rows * 7 + columns) % 160, 0).astype(np.uint8)
    dataset = segmentation(masks, [lattice(source) for source in sources], kind=kind)
    dataset.FrameOfReferenceUID = sources[0].FrameOfReferenceUID
    regions = load(as_file(dataset), tmp_path)
    for frame in frames:
        (index,) = [i for i, each in enumerate(sources) if each.InstanceNumber == frame.key.instance_number]
        weights = masks[index] / (1 if kind == "BINARY" else 200)
        values = hounsfield(sources[index])
        mean = float(np.average(values, weights=weights))
        area, found, sd = figures(frame, regions)["region 1"]
        assert area == pytest.approx(weights.sum(), rel=1e-12)
        assert found == pytest.approx(mean, rel=1e-9)
        if kind == "BINARY":
            assert sd == pytest.approx(float(values[drawn[index]].std()), rel=1e-9)


def test_a_structure_set_gives_what_the_same_disc_in_a_region_file_gives(
    series: tuple[synthetic_studies.Truth, list[Dataset], list[Frame]], tmp_path: Path
) -> None:
    truth, sources, frames = series
    disc = truth.targets[0]
    angles = np.arange(720) * 2 * np.pi / 720
    contours = []
    for source in sources:
        drawn = contour(ring((0, 0), 1.0), (np.eye(3)[0], np.eye(3)[1]), 0.0)
        x = disc.x_mm + disc.radius_mm * np.cos(angles)
        y = disc.y_mm + disc.radius_mm * np.sin(angles)
        z = np.full(720, float(source.ImagePositionPatient[2]))
        drawn.NumberOfContourPoints = 720
        drawn.ContourData = [f"{number:.10g}" for number in np.column_stack([x, y, z]).ravel()]
        contours.append(drawn)
    uid = str(sources[0].FrameOfReferenceUID)
    carried = load(as_file(structure_set([contours], names=["disc 1"], types=["GTV"], frame_uid=uid)), tmp_path)
    assert [(region.label, region.role) for region in carried.regions] == [("disc 1", "target")]
    shape = Ellipse(
        centre=(disc.circle.row, disc.circle.column), height=2 * disc.circle.radius, width=2 * disc.circle.radius
    )
    part = Part(placement=OnFrames(rows=SIZE, columns=SIZE), shape=shape)
    entry = RegionEntry(name="region 1", label="disc", role="target", parts=(part,))
    written = load(file_text(RegionFile(version=1, regions=(entry,))), tmp_path)
    for frame in frames:
        one, other = figures(frame, carried)["region 1"], figures(frame, written)["region 1"]
        assert one == pytest.approx(other, rel=1e-3)
        assert one[0] == pytest.approx(np.pi * disc.circle.radius**2, rel=1e-3)


def test_a_region_file_is_told_by_its_content(tmp_path: Path) -> None:
    part = Part(placement=OnFrames(rows=8, columns=8), shape=Rectangle(centre=(3, 3), height=2, width=2))
    text = file_text(RegionFile(version=1, regions=(RegionEntry(name="a", label="a", role="edge", parts=(part,)),)))
    for content in (text.encode(), b"\xef\xbb\xbf" + text.encode(), b"\n  " + text.encode()):
        assert load(content, tmp_path).regions[0].parts == (part,)


def test_points_of_the_sample_of_pydicom_are_named(tmp_path: Path) -> None:
    found = load(real_file("rtstruct.dcm").read_bytes(), tmp_path)
    assert [region.name for region in found.regions] == ["region 1"]
    assert [sentence[:8] for sentence in found.refused] == ["region 2", "region 3"]
    assert "Isocenter" not in str(found)


def _missing(folder: Path) -> Path:
    return folder / "DOE-JANE"


def _folder(folder: Path) -> Path:
    return folder


def _holding(content: bytes) -> Callable[[Path], Path]:
    def write(folder: Path) -> Path:
        (folder / "DOE-JANE").write_bytes(content)
        return folder / "DOE-JANE"

    return write


@pytest.mark.parametrize(
    ("made", "sentence"),
    [
        (_missing, "^the region file cannot be read; expected a file$"),
        (_folder, "^the region file cannot be read; expected a file$"),
        (_holding(b""), "neither a region file in JSON nor a DICOM object"),
        (_holding(b"title = 'DOE JANE'"), "neither a region file in JSON nor a DICOM object"),
        (_holding(bytes(range(256)) * 9), "neither a region file in JSON nor a DICOM object"),
        (
            lambda _: real_file("CT_small.dcm"),
            "not read from a DICOM object of class CT Image Storage; expected RT Structure Set",
        ),
        (lambda _: real_file("rtplan.dcm"), "of class RT Plan Storage"),
        (lambda _: real_file("liver_1frame.dcm"), "the regions cannot be read: the number of frames"),
    ],
    ids=["missing", "folder", "empty", "text", "bytes", "image", "plan", "damaged"],
)
def test_anything_else_is_one_sentence(made: Callable[[Path], Path], sentence: str, tmp_path: Path) -> None:
    with pytest.raises(UsageError, match=sentence) as caught:
        load_regions(made(tmp_path), PSEUDONYMS)
    assert "DOE" not in str(caught.value)
    assert str(tmp_path) not in str(caught.value)


def test_a_wrong_key_of_a_region_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(DocumentError, match=r"^regions: "):
        load('{"version": 1}', tmp_path)
