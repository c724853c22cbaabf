"""The canary is where the truth says it is, and the broken files are broken."""

from __future__ import annotations

from pathlib import Path

import pytest
from pydicom import dcmread

from synthetic_studies import CanaryTruth, canary_study

CANARY = "QXCANARY42"


@pytest.fixture(scope="module")
def planted(tmp_path_factory: pytest.TempPathFactory) -> CanaryTruth:
    return canary_study(tmp_path_factory.mktemp("canary"), CANARY, directory=True)


def test_more_than_fifty_places_hold_a_needle(planted: CanaryTruth) -> None:
    header = dcmread(planted.study.files[0])
    keywords = [place for place in planted.planted if place[0].isupper() and place.isalpha() and place in header]
    assert len(keywords) > 90
    for keyword in keywords:
        element = header[keyword]
        text = str(element.value[0] if element.VR == "SQ" else element.value)
        assert any(needle in text for needle in planted.needles), keyword


def test_private_elements_preamble_and_names_hold_the_canary(planted: CanaryTruth) -> None:
    path = planted.study.files[0]
    header = dcmread(path)
    block = header.private_block(0x0009, f"{CANARY} PRIVATE")
    assert block[0x01].value == CANARY
    assert CANARY.encode() in (header.preamble or b"")
    assert header.file_meta.SourceApplicationEntityTitle == CANARY
    assert all(CANARY in part for part in path.parts[-3:])


def test_uids_are_valid_and_belong_together(planted: CanaryTruth) -> None:
    first, second = (dcmread(path) for path in planted.study.files)
    assert first.SeriesInstanceUID == second.SeriesInstanceUID == planted.study.series_uid
    assert first.SOPInstanceUID != second.SOPInstanceUID
    assert all(dcmread(path).SOPInstanceUID.is_valid for path in planted.study.files)


def test_whole_files_have_pixels_and_broken_ones_do_not_read(planted: CanaryTruth) -> None:
    assert dcmread(planted.study.files[0]).pixel_array.shape == (96, 96)
    cut, wrong = planted.broken
    with pytest.raises((AttributeError, ValueError), match="pixel data"):
        _ = dcmread(cut).pixel_array
    with pytest.raises(ValueError, match=CANARY):
        _ = float(dcmread(wrong).RescaleSlope)


def test_a_directory_lists_the_copies(planted: CanaryTruth) -> None:
    assert planted.directory is not None
    records = dcmread(planted.directory).DirectoryRecordSequence
    assert sum(record.DirectoryRecordType == "IMAGE" for record in records) == 2


@pytest.mark.parametrize("canary", ["SHORT", "lowercase", "WITH SPACE", "SEVENTEENLETTERSX"], ids=str)
def test_a_canary_that_would_not_fit_everywhere_is_refused(tmp_path: Path, canary: str) -> None:
    with pytest.raises(ValueError, match="6 to 16 capitals"):
        canary_study(tmp_path, canary)
