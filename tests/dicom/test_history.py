"""Loss history on real files whose headers and code streams are known, and on made ones."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import pytest
from pydicom.data import get_testdata_file
from pydicom.dataelem import DataElement
from pydicom.dataset import Dataset
from pydicom.encaps import encapsulate

from safecheck.dicom.header import read_header
from safecheck.dicom.history import history_of
from safecheck.dicom.quiet import quiet_library
from safecheck.frames import LossHistory
from tests.dicom.made_files import coded, image, save

SYNTAX = "1.2.840.10008.1.2.4."
SAMPLES = np.random.default_rng(3).integers(0, 4096, (64, 64)).astype(np.uint16)


def read(path: Path) -> LossHistory:
    with path.open("rb") as stream, quiet_library():
        return history_of(read_header(stream))


def real(name: str) -> LossHistory:
    path = get_testdata_file(name, download=False)
    assert isinstance(path, str)
    return read(Path(path))


@pytest.mark.parametrize(
    ("name", "declared", "evidence"),
    # What pydicom's and pydicom-data's own notes say of these files.
    [
        ("693_J2KI.dcm", "01", "declares a lossy step"),
        ("693_UNCI.dcm", "01", "declares a lossy step"),
        ("RG1_J2KI.dcm", "01", "9/7"),
        ("MR2_J2KI.dcm", "01", "9/7"),
        ("US1_J2KI.dcm", "01", "9/7"),
        ("JPEG2000.dcm", "01", "9/7"),
        ("JPEG2000_UNC.dcm", "01", "declares a lossy step"),
        ("JPGExtended.dcm", "01", "syntax is lossy"),
        ("color3d_jpeg_baseline.dcm", "01", "syntax is lossy"),
        ("JPEGLSNearLossless_08.dcm", "", "NEAR of"),
        ("JPEGLSNearLossless_16.dcm", "", "NEAR of"),
        ("SC_rgb_jls_lossy_line.dcm", "", "NEAR of"),
        ("SC_rgb_dcmtk_ebcr_dcmd.dcm", "01", "declares a lossy step"),
    ],
)
def test_lossy_files_are_found_lossy(name: str, declared: str, evidence: str) -> None:
    history = real(name)
    assert history.lossy
    assert history.declared == declared
    assert any(evidence in each for each in history.evidence)


@pytest.mark.parametrize(
    "name",
    [
        "693_UNCR.dcm",
        "693_J2KR.dcm",
        "RG1_J2KR.dcm",
        "MR2_UNCR.dcm",
        "US1_J2KR.dcm",
        "JPEG-LL.dcm",
        "MR_small_jpeg_ls_lossless.dcm",
        "MR_small_jp2klossless.dcm",
        "MR_small_RLE.dcm",
        "emri_small_jpeg_2k_lossless.dcm",
        "bad_sequence.dcm",
        "image_dfl.dcm",
    ],
)
def test_reversible_files_are_not_lossy(name: str) -> None:
    history = real(name)
    assert not history.lossy
    assert history.evidence


def test_header_record_is_carried_as_found() -> None:
    history = real("693_UNCI.dcm")
    assert history.ratios == ("338.687338501292",)
    assert history.methods == ("ISO_15444_1",)


J2K = bytes(imagecodecs.jpeg2k_encode(SAMPLES, reversible=True, codecformat="J2K"))
J2K_LOSSY = bytes(imagecodecs.jpeg2k_encode(SAMPLES, level=40, reversible=False, codecformat="J2K"))
JLS, JLS_LOSSY = (bytes(imagecodecs.jpegls_encode(SAMPLES, level=near)) for near in (0, 2))
JXL = bytes(imagecodecs.jpegxl_encode(SAMPLES, lossless=True))
JXL_LOSSY = bytes(imagecodecs.jpegxl_encode(SAMPLES, distance=1.0))
HT = bytes(imagecodecs.htj2k_encode(SAMPLES, reversible=True))
HT_LOSSY = bytes(imagecodecs.htj2k_encode(SAMPLES, level=0.01, reversible=False))


@pytest.mark.parametrize(
    ("syntax", "code", "flag", "lossy"),
    [
        ("81", JLS, None, False),
        ("81", JLS, "01", True),
        ("81", JLS_LOSSY, "00", True),
        ("80", JLS_LOSSY, None, True),
        ("91", J2K, "00", False),
        ("91", J2K, None, False),
        ("91", J2K, "01", True),
        ("91", J2K_LOSSY, "00", True),
        ("91", J2K_LOSSY, None, True),
        ("90", J2K_LOSSY, None, True),
        ("93", J2K_LOSSY, None, True),
        ("203", HT, None, False),
        ("203", HT_LOSSY, "00", True),
        ("201", HT_LOSSY, None, True),
        ("110", JXL, None, False),
        ("110", JXL_LOSSY, None, True),
        ("111", JXL, None, True),
        ("112", JXL, None, False),
        ("112", JXL, "01", True),
        ("112", JXL_LOSSY, "00", True),
        ("112", b"no code stream at all", None, True),
        ("91", b"no code stream at all", "00", True),
    ],
)
def test_code_stream_decides_beside_the_flag(
    tmp_path: Path, syntax: str, code: bytes, flag: str | None, lossy: bool
) -> None:
    path = save(coded(code, Rows=64, Columns=64, LossyImageCompression=flag), tmp_path / "f", SYNTAX + syntax)
    assert read(path).lossy is lossy


def _coded_item(code: str) -> Dataset:
    item = Dataset()
    item.CodeValue = code
    return item


def _predecessor(code: str) -> Dataset:
    item = Dataset()
    item.PurposeOfReferenceCodeSequence = [_coded_item(code)]
    return item


@pytest.mark.parametrize(
    ("changes", "lossy"),
    [
        ({}, False),
        ({"LossyImageCompression": "00"}, False),
        ({"LossyImageCompression": "01"}, True),
        ({"LossyImageCompression": "YES"}, True),
        ({"LossyImageCompressionRatio": "1"}, False),
        ({"LossyImageCompressionRatio": "10"}, True),
        ({"LossyImageCompression": "00", "LossyImageCompressionRatio": ["1", "8.5"]}, True),
        ({"LossyImageCompression": "00", "LossyImageCompressionMethod": "ISO_10918_1"}, True),
        ({"DerivationCodeSequence": [_coded_item("113040")]}, True),
        ({"DerivationCodeSequence": [_coded_item("113085")]}, False),
        ({"SourceImageSequence": [_predecessor("121330")]}, True),
        ({"SourceImageSequence": [_predecessor("121320")]}, False),
    ],
    ids=str,
)
def test_an_uncompressed_file_is_lossy_by_what_its_header_declares(
    tmp_path: Path, changes: dict[str, Any], lossy: bool
) -> None:
    # Codes of CID 7203 and CID 7202 (PS3.16).
    assert read(save(image(**changes), tmp_path / "f")).lossy is lossy


def test_one_lossy_frame_makes_the_instance_lossy(tmp_path: Path) -> None:
    dataset = image(PixelData=None, NumberOfFrames=3)
    dataset.add(DataElement("PixelData", "OB", encapsulate([JLS, JLS, JLS_LOSSY]), is_undefined_length=True))
    assert read(save(dataset, tmp_path / "f", SYNTAX + "81")).lossy
