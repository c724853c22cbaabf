"""The whole sets of test files of pydicom and pydicom-data: none stops a run, each is named by reason."""

from __future__ import annotations

import logging
from collections import Counter
from pathlib import Path

import pydicom
import pytest
from pydicom.data import get_testdata_file

from safecheck.dicom.intake import Include, Intake
from tests.dicom.made_files import take_in

SMALL = Path(pydicom.__file__).parent / "data" / "test_files"
CHARACTERS = SMALL.parent / "charset_files"
LARGE = Path(str(get_testdata_file("693_UNCR.dcm", download=False))).parent
FOLDERS = (SMALL, CHARACTERS, LARGE)
EVERYTHING = Include(localizers=True, secondary_captures=True, lossy_sources=True)


def file_count() -> int:
    return sum(path.is_file() and "__pycache__" not in path.parts for folder in FOLDERS for path in folder.rglob("*"))


@pytest.fixture(scope="module")
def plain() -> Intake:
    return take_in(*FOLDERS)


@pytest.fixture(scope="module")
def asked() -> Intake:
    return take_in(*FOLDERS, include=EVERYTHING)


def reasons(intake: Intake) -> dict[str, str]:
    """Reason by file name, below the folder of the set."""
    named = {each.source.path.name: "assessed" for each in intake.instances}
    return named | {each.source.path.name: each.reason for each in intake.left_out}


def test_counts_sum_to_the_number_of_files(plain: Intake, asked: Intake) -> None:
    assert sum(plain.counts.values()) == sum(asked.counts.values()) == file_count()


def test_nothing_is_said_outside_the_result(
    capfd: pytest.CaptureFixture[str], caplog: pytest.LogCaptureFixture, recwarn: pytest.WarningsRecorder
) -> None:
    with caplog.at_level(logging.DEBUG):
        take_in(*FOLDERS)
    assert (capfd.readouterr(), caplog.records, list(recwarn)) == (("", ""), [], [])


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("MR_truncated.dcm", "truncated"),
        ("badVR.dcm", "not-an-image"),
        ("rtdose.dcm", "not-an-image"),
        ("rtdose_rle_1frame.dcm", "not-an-image"),
        ("rtplan.dcm", "not-an-image"),
        ("rtplan_truncated.dcm", "not-an-image"),
        ("liver.dcm", "not-an-image"),
        ("liver_expb_1frame.dcm", "not-an-image"),
        ("reportsi.dcm", "not-an-image"),
        ("test-SR.dcm", "not-an-image"),
        ("waveform_ecg.dcm", "not-an-image"),
        ("meta_missing_tsyntax.dcm", "header"),
        ("nested_priv_SQ.dcm", "header"),
        ("no_meta.dcm", "not-dicom"),
        ("ExplVR_LitEndNoMeta.dcm", "unreadable"),
        ("ExplVR_BigEndNoMeta.dcm", "unreadable"),
        ("OT-PAL-8-face.dcm", "unreadable"),
        ("rtstruct.dcm", "unreadable"),
        ("zipMR.gz", "not-dicom"),
        ("rtplan.dump", "not-dicom"),
        ("DICOMDIR-bigEnd", "dicomdir"),
        ("DICOMDIR-empty.dcm", "dicomdir"),
        ("DICOMDIR-nopatient", "dicomdir"),
        ("IM000000", "no-pixels"),
        ("6293", "localizer"),
        ("JPEG-LL.dcm", "secondary-capture"),
        ("SC_rgb_small_odd.dcm", "secondary-capture"),
        ("OBXXXX1A.dcm", "palette"),
        ("gdcm-US-ALOKA-16_big.dcm", "palette"),
        ("693_UNCI.dcm", "already-lossy"),
        ("RG1_J2KI.dcm", "already-lossy"),
        ("color3d_jpeg_baseline.dcm", "already-lossy"),
        ("emri_small_jpeg_2k_lossless_too_short.dcm", "conflict"),
        ("MR_small_padded.dcm", "conflict"),
        ("693_UNCR.dcm", "conflict"),
        ("RG1_UNCR.dcm", "assessed"),
        ("bad_sequence.dcm", "assessed"),
        ("explicit_VR-UN.dcm", "assessed"),
        ("eCT_Supplemental.dcm", "assessed"),
        ("CT_small.dcm", "assessed"),
        ("ExplVR_BigEnd.dcm", "assessed"),
        ("MR-SIEMENS-DICOM-WithOverlays.dcm", "assessed"),
        ("JPGLosslessP14SV1_1s_1f_8b.dcm", "assessed"),
    ],
)
def test_odd_files_are_left_out_by_name_of_a_reason(plain: Intake, name: str, reason: str) -> None:
    assert reasons(plain)[name] == reason


def test_tiny_alpha_holds_fifty_images_without_pixels(plain: Intake) -> None:
    left = [each for each in plain.left_out if "TINY_ALPHA" in each.source.path.parts]
    assert Counter(each.reason for each in left) == {"no-pixels": 50, "dicomdir": 1, "not-dicom": 1}


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("JPEG-LL.dcm", "assessed"),
        ("6293", "assessed"),
        ("JPEGLSNearLossless_16.dcm", "assessed"),
        ("SC_rgb_jpeg_lossy_gdcm.dcm", "assessed"),
        ("RG1_J2KI.dcm", "conflict"),
        ("RG1_UNCI.dcm", "conflict"),
        ("JPGExtended.dcm", "conflict"),
        ("JPEG-lossy.dcm", "conflict"),
        ("OBXXXX1A.dcm", "palette"),
        ("liver.dcm", "not-an-image"),
    ],
)
def test_asked_for_files_are_assessed(asked: Intake, name: str, reason: str) -> None:
    assert reasons(asked)[name] == reason


@pytest.mark.parametrize(
    "name", ["no_meta.dcm", "MR_truncated.dcm", "badVR.dcm", "SC_rgb_small_odd.dcm", "CT_small.dcm"]
)
def test_a_file_cut_anywhere_or_changed_anywhere_raises_nothing(tmp_path: Path, name: str) -> None:
    content = (SMALL / name).read_bytes()
    step = max(len(content) // 60, 1)
    for number, place in enumerate(range(1, len(content), step)):
        (tmp_path / f"cut{number}").write_bytes(content[:place])
        changed = bytearray(content[:2048])
        changed[place % len(changed)] ^= 0xFF
        (tmp_path / f"changed{number}").write_bytes(changed)
    intake = take_in(tmp_path)
    assert sum(intake.counts.values()) == len(list(tmp_path.iterdir()))
