"""Instances for tests of the pixel path: real files by name, and headers made for samples at hand."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from pydicom.data import get_testdata_file
from pydicom.dataset import Dataset
from pydicom.encaps import encapsulate

from safecheck.dicom.instance import Instance, Source
from safecheck.frames import LossHistory, Origin
from tests.dicom.made_files import save

CT_CLASS, CT_NAME = "1.2.840.10008.5.1.4.1.1.2", "CT Image Storage"
EXPLICIT = "1.2.840.10008.1.2.1"
IMPLICIT = "1.2.840.10008.1.2"
BIG_ENDIAN = "1.2.840.10008.1.2.2"
DEFLATED = "1.2.840.10008.1.2.1.99"
RLE = "1.2.840.10008.1.2.5"
J = "1.2.840.10008.1.2.4."


def real_file(name: str) -> Path:
    """Path of a file of pydicom or pydicom-data."""
    found = get_testdata_file(name, download=False)
    assert isinstance(found, str), name
    return Path(found)


def instance_at(path: Path, *, modality: str = "CT", object_class: str = CT_NAME, member: str = "") -> Instance:
    """An instance as intake would hand it over, as far as the reader looks at it."""
    origin = Origin(
        modality=modality,
        body_part="",
        slice_thickness_class="",
        kernel="",
        manufacturer="",
        source_syntax="",
        source_bytes=0,
        history=LossHistory(lossy=False),
    )
    return Instance(
        source=Source(path, member),
        input="input",
        patient="patient",
        study="study",
        series="series",
        instance="instance",
        series_number=None,
        instance_number=None,
        frames=1,
        object_class=object_class,
        rows=1,
        columns=1,
        bits_allocated=16,
        bits_stored=12,
        photometric="",
        size_bytes=0,
        pixel_bytes=0,
        derived=False,
        origin=origin,
        frame_of_reference="frame of reference",
        uid="1.2.3",
    )


def header_for(samples: npt.NDArray[Any], **changes: object) -> Dataset:
    """A CT header that describes samples of (rows, columns[, 3]) or (frames, rows, columns) by its dtype."""
    colour = samples.ndim >= 3 and samples.shape[-1] == 3
    rows, columns = samples.shape[-3:-1] if colour else samples.shape[-2:]
    dataset = Dataset()
    dataset.SOPClassUID = CT_CLASS
    dataset.SOPInstanceUID = "1.2.3"
    dataset.Modality = "CT"
    dataset.Rows, dataset.Columns = rows, columns
    dataset.SamplesPerPixel = 3 if colour else 1
    dataset.PhotometricInterpretation = "RGB" if colour else "MONOCHROME2"
    if colour:
        dataset.PlanarConfiguration = 0
    dataset.BitsAllocated = 8 * samples.dtype.itemsize
    dataset.BitsStored = 8 * samples.dtype.itemsize
    dataset.HighBit = dataset.BitsStored - 1
    dataset.PixelRepresentation = int(samples.dtype.kind == "i")
    apply_changes(dataset, changes)
    return dataset


def apply_changes(dataset: Dataset, changes: Mapping[str, object]) -> None:
    """Set elements; None removes one."""
    for keyword, value in changes.items():
        if value is None:
            if keyword in dataset:
                delattr(dataset, keyword)
        else:
            setattr(dataset, keyword, value)
    if "BitsStored" in changes and "HighBit" not in changes:
        dataset.HighBit = int(str(changes["BitsStored"])) - 1


def write_instance(
    folder: Path,
    dataset: Dataset,
    pixels: bytes | Sequence[bytes],
    syntax: str = EXPLICIT,
    *,
    offset_table: bool = True,
    modality: str = "CT",
    object_class: str = CT_NAME,
) -> Instance:
    """Write samples, or code streams one per frame, and give the instance."""
    if isinstance(pixels, bytes):
        dataset.PixelData = pixels + b"\x00" * (len(pixels) % 2)
        dataset["PixelData"].VR = "OW" if dataset.BitsAllocated > 8 or syntax == BIG_ENDIAN else "OB"
    else:
        dataset.PixelData = encapsulate(list(pixels), has_bot=offset_table)
        dataset["PixelData"].VR = "OB"
        dataset["PixelData"].is_undefined_length = True
    path = save(dataset, folder / "image", syntax)
    return instance_at(path, modality=modality, object_class=object_class)


def noise(
    shape: tuple[int, ...], bits: int, *, signed: bool = False, dtype: str = "u2", seed: int = 1
) -> npt.NDArray[Any]:
    """Seeded uniform samples that use the whole range of the bits, its ends included."""
    low, high = (-(1 << (bits - 1)), 1 << (bits - 1)) if signed else (0, 1 << bits)
    samples = np.random.default_rng(seed).integers(low, high, shape)
    samples.flat[0], samples.flat[1] = low, high - 1
    return samples.astype(dtype)
