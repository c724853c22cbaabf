"""The exclusion rules, one by one, and their table in the documents."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest
from pydicom.uid import AllTransferSyntaxes, UID_dictionary  # type: ignore[attr-defined]

from safecheck.dicom.rules import RULES, Include, as_markdown
from safecheck.dicom.source import BOMB_RATIO
from safecheck.wording import REASONS, lint
from tests.dicom.made_files import coded, image, save, take_in

DOCUMENT = Path(__file__).parents[2] / "docs" / "exclusions.md"
STORAGE = "1.2.840.10008.5.1.4.1.1."
EXPLICIT = "1.2.840.10008.1.2.1"


def reason_for(tmp_path: Path, syntax: str = EXPLICIT, include: Include | None = None, **changes: Any) -> str:
    plain = syntax == EXPLICIT or "PixelData" in changes
    dataset = image(**changes) if plain else coded(b"code", **changes)
    intake = take_in(save(dataset, tmp_path / "f", syntax), include=include)
    assert sum(intake.counts.values()) == 1
    return intake.left_out[0].reason if intake.left_out else "assessed"


def test_the_document_holds_the_table_of_the_program() -> None:
    text = DOCUMENT.read_text()
    assert text.split("<!-- rules -->\n")[1].split("<!-- end of rules -->")[0] == as_markdown()
    assert f"over {BOMB_RATIO} times" in text


def test_rules_use_known_reasons_and_no_forbidden_word() -> None:
    assert all(REASONS[rule.reason].status == "excluded" for rule in RULES)
    assert not list(lint(as_markdown()))
    assert not list(lint(DOCUMENT.read_text()))


def storage_classes() -> list[tuple[str, str]]:
    """Storage SOP classes of PS3.6 Table A-1 as pydicom carries it."""
    return [
        (uid, entry[0])
        for uid, entry in UID_dictionary.items()
        if entry[1] == "SOP Class" and re.search(r"Storage($| -| \()", entry[0]) and "Directory" not in entry[0]
    ]


NOT_IMAGES = re.compile(
    r"\bSR\b|Document|Procedure Log|Presentation State|Segmentation|Waveform|Encapsulated|Raw Data|Registration|"
    r"Fiducials|Tractography|Mapping|Mesh|Point Cloud|Relationship|Measurements|Prescription|Calculations|Report|"
    r"Results|Annotations?\b|Curve|Overlay|Standalone|Structured Display|Protocol|Inventory|Spectroscopy|"
    r"Palette|Template|Instruction|RT (?!Image)(?!.*Image)|C-Arm|Tomotherapeutic|Robotic|Radiation"
)


@pytest.mark.parametrize(("uid", "name"), storage_classes(), ids=lambda each: each)
def test_every_storage_class_is_an_image_or_none_as_its_name_says(tmp_path: Path, uid: str, name: str) -> None:
    include = Include(secondary_captures=True)
    reason = reason_for(tmp_path, SOPClassUID=uid, include=include)
    assert reason == ("not-an-image" if NOT_IMAGES.search(name) else "assessed")


@pytest.mark.parametrize(
    ("changes", "reason"),
    [
        ({}, "assessed"),
        ({"PixelData": None}, "no-pixels"),
        ({"SOPClassUID": "1.3.6.1.4.1.99999.7", "Modality": "SR"}, "not-an-image"),
        ({"SOPClassUID": None, "Modality": "RTDOSE"}, "not-an-image"),
        ({"SOPClassUID": "1.3.6.1.4.1.99999.7", "Modality": "CT"}, "assessed"),
        ({"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"]}, "localizer"),
        ({"ImageType": ["ORIGINAL", "PRIMARY", "AXIAL", "LOCALIZER"]}, "localizer"),
        ({"SeriesDescription": "Topogram 0.6"}, "localizer"),
        ({"SeriesDescription": "Scout AP"}, "localizer"),
        ({"ProtocolName": "3-plane loc", "Modality": "MR"}, "localizer"),
        ({"SeriesDescription": "Scout", "Modality": "US"}, "assessed"),
        ({"SeriesDescription": "Scouting"}, "assessed"),
        ({"ImageType": ["DERIVED", "SECONDARY", "OTHER", "CT_SOM5 PROT"]}, "dose-page"),
        ({"SeriesDescription": "Dose Report"}, "dose-page"),
        ({"SeriesDescription": "Patient Protocol", "SOPClassUID": STORAGE + "7"}, "dose-page"),
        ({"SeriesDescription": "Low Dose Thorax"}, "assessed"),
        ({"SOPClassUID": STORAGE + "7"}, "secondary-capture"),
        ({"SOPClassUID": STORAGE + "7", "Modality": "NM"}, "secondary-capture"),
        ({"SOPClassUID": STORAGE + "7.4"}, "secondary-capture"),
        ({"ImageType": ["DERIVED", "SECONDARY", "SCREEN SAVE"]}, "secondary-capture"),
        ({"ImageType": ["DERIVED", "SECONDARY"], "ConversionType": "WSD"}, "secondary-capture"),
        ({"ConversionType": "WSD"}, "assessed"),
        ({"ImageType": ["DERIVED", "SECONDARY"], "ConversionType": "DI"}, "assessed"),
        ({"PhotometricInterpretation": "PALETTE COLOR"}, "palette"),
        ({"LossyImageCompression": "01"}, "already-lossy"),
    ],
    ids=str,
)
def test_the_first_rule_that_applies_gives_the_reason(tmp_path: Path, changes: dict[str, Any], reason: str) -> None:
    assert reason_for(tmp_path, **changes) == reason


@pytest.mark.parametrize(
    ("include", "changes"),
    [
        (Include(localizers=True), {"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"]}),
        (Include(secondary_captures=True), {"SOPClassUID": STORAGE + "7"}),
        (Include(lossy_sources=True), {"LossyImageCompression": "01"}),
    ],
    ids=["localizers", "secondary captures", "lossy sources"],
)
def test_what_is_asked_for_is_assessed(tmp_path: Path, include: Include, changes: dict[str, Any]) -> None:
    assert reason_for(tmp_path, include=include, **changes) == "assessed"


def test_a_dose_page_stays_out_when_secondary_captures_are_asked_for(tmp_path: Path) -> None:
    include = Include(secondary_captures=True)
    changes = {"SeriesDescription": "Dose Report", "SOPClassUID": STORAGE + "7"}
    assert reason_for(tmp_path, include=include, **changes) == "dose-page"


@pytest.mark.parametrize("uid", [uid for uid in AllTransferSyntaxes if re.search("MPEG|AVC|HEVC|SMPTE", uid.name)])
def test_video_is_left_out(tmp_path: Path, uid: str) -> None:
    assert reason_for(tmp_path, str(uid), include=Include(lossy_sources=True)) == "video"


@pytest.mark.parametrize(
    ("syntax", "changes", "reason"),
    [
        ("1.2.840.10008.1.2.4.94", {}, "syntax"),
        ("1.2.840.10008.1.2.4.204", {"PixelData": None}, "syntax"),
        ("1.3.6.1.4.1.99999.2", {}, "syntax"),
        (EXPLICIT, {"Rows": None}, "header"),
        (EXPLICIT, {"Columns": 0}, "header"),
        (EXPLICIT, {"BitsStored": None}, "header"),
        (EXPLICIT, {"PhotometricInterpretation": None}, "header"),
        (EXPLICIT, {"NumberOfFrames": 0}, "header"),
        (EXPLICIT, {"PixelData": None, "FloatPixelData": bytes(256)}, "bits"),
    ],
    ids=str,
)
def test_doubtful_headers_are_refused(tmp_path: Path, syntax: str, changes: dict[str, Any], reason: str) -> None:
    assert reason_for(tmp_path, syntax, **changes) == reason
    assert REASONS[reason].status == "refused"
