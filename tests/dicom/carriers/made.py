"""Region carriers written by hand, with known geometry, and the frames that they lie on."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import UID, ExplicitVRLittleEndian

from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.regions.region import Covered, Grid, Region, cover_grid

ROOT = "1.2.826.0.1.3680043.10.99999."
FRAME_UID = f"{ROOT}9"
PSEUDONYMS = Pseudonyms(b"key of the tests, not of any site")
STRUCTURE_SET = "1.2.840.10008.5.1.4.1.1.481.3"
SEGMENTATION = "1.2.840.10008.5.1.4.1.1.66.4"

Vector = npt.NDArray[np.float64]
AXIAL = (np.array([1.0, 0.0, 0.0]), np.array([0.0, 1.0, 0.0]))
"""(along columns, along rows)."""
_T = np.radians(20.0)
TILTED = (np.array([1.0, 0.0, 0.0]), np.array([0.0, np.cos(_T), np.sin(_T)]))
"""A gantry turned by 20 degrees about the axis from right to left."""
OBLIQUE = (np.array([3.0, -6.0, 2.0]) / 7, np.array([6.0, 2.0, -3.0]) / 7)
"""Turned about all three axes."""
PLANES = {"axial": AXIAL, "tilted": TILTED, "oblique": OBLIQUE}
ORIGIN = np.array([-31.3, 17.9, -250.4])


def as_file(dataset: Dataset, syntax: str = ExplicitVRLittleEndian) -> bytes:
    """Bytes of a DICOM file."""
    dataset.file_meta = FileMetaDataset()
    dataset.file_meta.TransferSyntaxUID = UID(syntax)
    dataset.file_meta.MediaStorageSOPClassUID = dataset.SOPClassUID
    dataset.file_meta.MediaStorageSOPInstanceUID = dataset.SOPInstanceUID
    buffer = io.BytesIO()
    dataset.save_as(buffer, enforce_file_format=True)
    return buffer.getvalue()


def item(**values: Any) -> Dataset:
    """A data set of the elements named."""
    dataset = Dataset()
    for keyword, value in values.items():
        setattr(dataset, keyword, value)
    return dataset


def grid_at(
    axes: tuple[Vector, Vector], height_mm: float, *, size: int = 96, pixel_mm: float = 0.8, **changes: Any
) -> Grid:
    """A frame whose plane lies `height_mm` above `ORIGIN` along its normal."""
    across, down = axes
    position = ORIGIN + height_mm * np.cross(across, down)
    known: dict[str, Any] = {
        "rows": size,
        "columns": size,
        "spacing_mm": (pixel_mm, pixel_mm),
        "position_mm": tuple(position.tolist()),
        "along_columns": tuple(across.tolist()),
        "along_rows": tuple(down.tolist()),
        "frame_of_reference": PSEUDONYMS.name("frame", FRAME_UID),
    }
    return Grid(**(known | changes))


def ring(centre_mm: tuple[float, float], radius_mm: float, points: int = 360) -> npt.NDArray[np.float64]:
    """(n, 2) points of a circle, (along rows, along columns)."""
    angles = np.arange(points) * 2 * np.pi / points
    points_mm: npt.NDArray[np.float64] = np.column_stack([np.sin(angles), np.cos(angles)]) * radius_mm
    points_mm += np.array(centre_mm)
    return points_mm


def contour(
    flat: npt.NDArray[np.float64], axes: tuple[Vector, Vector], height_mm: float, kind: str = "CLOSED_PLANAR"
) -> Dataset:
    """A contour at (along rows, along columns) in mm from `ORIGIN`, `height_mm` above it."""
    across, down = axes
    points = ORIGIN + flat[:, :1] * down + flat[:, 1:] * across + height_mm * np.cross(across, down)
    numbers = [f"{number:.10g}"[:16] for number in points.ravel()]
    return item(ContourGeometricType=kind, NumberOfContourPoints=len(points), ContourData=numbers)


def structure_set(
    rois: Sequence[Sequence[Dataset]],
    *,
    names: Sequence[str] = (),
    types: Sequence[str] = (),
    frame_uid: str = FRAME_UID,
) -> Dataset:
    """An RT Structure Set of the contours of each ROI."""
    dataset = item(SOPClassUID=STRUCTURE_SET, SOPInstanceUID=f"{ROOT}7", Modality="RTSTRUCT", PatientName="DOE^JANE")
    dataset.StructureSetROISequence, dataset.ROIContourSequence, dataset.RTROIObservationsSequence = [], [], []
    for number, contours in enumerate(rois, start=1):
        name = names[number - 1] if names else "DOE JANE 1950"
        dataset.StructureSetROISequence.append(
            item(ROINumber=10 * number, ReferencedFrameOfReferenceUID=frame_uid, ROIName=name)
        )
        drawn = item(ReferencedROINumber=10 * number)
        if contours:
            drawn.ContourSequence = list(contours)
        # Out of order on purpose: ROIs are told by their numbers.
        dataset.ROIContourSequence.insert(0, drawn)
        kind = types[number - 1] if types else ""
        dataset.RTROIObservationsSequence.insert(0, item(ReferencedROINumber=10 * number, RTROIInterpretedType=kind))
    return dataset


def segmentation(
    masks: npt.NDArray[np.uint8],
    grids: Sequence[Grid],
    *,
    segments: Sequence[int] = (),
    labels: Sequence[str] = ("DOE JANE 1950",),
    kind: str = "BINARY",
    sources: Sequence[tuple[str, int | None]] = (),
    frame_uid: str = FRAME_UID,
) -> Dataset:
    """A segmentation of (frames, rows, columns); spacing stands once for all frames, position in each."""
    frames, rows, columns = masks.shape
    bits = 1 if kind == "BINARY" else 8
    dataset = item(
        SOPClassUID=SEGMENTATION,
        SOPInstanceUID=f"{ROOT}8",
        Modality="SEG",
        PatientName="DOE^JANE",
        SegmentationType=kind,
        NumberOfFrames=frames,
        Rows=rows,
        Columns=columns,
        SamplesPerPixel=1,
        PhotometricInterpretation="MONOCHROME2",
        BitsAllocated=bits,
        BitsStored=bits,
        HighBit=bits - 1,
        PixelRepresentation=0,
    )
    if frame_uid:
        dataset.FrameOfReferenceUID = frame_uid
    if kind == "FRACTIONAL":
        dataset.SegmentationFractionalType, dataset.MaximumFractionalValue = "OCCUPANCY", 200
    dataset.SegmentSequence = [
        item(SegmentNumber=number, SegmentLabel=label) for number, label in enumerate(labels, start=1)
    ]
    dataset.SharedFunctionalGroupsSequence = [
        item(PixelMeasuresSequence=[item(PixelSpacing=list(grids[0].spacing_mm or (1, 1)), SliceThickness=5)])
    ]
    dataset.PerFrameFunctionalGroupsSequence = [
        _groups(grid, segments[index] if segments else 1, sources[index] if sources else None)
        for index, grid in enumerate(grids)
    ]
    # Bits of all frames in one run, without padding between frames (PS3.5 8.1.1).
    pixels = np.packbits(masks.ravel(), bitorder="little").tobytes() if bits == 1 else masks.tobytes()
    dataset.PixelData = pixels + b"\0" * (len(pixels) % 2)
    dataset["PixelData"].VR = "OB"
    return dataset


def _groups(grid: Grid, segment: int, source: tuple[str, int | None] | None) -> Dataset:
    groups = item(SegmentIdentificationSequence=[item(ReferencedSegmentNumber=segment)])
    if grid.position_mm and grid.along_columns and grid.along_rows:
        orientation = [f"{number:.12g}" for number in (*grid.along_columns, *grid.along_rows)]
        position = [f"{number:.12g}" for number in grid.position_mm]
        groups.PlanePositionSequence = [item(ImagePositionPatient=position)]
        groups.PlaneOrientationSequence = [item(ImageOrientationPatient=orientation)]
    if source:
        uid, number = source
        image = item(ReferencedSOPClassUID="1.2.840.10008.5.1.4.1.1.2", ReferencedSOPInstanceUID=uid)
        if number:
            image.ReferencedFrameNumber = number
        groups.DerivationImageSequence = [item(SourceImageSequence=[image])]
    return groups


def covered(region: Region, grid: Grid) -> Covered:
    """What a region covers of a frame that it lies on."""
    found = cover_grid(region, grid)
    assert found is not None
    return found
