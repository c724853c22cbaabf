"""Real frames of pydicom-data, original and delivered, in modality units."""

import numpy as np
import pydicom
import pytest
from pydicom.data import get_testdata_file

from safecheck.frames import luma
from safecheck.measures.planes import Plane
from tests.measures.planes import Levels


def _open(name: str) -> pydicom.Dataset:
    path = get_testdata_file(name, download=False)
    assert isinstance(path, str)
    return pydicom.dcmread(path)


def _read(name: str) -> Plane:
    dataset = _open(name)
    pixels = dataset.pixel_array
    if pixels.ndim == 3:
        return luma(pixels)
    slope, intercept = float(dataset.get("RescaleSlope", 1)), float(dataset.get("RescaleIntercept", 0))
    return np.asarray(pixels.astype(np.float64) * slope + intercept)


def _pair(name: str) -> tuple[Plane, Plane]:
    return _read(f"{name}_UNCR.dcm"), _read(f"{name}_J2KI.dcm")


@pytest.fixture(scope="session")
def ct_pair() -> tuple[Plane, Plane]:
    return _pair("693")


@pytest.fixture(scope="session", params=["693", "MR2", "RG3", "US1"])
def real_pair(request: pytest.FixtureRequest) -> tuple[str, Plane, Plane]:
    before, after = _pair(request.param)
    return request.param, before, after


@pytest.fixture(scope="session")
def colour_pair() -> tuple[Levels, Levels]:
    return _open("US1_UNCR.dcm").pixel_array, _open("US1_J2KI.dcm").pixel_array
