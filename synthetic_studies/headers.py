"""Headers that any reader takes: File Meta, and the modules each kind of image must carry (PS3.3 annex A)."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from pydicom import Dataset, FileMetaDataset, dcmwrite
from pydicom.uid import (
    UID,
    ComputedRadiographyImageStorage,
    CTImageStorage,
    ExplicitVRLittleEndian,
    MRImageStorage,
    UltrasoundMultiFrameImageStorage,
    XRayAngiographicImageStorage,
)

from synthetic_studies.identity import EQUIPMENT, HOSPITAL, Patient, Scope
from synthetic_studies.truth import Grid

__all__ = ["declare_grey", "declare_plane", "declare_window", "place_pixels", "start_header", "write_file"]

_STORAGE = {
    "CT": CTImageStorage,
    "CR": ComputedRadiographyImageStorage,
    "MR": MRImageStorage,
    "US": UltrasoundMultiFrameImageStorage,
    "XA": XRayAngiographicImageStorage,
}
_DATE = "20010203"
_TIME = "040506"


def start_header(modality: str, scope: Scope, patient: Patient, instance: int) -> Dataset:
    """Patient, study, series, equipment and SOP common modules of one instance (instance counts from 1)."""
    header = Dataset()
    header.SpecificCharacterSet = "ISO_IR 192"
    header.SOPClassUID = _STORAGE[modality]
    header.SOPInstanceUID = scope.uid("instance", instance)
    header.StudyInstanceUID = scope.uid("study")
    header.SeriesInstanceUID = scope.uid("series")
    header.Modality = modality
    header.InstanceNumber = instance
    header.SeriesNumber = 1
    _describe_patient(header, patient)
    _describe_visit(header, scope)
    return header


def _describe_patient(header: Dataset, patient: Patient) -> None:
    header.PatientName = patient.name
    header.PatientID = patient.identifier
    header.PatientBirthDate = f"{2001 - patient.age_years}0101"
    header.PatientSex = patient.sex
    header.PatientAge = f"{patient.age_years:03d}Y"


def _describe_visit(header: Dataset, scope: Scope) -> None:
    header.StudyDate = header.SeriesDate = header.AcquisitionDate = header.ContentDate = _DATE
    header.StudyTime = header.SeriesTime = header.AcquisitionTime = header.ContentTime = _TIME
    header.StudyID = f"S{scope.seed}"[:16]
    header.AccessionNumber = f"A{scope.seed}"[:16]
    header.ReferringPhysicianName = "Synthetic^Referrer"
    header.StudyDescription = "Synthetic study, no patient"
    header.SeriesDescription = scope.kind
    header.InstitutionName = HOSPITAL
    header.Manufacturer = EQUIPMENT
    header.ManufacturerModelName = "synthetic_studies"
    header.SoftwareVersions = "1"


def declare_grey(
    header: Dataset, grid: Grid, *, stored: int, signed: bool = False, photometric: str = "MONOCHROME2"
) -> None:
    """Image Pixel module of a grey image with 16 bits allocated."""
    header.SamplesPerPixel = 1
    header.PhotometricInterpretation = photometric
    header.Rows, header.Columns = grid.rows, grid.columns
    header.BitsAllocated, header.BitsStored, header.HighBit = 16, stored, stored - 1
    header.PixelRepresentation = int(signed)


def declare_plane(header: Dataset, grid: Grid, scope: Scope, z_mm: float, thickness_mm: float) -> None:
    """Frame of reference and image plane of an axial slice, head first and supine."""
    x_mm, y_mm = grid.corner_mm
    header.FrameOfReferenceUID = scope.uid("frame of reference")
    header.PositionReferenceIndicator = ""
    header.PatientPosition = "HFS"
    header.ImagePositionPatient = [_decimal(x_mm), _decimal(y_mm), _decimal(z_mm)]
    header.ImageOrientationPatient = [1, 0, 0, 0, 1, 0]
    header.PixelSpacing = [_decimal(grid.spacing_mm), _decimal(grid.spacing_mm)]
    header.SliceThickness = _decimal(thickness_mm)
    header.SpacingBetweenSlices = _decimal(thickness_mm)
    header.SliceLocation = _decimal(z_mm)


def declare_window(header: Dataset, centre: float, width: float) -> None:
    """Linear VOI window."""
    header.WindowCenter = _decimal(centre)
    header.WindowWidth = _decimal(width)


def _decimal(value: float) -> str:
    """Decimal string of at most 16 characters."""
    return f"{value:.6f}".rstrip("0").rstrip(".")[:16]


def place_pixels(header: Dataset, samples: npt.NDArray[Any]) -> None:
    """Put samples in as little-endian bytes, padded to an even length."""
    little = samples.astype(samples.dtype.newbyteorder("<"), copy=False)
    data = np.ascontiguousarray(little).tobytes()
    header.add_new(0x7FE00010, "OW" if samples.dtype.itemsize == 2 else "OB", data + b"\0" * (len(data) % 2))


def write_file(path: Path, header: Dataset) -> None:
    """Write a DICOM file, explicit VR little endian."""
    header.file_meta = file_meta(header)
    path.parent.mkdir(parents=True, exist_ok=True)
    dcmwrite(path, header, enforce_file_format=True)


def file_meta(header: Dataset) -> FileMetaDataset:
    """File Meta Information; its length is set when it is written."""
    meta = FileMetaDataset()
    meta.FileMetaInformationVersion = b"\x00\x01"
    meta.MediaStorageSOPClassUID = header.SOPClassUID
    meta.MediaStorageSOPInstanceUID = header.SOPInstanceUID
    meta.TransferSyntaxUID = ExplicitVRLittleEndian
    meta.ImplementationClassUID = UID(Scope("implementation", 1).uid())
    meta.ImplementationVersionName = "SYNTHETIC_1"
    return meta
