"""Canary strings planted wherever a file can hold text never reach what leaves the room."""

from __future__ import annotations

import dataclasses
import logging
import zipfile
from pathlib import Path
from typing import Any

import pytest
from pydicom.datadict import dictionary_VR, keyword_dict
from pydicom.dataelem import DataElement
from pydicom.dataset import Dataset
from pydicom.errors import InvalidDicomError
from pydicom.uid import UID

from safecheck.dicom import opened as opened_module
from safecheck.dicom.delivered import match
from safecheck.dicom.intake import Include, Intake
from tests.dicom.made_files import image, save, take_in
from tests.dicom.test_intake_real_files import FOLDERS

CANARY = "QZXCANARYXZQ"
CANARY_UID = "1.2.826.0.1.3680043.10.99999.31337.31337"
NEVER_WRITTEN = {"source", "uid", "source_uids"}
EVERYTHING = Include(localizers=True, secondary_captures=True, lossy_sources=True)
TEXTS = ("AE", "AS", "CS", "DA", "DS", "DT", "IS", "LO", "LT", "PN", "SH", "ST", "TM", "UC", "UR", "UT")
STRUCTURE = {"SOPClassUID", "Rows", "Columns", "BitsAllocated", "BitsStored", "PixelData", "SpecificCharacterSet"}


def written(value: object) -> str:
    """Text of all that may be written of a result: every field but those documented as never written."""
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        fields = [each.name for each in dataclasses.fields(value) if each.name not in NEVER_WRITTEN]
        return "\n".join(f"{name}={written(getattr(value, name))}" for name in fields)
    if isinstance(value, (tuple, list)):
        return "\n".join(map(written, value))
    return repr(value)


def assert_clean(intake: Intake) -> None:
    text = written(intake) + repr(intake.counts)
    assert CANARY not in text
    assert "31337" not in text


def keywords() -> list[str]:
    """Keywords of all text and UID attributes of PS3.6 as pydicom carries it, file meta and structure apart."""
    found = []
    for keyword, tag in keyword_dict.items():
        if tag >> 16 > 0x0002 and keyword not in STRUCTURE and dictionary_VR(tag).split(" ")[0] in (*TEXTS, "UI", "SQ"):
            found.append(keyword)
    return found


def planted(number: int, **changes: Any) -> Dataset:
    """An image with canaries in every text attribute, in private ones, and one level down in sequences."""
    dataset = image(number, **changes)
    inner = Dataset()
    inner.add(DataElement(0x00081155, "UI", CANARY_UID))
    inner.add(DataElement(0x00080100, "SH", CANARY))
    inner.add(DataElement(0x00181210, "SH", CANARY))
    for keyword in keywords():
        tag = keyword_dict[keyword]
        kind = dictionary_VR(tag).split(" ")[0]
        if kind == "SQ":
            dataset.add(DataElement(tag, "SQ", [inner]))
        elif kind == "UI":
            dataset.add(DataElement(tag, "UI", f"{CANARY_UID}.{number}"))
        else:
            # Under a kind of text that takes any value, as malformed files have it.
            dataset.add(DataElement(tag, "LO", CANARY))
    block = dataset.private_block(0x0011, CANARY, create=True)
    block.add_new(0x01, "LO", CANARY)
    block.add_new(0x02, "OB", CANARY.encode())
    return dataset


def test_the_plant_covers_far_more_than_fifty_attributes() -> None:
    assert len(keywords()) > 3000


@pytest.mark.parametrize("syntax", ["1.2.840.10008.1.2", "1.2.840.10008.1.2.1", "1.2.840.10008.1.2.2"])
@pytest.mark.parametrize("include", [None, EVERYTHING], ids=["rules", "everything"])
def test_canaries_in_every_attribute_stay_inside(
    tmp_path: Path,
    syntax: str,
    include: Include | None,
    capfd: pytest.CaptureFixture[str],
    caplog: pytest.LogCaptureFixture,
    recwarn: pytest.WarningsRecorder,
) -> None:
    folder = tmp_path / CANARY / CANARY_UID
    save(planted(1), folder / f"{CANARY}.dcm", syntax)
    # Each attribute that is looked at, planted alone, so that others do not hide it.
    for number, keyword in enumerate(LOOKED_AT, start=2):
        dataset = image(number)
        dataset.add(DataElement(keyword_dict[keyword], "LO", CANARY))
        save(dataset, folder / f"{CANARY}{keyword}", syntax)
    # Writing the plants makes the library speak; only what the intake does counts.
    recwarn.clear()
    caplog.clear()
    with caplog.at_level(logging.DEBUG):
        intake = take_in(tmp_path, include=include)
    assert sum(intake.counts.values()) == 1 + len(LOOKED_AT)
    assert_clean(intake)
    assert (capfd.readouterr(), caplog.records, list(recwarn)) == (("", ""), [], [])


