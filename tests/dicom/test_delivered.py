"""Delivered copies matched to their originals, and their headers held against the standard."""

from __future__ import annotations

import dataclasses
import random
from pathlib import Path
from typing import Any

import pytest
from pydicom.data import get_testdata_file
from pydicom.dataset import Dataset

from safecheck.dicom.delivered import WAYS, Matching, match
from safecheck.dicom.expectations import Expectation, expectations
from safecheck.dicom.instance import Instance
from safecheck.dicom.intake import Include
from safecheck.wording import lint
from tests.dicom.made_files import ROOT, image, save, take_in

ORIGINALS = ("693_UNCR", "RG1_UNCR", "RG3_UNCR", "MR2_UNCR", "US1_UNCR", "JPEG-LL")
LOSSY = Include(lossy_sources=True, secondary_captures=True)


def real(*names: str) -> tuple[Instance, ...]:
    paths = [Path(str(get_testdata_file(f"{name}.dcm", download=False))) for name in names]
    intake = take_in(*paths, include=LOSSY)
    assert intake.left_out == ()
    return intake.instances


def pairs_by_name(found: Matching) -> dict[str, tuple[str, str]]:
    return {pair.original.source.path.stem: (pair.delivered.source.path.stem, pair.how) for pair in found.pairs}


@pytest.mark.parametrize(
    ("copies", "ways"),
    [
        (("693_J2KI", "RG1_J2KI", "RG3_J2KI", "MR2_J2KI", "US1_J2KI", "JPEG2000"), (WAYS[0],) * 5 + (WAYS[2],)),
        (("693_UNCI", "RG1_UNCI", "RG3_UNCI", "MR2_UNCI", "US1_UNCI", "JPGExtended"), (WAYS[0],) * 5 + (WAYS[2],)),
        (
            ("693_J2KR", "RG1_J2KR", "RG3_J2KR", "MR2_J2KR", "US1_J2KR", "JPEG2000_UNC"),
            (WAYS[1], *(WAYS[0],) * 4, WAYS[2]),
        ),
    ],
    ids=["compressed", "decompressed", "reversible"],
)
def test_real_twins_are_matched(copies: tuple[str, ...], ways: tuple[str, ...]) -> None:
    # Twins as pydicom-data lists them; the bone scan's copies and its lossless form share one predecessor.
    found = match(real(*ORIGINALS), real(*copies))
    assert pairs_by_name(found) == {
        original: (copy, way) for original, copy, way in zip(ORIGINALS, copies, ways, strict=True)
    }
    assert found.unmatched_originals == found.unmatched_delivered == ()


def test_two_copies_of_one_original_are_not_chosen_between() -> None:
    found = match(real("JPEG-LL"), real("JPEG2000", "JPGExtended"))
    assert found.pairs == ()
    assert [each.why for each in found.unmatched_originals] == ["more than one fits, by same source image"]
    assert len(found.unmatched_delivered) == 2


def test_a_file_that_belongs_to_nothing_stays_unmatched_on_both_sides() -> None:
    found = match(real("RG1_UNCR"), real("CT_small"))
    assert [each.why for each in found.unmatched_originals] == ["no delivered copy fits"]
    assert [each.why for each in found.unmatched_delivered] == ["no original fits"]


def made(tmp_path: Path, name: str, number: int = 1, **changes: Any) -> Instance:
    intake = take_in(save(image(number, **changes), tmp_path / name), include=LOSSY)
    assert intake.left_out == ()
    return intake.instances[0]


NEW = {"SOPInstanceUID": f"{ROOT}4.999"}


def source(uid: str) -> list[Dataset]:
    item = Dataset()
    item.ReferencedSOPInstanceUID = uid
    return [item]


