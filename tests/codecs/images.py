"""Real frames of pydicom-data as rasters; see `origin` for what each is."""

from __future__ import annotations

import functools
import warnings
from typing import Literal, cast

import numpy as np
import pydicom
import pytest
from pydicom.data import get_testdata_file

from safecheck.frames import PixelFormat, Raster

NAMES = ("693_UNCR", "MR2_UNCR", "RG1_UNCR", "RG3_UNCR", "US1_UNCR")
"""CT head 512x512, 14 bits signed; MR shoulder 1024x1024, 12 bits; CR chest, 15 bits; CR leg, 10 bits; colour US."""
_CROPPED = ("RG1_UNCR", "RG3_UNCR")


@functools.cache
def real(name: str) -> Raster:
    """Read one frame; the two radiographs cut to rows and columns 400 to 1423."""
    path = get_testdata_file(f"{name}.dcm", download=False)
    if path is None:
        pytest.fail(f"{name} is not among the installed test data")
    with warnings.catch_warnings():
        # These old files hold values of a length or kind that pydicom remarks on; none concerns pixels.
        warnings.simplefilter("ignore")
        dataset = pydicom.dcmread(cast("str", path))
        samples = dataset.pixel_array
    if name in _CROPPED:
        samples = samples[400:1424, 400:1424]
    photometric = cast("Literal['MONOCHROME1', 'MONOCHROME2', 'RGB']", dataset.PhotometricInterpretation)
    form = PixelFormat(dataset.BitsAllocated, dataset.BitsStored, bool(dataset.PixelRepresentation), photometric)
    return Raster(np.ascontiguousarray(samples), form)
