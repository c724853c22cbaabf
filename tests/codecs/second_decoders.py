"""Decoders of other libraries, by way of a DICOM file as an archive would keep it."""

from __future__ import annotations

from pathlib import Path

import gdcm
import numpy as np
import numpy.typing as npt
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.encaps import encapsulate
from pydicom.uid import UID, SecondaryCaptureImageStorage

from safecheck.codecs.base import Codec
from safecheck.frames import Raster

TRANSFER_SYNTAXES = {
    "jpeg 8": "1.2.840.10008.1.2.4.50",
    "jpeg 12": "1.2.840.10008.1.2.4.51",
    "jpegls": "1.2.840.10008.1.2.4.81",
    "jpegls-reversible": "1.2.840.10008.1.2.4.80",
    "rle-reversible": "1.2.840.10008.1.2.5",
}


def dataset(codec: Codec, code: bytes, before: Raster) -> Dataset:
    """A frame as a DICOM object that says of its samples what the code stream says."""
    form, carriage = before.format, codec.carriage(before.format)
    name = f"{codec.name} {carriage.precision}" if codec.name == "jpeg" else codec.name
    made = Dataset()
    made.file_meta = FileMetaDataset()
    made.file_meta.TransferSyntaxUID = UID(TRANSFER_SYNTAXES[name])
    made.file_meta.MediaStorageSOPClassUID = made.SOPClassUID = SecondaryCaptureImageStorage
    made.file_meta.MediaStorageSOPInstanceUID = made.SOPInstanceUID = UID("1.2.3")
    made.Rows, made.Columns = before.shape
    made.SamplesPerPixel = form.channels
    made.PhotometricInterpretation = "MONOCHROME2" if form.channels == 1 else "RGB"
    if form.channels == 3:
        made.PlanarConfiguration = 0
    made.BitsAllocated = 8 if carriage.precision <= 8 else 16
    made.BitsStored = carriage.precision
    made.HighBit = carriage.precision - 1
    made.PixelRepresentation = int(form.signed and not carriage.offset)
    made.PixelData = encapsulate([code])
    made["PixelData"].VR = "OB"
    made["PixelData"].is_undefined_length = True
    return made


def read_by_gdcm(codec: Codec, code: bytes, before: Raster, folder: Path) -> npt.NDArray[np.int64]:
    """Samples as stored in the code, by GDCM itself: pydicom keeps 12-bit JPEG from it."""
    path = folder / "frame.dcm"
    dataset(codec, code, before).save_as(path, enforce_file_format=True)
    reader = gdcm.ImageReader()
    reader.SetFileName(str(path))
    assert reader.Read()
    octets = reader.GetImage().GetBuffer().encode("utf-8", "surrogateescape")
    dtype = np.dtype(np.uint8 if codec.carriage(before.format).precision <= 8 else np.uint16)
    return np.frombuffer(octets, dtype).reshape(before.samples.shape).astype(np.int64)