@pytest.mark.parametrize(
    ("changes", "how"),
    [
        ({"SourceImageSequence": source(f"{ROOT}4.1")}, "source image sequence"),
        ({"SOPInstanceUID": f"{ROOT}4.1", "SeriesInstanceUID": f"{ROOT}3.7"}, "same instance UID"),
        ({}, "geometry and numbers"),
        ({"SeriesInstanceUID": f"{ROOT}3.7"}, "geometry and numbers"),
        ({"InstanceNumber": 40}, "geometry"),
        ({"ImagePositionPatient": ["0", "0", "5.006"]}, "geometry and numbers"),
        ({"ImagePositionPatient": None}, "series and instance number"),
        ({"ImagePositionPatient": None, "SeriesInstanceUID": f"{ROOT}3.7"}, "series and instance number"),
        ({"PatientID": None}, "geometry and numbers"),
        ({"PatientID": None, "StudyInstanceUID": None}, "geometry and numbers"),
        ({"ImagePositionPatient": None, "InstanceNumber": None}, None),
        ({"PatientID": "P2"}, None),
        ({"StudyInstanceUID": f"{ROOT}2.2"}, None),
        ({"Rows": 4, "Columns": 16}, None),
        ({"SeriesInstanceUID": f"{ROOT}3.7", "SeriesNumber": 2}, None),
        ({"ImagePositionPatient": None, "Modality": "MR"}, None),
    ],
    ids=str,
)
def test_a_copy_is_matched_in_the_surest_way_that_fits(
    tmp_path: Path, changes: dict[str, Any], how: str | None
) -> None:
    original = made(tmp_path, "o", 1)
    copy = made(tmp_path, "d", 1, **{**NEW, "RescaleIntercept": "0"} | changes)
    found = match([original], [copy])
    assert [pair.how for pair in found.pairs] == ([how] if how else [])
    assert len(found.unmatched_originals) == len(found.unmatched_delivered) == (0 if how else 1)


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        ({"PatientID": "P2"}, "another patient, by source image sequence"),
        ({"StudyInstanceUID": f"{ROOT}2.2"}, "another study, by source image sequence"),
        ({"Rows": 4, "Columns": 16}, "another number of rows, columns or frames, by source image sequence"),
    ],
    ids=["patient", "study", "size"],
)
def test_a_contradiction_is_said_and_no_weaker_way_tried(tmp_path: Path, changes: dict[str, Any], why: str) -> None:
    original = made(tmp_path, "o", 1)
    copy = made(tmp_path, "d", 1, **NEW, SourceImageSequence=source(f"{ROOT}4.1"), **changes)
    found = match([original], [copy])
    assert [each.why for each in found.unmatched_originals] == [why]
    assert [each.why for each in found.unmatched_delivered] == [why]


def test_a_copy_that_names_another_original_is_not_given_to_the_one_it_resembles(tmp_path: Path) -> None:
    named = made(tmp_path, "o1", 1)
    alike = made(tmp_path, "o2", 2, Rows=4, Columns=16)
    copy = made(tmp_path, "d", 2, **NEW, Rows=4, Columns=16, SourceImageSequence=source(f"{ROOT}4.1"))
    assert match([named, alike], [copy]).pairs == ()


def test_a_series_is_matched_slice_by_slice_in_any_order(tmp_path: Path) -> None:
    originals = [made(tmp_path, f"o{n}", n) for n in range(1, 9)]
    copies = [made(tmp_path, f"d{n}", n, SOPInstanceUID=f"{ROOT}5.{n}") for n in range(1, 9)]
    random.Random(5).shuffle(copies)
    found = match(originals, copies)
    assert [(p.original.instance_number, p.delivered.instance_number) for p in found.pairs] == [
        (n, n) for n in range(1, 9)
    ]


def test_images_derived_from_one_series_are_told_apart_by_geometry(tmp_path: Path) -> None:
    common = {"SourceImageSequence": source(f"{ROOT}9.1") + source(f"{ROOT}9.2")}
    originals = [made(tmp_path, f"o{n}", n, **common) for n in (1, 2)]
    copies = [made(tmp_path, f"d{n}", n, SOPInstanceUID=f"{ROOT}5.{n}", **common) for n in (1, 2)]
    assert [pair.how for pair in match(originals, copies).pairs] == ["geometry and numbers"] * 2


def test_every_instance_stands_in_exactly_one_place(tmp_path: Path) -> None:
    originals = [made(tmp_path, f"o{n}", n) for n in range(1, 7)]
    copies = [made(tmp_path, f"d{n}", n, SOPInstanceUID=f"{ROOT}5.{n}") for n in range(4, 10)]
    copies += [made(tmp_path, "e", 5, SOPInstanceUID=f"{ROOT}6.5")]
    found = match(originals, copies)
    assert len(found.pairs) + len(found.unmatched_originals) == len(originals)
    assert len(found.pairs) + len(found.unmatched_delivered) == len(copies)
    assert [pair.original.instance_number for pair in found.pairs] == [4, 6]


