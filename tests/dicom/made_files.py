"""Small DICOM files with identities, for tests of the intake; and how every test of this room writes a file."""

from __future__ import annotations

import zipfile
from pathlib import Path
from typing import Any

from pydicom.dataelem import DataElement
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.encaps import encapsulate
from pydicom.uid import UID, CTImageStorage, ExplicitVRLittleEndian

from safecheck.dicom.intake import Include, Intake, gather
from safecheck.dicom.pseudonyms import Pseudonyms

ROOT = "1.2.826.0.1.3680043.10.99999."
KEY = b"key of the tests, not of any site"


def image(number: int = 1, /, **changes: Any) -> Dataset:
    """A CT image of 8 x 8 pixels; a change of None removes the element."""
    dataset = Dataset()
    values: dict[str, Any] = {
        "SOPClassUID": CTImageStorage,
        "SOPInstanceUID": f"{ROOT}4.{number}",
        "StudyInstanceUID": f"{ROOT}2.1",
        "SeriesInstanceUID": f"{ROOT}3.1",
        "PatientID": "P1",
        "Modality": "CT",
        "ImageType": ["ORIGINAL", "PRIMARY", "AXIAL"],
        "SeriesNumber": 1,
        "InstanceNumber": number,
        "SliceThickness": "5",
        "ImagePositionPatient": [0, 0, 5 * number],
        "ImageOrientationPatient": [1, 0, 0, 0, 1, 0],
        "SamplesPerPixel": 1,
        "PhotometricInterpretation": "MONOCHROME2",
        "Rows": 8,
        "Columns": 8,
        "BitsAllocated": 16,
        "BitsStored": 12,
        "HighBit": 11,
        "PixelRepresentation": 0,
    } | changes
    for keyword, value in values.items():
        if value is not None:
            setattr(dataset, keyword, value)
    if "PixelData" not in changes:
        dataset.add(DataElement("PixelData", "OW", bytes(range(128))))
    return dataset


def save(dataset: Dataset, path: Path, syntax: str = ExplicitVRLittleEndian) -> Path:
    """Write a file with meta information."""
    path.parent.mkdir(parents=True, exist_ok=True)
    dataset.file_meta = FileMetaDataset()
    dataset.file_meta.FileMetaInformationGroupLength = 0  # the library puts the right one in its place
    dataset.file_meta.TransferSyntaxUID = UID(syntax)
    dataset.file_meta.MediaStorageSOPClassUID = dataset.get("SOPClassUID", UID("1.2.3"))
    dataset.file_meta.MediaStorageSOPInstanceUID = dataset.get("SOPInstanceUID", UID("1.2.3"))
    # Forced, since the library knows neither the syntaxes of JPEG XL nor private ones.
    implicit, little = syntax == "1.2.840.10008.1.2", syntax != "1.2.840.10008.1.2.2"
    dataset.preamble = b"\0" * 128
    dataset.save_as(path, implicit_vr=implicit, little_endian=little, force_encoding=True)
    return path


def study(folder: Path, count: int = 4) -> Path:
    """A folder of images under names that say nothing."""
    for number in range(1, count + 1):
        save(image(number), folder / f"x{(number * 7) % 5}{number}")
    return folder


def zipped(folder: Path, archive: Path) -> Path:
    with zipfile.ZipFile(archive, "w", zipfile.ZIP_DEFLATED) as target:
        for path in sorted(folder.rglob("*")):
            target.write(path, path.relative_to(folder))
    return archive


def coded(code: bytes, number: int = 1, /, **changes: Any) -> Dataset:
    """An image whose pixel data is one fragment."""
    dataset = image(number, PixelData=None, **changes)
    element = DataElement("PixelData", "OB", encapsulate([code]), is_undefined_length=True)
    dataset.add(element)
    return dataset


def take_in(*paths: Path, include: Include | None = None, list_file: Path | None = None, key: bytes = KEY) -> Intake:
    """Gather under the key of the tests."""
    return gather(paths, pseudonyms=Pseudonyms(key), include=include, list_file=list_file)
