"""Intake of files, folders, archives, lists and DICOMDIRs; what does not depend on how they are handed in."""

from __future__ import annotations

import dataclasses
import os
import random
import shutil
import socket
from pathlib import Path

import pytest
from pydicom.data import get_testdata_file

from safecheck.dicom.instance import Source
from safecheck.dicom.intake import Intake, gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import UsageError
from tests.dicom.factory import DEFLATED
from tests.dicom.made_files import KEY, ROOT, image, save, study, take_in, zipped


def without_sources(intake: Intake) -> Intake:
    nowhere = Source(Path())
    return Intake(
        tuple(dataclasses.replace(each, source=nowhere) for each in intake.instances),
        tuple(dataclasses.replace(each, source=nowhere) for each in intake.left_out),
    )


def test_instances_come_in_order_of_their_numbers(tmp_path: Path) -> None:
    intake = take_in(study(tmp_path, 12))
    assert [each.instance_number for each in intake.instances] == list(range(1, 13))
    assert intake.left_out == ()


def test_facts_of_an_instance_are_those_of_its_header(tmp_path: Path) -> None:
    path = save(image(7, BodyPartExamined="CHEST", ConvolutionKernel="B30f", Manufacturer="SIEMENS"), tmp_path / "f")
    (found,) = take_in(path).instances
    names = Pseudonyms(KEY)
    assert found.source == Source(path)
    assert (found.patient, found.study) == (names.name("patient", "P1"), names.name("study", f"{ROOT}2.1"))
    assert (found.series, found.instance) == (names.name("series", f"{ROOT}3.1"), names.name("instance", f"{ROOT}4.7"))
    assert (found.rows, found.columns, found.frames) == (8, 8, 1)
    assert (found.bits_allocated, found.bits_stored) == (16, 12)
    assert (found.size_bytes, found.pixel_bytes) == (path.stat().st_size, 128)
    assert found.origin.stratum == "CT, CHEST, over 3 to 5 mm, B30f"
    assert found.origin.slice_position_mm == 35.0
    assert (found.origin.manufacturer, found.origin.source_bytes) == ("Siemens", 128)
    assert (found.object_class, found.uid) == ("CT Image Storage", f"{ROOT}4.7")


def test_a_file_without_identities_goes_by_its_content(tmp_path: Path) -> None:
    nameless = {"PatientID": None, "StudyInstanceUID": None, "SeriesInstanceUID": None, "SOPInstanceUID": None}
    (found,) = take_in(save(image(**nameless), tmp_path / "f")).instances
    assert found.input == found.patient == found.study == found.series == found.instance


@pytest.mark.parametrize("way", ["files", "reversed", "twice", "list", "named list", "zip", "mixed", "link"])
def test_results_do_not_depend_on_how_files_are_handed_in(tmp_path: Path, way: str) -> None:
    folder = study(tmp_path / "study")
    (folder / "README").write_text("no image")
    save(image(9, PixelData=None), folder / "deep" / "er" / "no pixels")
    plain = take_in(folder)
    files = [path for path in folder.rglob("*") if path.is_file()]
    lister = tmp_path / "list.txt"
    if way == "files":
        random.Random(4).shuffle(files)
        other = take_in(*files)
    elif way == "reversed":
        other = take_in(*sorted(files, reverse=True))
    elif way == "twice":
        other = take_in(folder, *files, folder / "deep", folder)
    elif way == "list":
        lister.write_text("\n".join(os.path.relpath(path, tmp_path) for path in files) + "\n\n")
        other = take_in(list_file=lister)
    elif way == "named list":
        lister.write_text("\n".join(map(str, files)))
        other = take_in(lister)
    elif way == "zip":
        other = take_in(zipped(folder, tmp_path / "archive.img"))
    elif way == "mixed":
        lister.write_text(str(files[1]))
        other = take_in(files[0], folder, list_file=lister)
    else:
        (tmp_path / "link").symlink_to(folder)
        other = take_in(tmp_path / "link")
    assert without_sources(other) == without_sources(plain)
    assert plain.counts == {"assessed": 4, "not-dicom": 1, "no-pixels": 1}


def test_another_key_gives_other_names(tmp_path: Path) -> None:
    study(tmp_path, 1)
    one, other = take_in(tmp_path).instances[0], take_in(tmp_path, key=b"another key of the tests").instances[0]
    for kind in ("input", "patient", "study", "series", "instance"):
        assert getattr(one, kind) != getattr(other, kind)