# What the standard asks (PS3.3 C.7.6.1.1.2 and C.7.6.1.1.5)


def agreement(facts: tuple[Expectation, ...]) -> dict[str, bool]:
    return {each.name.split(" (")[0]: each.agrees for each in facts}


def test_headers_of_real_copies_agree_as_found() -> None:
    # pydicom-data's compressed samples carry flag, ratio, DERIVED and a new UID; their method is absent (Type 3).
    for pair in match(
        real(*ORIGINALS), real("693_J2KI", "RG1_J2KI", "RG3_J2KI", "MR2_J2KI", "US1_J2KI", "JPEG2000")
    ).pairs:
        assert all(agreement(pair.facts).values())
        assert [each.found for each in pair.facts][::2] == ["01", "absent", "new"]


def test_an_undeclared_lossy_copy_disagrees_everywhere(tmp_path: Path) -> None:
    original = made(tmp_path, "o", 1)
    silent = made(tmp_path, "d", 1, RescaleIntercept="0")
    assert all(agreement(expectations(original, silent)).values())
    assert agreement(expectations(original, silent, pixels_differ=True)) == {
        "Lossy Image Compression": False,
        "Lossy Image Compression Ratio": True,
        "Lossy Image Compression Method": True,
        "Image Type value 1": False,
        "SOP Instance UID": False,
    }


def test_enhanced_and_digital_x_ray_objects_owe_the_ratio(tmp_path: Path) -> None:
    # Type 1C in the DX Image Module (PS3.3 C.8.11.3); for enhanced images from memory.
    for uid, method in (("1.2.840.10008.5.1.4.1.1.1.1", True), ("1.2.840.10008.5.1.4.1.1.2.1", False)):
        changes: dict[str, Any] = {"SOPClassUID": uid}
        original = made(tmp_path, "o", 1, **changes)
        copy = made(tmp_path, "d", 1, **changes, LossyImageCompression="01", **NEW)
        found = agreement(expectations(original, copy))
        assert found["Lossy Image Compression Ratio"] is False
        assert found["Lossy Image Compression Method"] is method


@pytest.mark.parametrize(
    ("ratios", "methods", "agrees"),
    [
        (["10", "20"], ["ISO_10918_1", "ISO_15444_1"], True),
        (["20"], ["ISO_15444_1"], False),
        (["20", "10"], ["ISO_15444_1", "ISO_10918_1"], False),
        (None, None, False),
    ],
    ids=["appended", "replaced", "put before", "dropped"],
)
def test_a_further_lossy_step_is_appended(
    tmp_path: Path, ratios: list[str] | None, methods: list[str] | None, agrees: bool
) -> None:
    lossy: dict[str, Any] = {"LossyImageCompression": "01", "ImageType": ["DERIVED", "PRIMARY"]}
    original = made(
        tmp_path, "o", 1, **lossy, LossyImageCompressionRatio="10", LossyImageCompressionMethod="ISO_10918_1"
    )
    copy = made(
        tmp_path, "d", 1, **lossy, **NEW, LossyImageCompressionRatio=ratios, LossyImageCompressionMethod=methods
    )
    found = agreement(expectations(original, copy))
    assert found["Lossy Image Compression Ratio"] is agrees
    assert found["Lossy Image Compression Method"] is agrees


def test_a_reversible_copy_of_a_lossy_original_keeps_its_record(tmp_path: Path) -> None:
    lossy: dict[str, Any] = {"LossyImageCompression": "01", "LossyImageCompressionRatio": "10"}
    original = made(tmp_path, "o", 1, **lossy)
    kept = made(tmp_path, "d", 1, **lossy, RescaleIntercept="0")
    assert all(agreement(expectations(original, kept)).values())
    cleared = dataclasses.replace(made(tmp_path, "c", 1, LossyImageCompression="00"))
    assert agreement(expectations(original, cleared))["Lossy Image Compression"] is False


def test_what_is_said_holds_no_forbidden_word_and_no_raw_uid(tmp_path: Path) -> None:
    found = match(real(*ORIGINALS), real("693_J2KI", "JPGExtended"))
    text = " ".join(f"{f.name} {f.found} {f.asked}" for pair in found.pairs for f in pair.facts)
    text += " ".join(each.why for each in (*found.unmatched_originals, *found.unmatched_delivered))
    assert not list(lint(text + " ".join(WAYS)))
    assert "1.2." not in text
    assert "1.3." not in text
