"""Real frames of pydicom-data, as rasters."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pydicom
from pydicom.data import get_testdata_file

from safecheck.frames import PixelFormat, Raster

GREY_FILES = {
    "ct": "693_UNCR.dcm",
    "mr-abdomen": "MR-SIEMENS-DICOM-WithOverlays.dcm",
    "mr-shoulder": "MR2_UNCR.dcm",
    "cr-chest": "RG1_UNCR.dcm",
    "cr-leg": "RG3_UNCR.dcm",
    "ct-small": "CT_small.dcm",
    "mr-small": "MR_small.dcm",
}
US_FILE = "US1_UNCR.dcm"


@lru_cache(maxsize=8)
def grey(name: str) -> Raster:
    """One grey frame; radiographs cropped to rows and columns 400 to 1423, CT with its padding of -2000."""
    path = get_testdata_file(GREY_FILES[name], download=False)
    assert isinstance(path, str)
    dataset = pydicom.dcmread(path)
    samples = dataset.pixel_array
    if name.startswith("cr"):
        samples = samples[400:1424, 400:1424]
    form = PixelFormat(16, dataset.BitsStored, bool(dataset.PixelRepresentation), "MONOCHROME2")
    return Raster(samples.astype(form.dtype), form, samples == -2000 if name == "ct" else None)


@lru_cache(maxsize=1)
def ultrasound() -> Raster:
    """A colour frame."""
    path = get_testdata_file(US_FILE, download=False)
    assert isinstance(path, str)
    return Raster(pydicom.dcmread(path).pixel_array, PixelFormat(8, 8, False, "RGB"))


@lru_cache(maxsize=1)
def ultrasound_green() -> Raster:
    """The green channel of the colour frame, as grey."""
    return Raster(np.ascontiguousarray(ultrasound().samples[..., 1]), PixelFormat(8, 8, False, "MONOCHROME2"))


def psnr_db(before: Raster, after: np.ndarray) -> float:
    """Peak 2**bits - 1, over the whole frame."""
    error = after.astype(np.float64) - before.samples
    return float(10 * np.log10((2.0**before.format.bits_stored - 1) ** 2 / np.mean(error**2)))