def test_identical_files_are_named_once(tmp_path: Path) -> None:
    path = save(image(1), tmp_path / "a")
    shutil.copy(path, tmp_path / "b")
    intake = take_in(tmp_path)
    (left,) = intake.left_out
    assert intake.counts == {"assessed": 1, "duplicate": 1}
    assert left.facts is not None
    assert left.facts.instance == intake.instances[0].instance


def test_contradicting_files_of_one_instance_are_all_refused(tmp_path: Path) -> None:
    save(image(1), tmp_path / "a")
    save(image(1, Rows=4, Columns=16), tmp_path / "b")
    save(image(2), tmp_path / "c")
    assert take_in(tmp_path).counts == {"assessed": 1, "conflict": 2}


def test_an_excluded_file_does_not_contradict(tmp_path: Path) -> None:
    save(image(1), tmp_path / "a")
    save(image(1, LossyImageCompression="01"), tmp_path / "b")
    assert take_in(tmp_path).counts == {"assessed": 1, "already-lossy": 1}


def test_a_cut_file_is_refused(tmp_path: Path) -> None:
    path = save(image(1), tmp_path / "a")
    path.write_bytes(path.read_bytes()[:-1])
    assert take_in(path).counts == {"assessed": 0, "truncated": 1}


@pytest.mark.parametrize("left", [3, 9, 44])
def test_a_file_cut_within_its_header_is_not_taken_for_one_without_pixels(tmp_path: Path, left: int) -> None:
    path = save(image(1, PixelData=None, ImageComments="x" * 200), tmp_path / "a")
    assert take_in(path).counts == {"assessed": 0, "no-pixels": 1}
    content = path.read_bytes()
    path.write_bytes(content[: content.index(b"\x28\x00\x10\x00US") + left])
    assert take_in(path).counts == {"assessed": 0, "truncated": 1}


def test_a_deflated_file_is_read(tmp_path: Path) -> None:
    path = save(image(1, Rows=64, Columns=64, PixelData=bytes(8192)), tmp_path / "a", DEFLATED)
    (found,) = take_in(path).instances
    assert 0 < found.pixel_bytes < path.stat().st_size < 8192
    assert found.origin.source_syntax == "Deflated Explicit VR Little Endian"


def test_progress_is_told_after_each_input(tmp_path: Path) -> None:
    told: list[tuple[int, int]] = []
    gather([study(tmp_path)], pseudonyms=Pseudonyms(KEY), progress=lambda done, found: told.append((done, found)))
    assert told == [(1, 4), (2, 4), (3, 4), (4, 4)]


# Folders and links


def test_a_link_to_a_folder_that_holds_it_is_named_and_not_followed(tmp_path: Path) -> None:
    study(tmp_path / "a" / "b", 2)
    (tmp_path / "a" / "b" / "up").symlink_to(tmp_path / "a")
    assert take_in(tmp_path).counts == {"assessed": 2, "link-loop": 1}


def test_links_that_lead_to_each_other_are_named_wherever_the_walk_begins(tmp_path: Path) -> None:
    study(tmp_path / "a", 1)
    save(image(2), tmp_path / "b" / "f")
    (tmp_path / "a" / "x").symlink_to(tmp_path / "b")
    (tmp_path / "b" / "y").symlink_to(tmp_path / "a")
    whole = take_in(tmp_path)
    assert whole.counts == {"assessed": 2, "link-loop": 2}
    assert take_in(tmp_path / "a") == take_in(tmp_path / "b") == whole


def test_a_link_to_itself_is_a_loop(tmp_path: Path) -> None:
    (tmp_path / "x").symlink_to(tmp_path / "x")
    assert take_in(tmp_path).counts == {"assessed": 0, "link-loop": 1}


def test_a_broken_link_and_a_missing_path_are_counted(tmp_path: Path) -> None:
    (tmp_path / "x").symlink_to(tmp_path / "nowhere")
    assert take_in(tmp_path, tmp_path / "missing").counts == {"assessed": 0, "unreadable": 2}