LOOKED_AT = [
    "PatientID",
    "StudyInstanceUID",
    "SeriesInstanceUID",
    "SOPInstanceUID",
    "SOPClassUID",
    "SeriesNumber",
    "InstanceNumber",
    "NumberOfFrames",
    "Rows",
    "Columns",
    "BitsAllocated",
    "BitsStored",
    "PhotometricInterpretation",
    "ImageType",
    "Modality",
    "BodyPartExamined",
    "Manufacturer",
    "ConvolutionKernel",
    "SliceThickness",
    "BurnedInAnnotation",
    "ImagePositionPatient",
    "ImageOrientationPatient",
    "LossyImageCompression",
    "LossyImageCompressionRatio",
    "LossyImageCompressionMethod",
    "DerivationCodeSequence",
    "SourceImageSequence",
    "SharedFunctionalGroupsSequence",
    "PerFrameFunctionalGroupsSequence",
    "SeriesDescription",
    "ProtocolName",
    "ImageComments",
    "ConversionType",
    "SpecificCharacterSet",
]


@pytest.mark.parametrize("keyword", ["TransferSyntaxUID", "MediaStorageSOPClassUID", "ImplementationVersionName"])
def test_canaries_in_file_meta_information_stay_inside(tmp_path: Path, keyword: str) -> None:
    path = save(image(1), tmp_path / "f")
    content = path.read_bytes()
    old = {"TransferSyntaxUID": b"1.2.840.10008.1.2.1\0", "MediaStorageSOPClassUID": b"1.2.840.10008.5.1.4.1.1.2\0"}
    if keyword in old:
        new = (CANARY + "123456789012345")[: len(old[keyword])].encode()
        content = content.replace(old[keyword], new, 1)
    else:
        content = content.replace(b"DICM", b"DICM" + b"\x02\x00\x13\x00SH\x0c\x00" + CANARY.encode(), 1)
    path.write_bytes(content)
    assert_clean(take_in(path))


def test_canaries_in_names_of_members_lists_and_links_stay_inside(tmp_path: Path) -> None:
    folder = tmp_path / CANARY
    path = save(image(1), folder / CANARY)
    with zipfile.ZipFile(folder / f"{CANARY}.zip", "w") as archive:
        archive.write(path, f"{CANARY}/{CANARY}")
        archive.writestr(f"../{CANARY}", b"x")
        archive.writestr(f"{CANARY}.zip", (b"PK\x03\x04" + CANARY.encode()) * 100)
        archive.writestr(f"{CANARY}.txt", CANARY)
    (folder / f"{CANARY}-broken.zip").write_bytes(b"PK\x03\x04" + CANARY.encode() * 100)
    (folder / f"{CANARY}-loop").symlink_to(folder)
    (folder / f"{CANARY}-gone").symlink_to(folder / f"{CANARY}-nowhere")
    (tmp_path / "list").write_text(f"{CANARY}\n{CANARY}/{CANARY}-missing\n")
    intake = take_in(folder, list_file=tmp_path / "list")
    assert intake.counts.keys() >= {"archive-path", "unreadable", "link-loop", "duplicate", "not-dicom"}
    assert_clean(intake)


def test_canaries_in_a_dicomdir_stay_inside(tmp_path: Path) -> None:
    record = Dataset()
    record.DirectoryRecordType = CANARY
    record.PatientName = CANARY
    record.ReferencedFileID = [CANARY, CANARY]
    directory = Dataset()
    directory.FileSetID = CANARY
    directory.DirectoryRecordSequence = [record, record]
    directory.SOPClassUID = UID("1.2.840.10008.1.3.10")
    path = save(directory, tmp_path / CANARY / "DICOMDIR")
    intake = take_in(path)
    assert intake.left_out[0].detail == "lists 1 files, 1 missing, 0 outside its folder"
    assert_clean(intake)


@pytest.mark.parametrize(
    "error", [ValueError, KeyError, InvalidDicomError, OSError, RecursionError, NotImplementedError]
)
def test_canaries_in_exception_texts_stay_inside(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: type[Exception]
) -> None:
    def refuse(*_: object, **__: object) -> Dataset:
        raise error(CANARY)

    path = save(image(1), tmp_path / "f")
    monkeypatch.setattr(opened_module, "read_dataset", refuse)
    intake = take_in(path)
    assert intake.counts == {"assessed": 0, "unreadable": 1}
    assert_clean(intake)


def test_canaries_stay_out_of_the_matching(tmp_path: Path) -> None:
    original = take_in(save(planted(1), tmp_path / "o"), include=EVERYTHING)
    other = take_in(save(planted(2, InstanceNumber=1), tmp_path / "d"), include=EVERYTHING)
    found = match(original.instances, other.instances)
    assert CANARY not in written(found)
    assert "31337" not in written(found)
    for pair in found.pairs:
        assert CANARY not in repr(pair.facts)
        assert "31337" not in repr(pair.facts)


def test_identities_of_real_files_stay_inside(tmp_path: Path) -> None:
    intake = take_in(*FOLDERS, include=EVERYTHING)
    text = written(intake)
    uids = {each.uid for each in intake.instances} | {each.facts.uid for each in intake.left_out if each.facts}
    assert not [uid for uid in uids - {""} if uid in text]
    sources = [each.source for each in intake.instances] + [each.source for each in intake.left_out]
    assert not [source for source in sources if str(source.path.parent) in text or f"{source.path.name}." in text]
    for name in ("CompressedSamples", "CQ500", "Lestrade", "Doe^", "9RG1"):
        assert name not in text