def test_pipes_and_sockets_are_never_opened(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    os.mkfifo(tmp_path / "pipe")
    monkeypatch.chdir(tmp_path)
    with socket.socket(socket.AF_UNIX) as server:
        server.bind("s")
        assert take_in(tmp_path).counts == {"assessed": 0, "not-dicom": 2}


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is closed to root")
def test_closed_files_and_folders_are_refused(tmp_path: Path) -> None:
    save(image(1), tmp_path / "a").chmod(0)
    (tmp_path / "folder").mkdir(mode=0)
    assert take_in(tmp_path).counts == {"assessed": 0, "unreadable": 2}


def test_a_file_that_cannot_be_opened_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    save(image(1), tmp_path / "a")

    def refuse(path: Path, mode: str = "r") -> object:
        raise PermissionError(13, "CANARY", str(path))

    monkeypatch.setattr(Path, "open", refuse)
    (left,) = take_in(tmp_path).left_out
    assert (left.reason, left.detail) == ("unreadable", "PermissionError when opened")


def test_a_list_that_cannot_be_read_is_a_wrong_call(tmp_path: Path) -> None:
    (tmp_path / "list").write_bytes(b"\xff\xfe\xfa")
    with pytest.raises(UsageError, match="list file cannot be read"):
        take_in(list_file=tmp_path / "list")
    with pytest.raises(UsageError, match="list file cannot be read") as caught:
        take_in(list_file=tmp_path / "CANARY")
    assert "CANARY" not in str(caught.value)


def test_a_text_that_names_no_path_is_no_list(tmp_path: Path) -> None:
    for number, text in enumerate(("read me first\n", "", "\n\n", "x" * 5000, "a\0b")):
        (tmp_path / str(number)).write_text(text)
    found = take_in(*tmp_path.iterdir())
    assert found.counts == {"assessed": 0, "not-dicom": 5}


def test_a_list_within_a_folder_is_no_list(tmp_path: Path) -> None:
    study(tmp_path / "a", 1)
    (tmp_path / "b").mkdir()
    (tmp_path / "b" / "list").write_text("../a")
    assert take_in(tmp_path / "b").counts == {"assessed": 0, "not-dicom": 1}
    assert take_in(tmp_path / "b" / "list").counts == {"assessed": 1}


def test_paths_missing_from_a_list_are_counted(tmp_path: Path) -> None:
    study(tmp_path / "a", 1)
    (tmp_path / "list").write_text("a\nmissing\n")
    assert take_in(tmp_path / "list").counts == {"assessed": 1, "unreadable": 1}


# DICOMDIR


def real_directory(tmp_path: Path) -> Path:
    """The 81-file set of pydicom's DICOMDIR, copied."""
    found = get_testdata_file("DICOMDIR", download=False)
    assert isinstance(found, str)
    return Path(shutil.copytree(Path(found).parent, tmp_path / "media"))


def test_a_dicomdir_gives_the_files_it_lists(tmp_path: Path) -> None:
    media = real_directory(tmp_path)
    alone = take_in(media / "DICOMDIR")
    (listed,) = [each for each in alone.left_out if each.reason == "dicomdir"]
    assert listed.detail == "lists 31 files, 0 missing, 0 outside its folder"
    assert sum(alone.counts.values()) == 32
    assert take_in(media / "DICOMDIR", media / "77654033").counts == alone.counts


def test_a_dicomdir_in_an_archive_reads_the_same(tmp_path: Path) -> None:
    media = real_directory(tmp_path)
    assert without_sources(take_in(zipped(media, tmp_path / "z"))) == without_sources(take_in(media))


def test_files_missing_from_a_dicomdir_are_counted(tmp_path: Path) -> None:
    media = real_directory(tmp_path)
    missing = next(path for path in sorted((media / "77654033").rglob("*")) if path.is_file())
    missing.unlink()
    alone = take_in(media / "DICOMDIR")
    (listed,) = [each for each in alone.left_out if each.reason == "dicomdir"]
    assert listed.detail == "lists 31 files, 1 missing, 0 outside its folder"
    assert sum(alone.counts.values()) == 31


def test_entries_that_lead_out_of_a_dicomdir_are_not_followed(tmp_path: Path) -> None:
    media = real_directory(tmp_path)
    save(image(1), tmp_path / "CR1" / "6154")
    content = (media / "DICOMDIR").read_bytes()
    # One entry's Referenced File ID, at equal length.
    assert b"77654033\\CR1\\6154" in content
    (media / "DICOMDIR").write_bytes(content.replace(b"77654033\\CR1\\6154", b"..\\.\\.\\.\\CR1\\6154"))
    alone = take_in(media / "DICOMDIR")
    (listed,) = [each for each in alone.left_out if each.reason == "dicomdir"]
    assert listed.detail == "lists 30 files, 0 missing, 1 outside its folder"
    assert sum(alone.counts.values()) == 31


def test_two_equal_directories_each_give_their_files(tmp_path: Path) -> None:
    media = real_directory(tmp_path)
    other = Path(shutil.copytree(media, tmp_path / "other"))
    both = take_in(media / "DICOMDIR", other / "DICOMDIR")
    assert both.counts["dicomdir"] == 2
    assert sum(both.counts.values()) == 64
