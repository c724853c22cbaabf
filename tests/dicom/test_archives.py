"""Zip archives and deflated files: members in memory within bounds, bombs and names that lead out refused."""

from __future__ import annotations

import io
import os
import zipfile
import zlib
from pathlib import Path

import pytest

from safecheck.dicom import source as source_module
from safecheck.dicom.instance import Source
from safecheck.dicom.source import inflate, open_source
from safecheck.errors import InputRefused
from tests.dicom.factory import DEFLATED
from tests.dicom.made_files import image, save, study, take_in, zipped


def test_members_are_read_again_through_their_source(tmp_path: Path) -> None:
    archive = zipped(study(tmp_path / "study", 2), tmp_path / "z")
    for each in take_in(archive).instances:
        with open_source(each.source) as stream:
            assert len(stream.read()) == each.size_bytes


def write_zip(path: Path, members: dict[str, bytes]) -> Path:
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as target:
        for name, content in members.items():
            target.writestr(name, content)
    return path


@pytest.mark.parametrize("name", ["../out", "a/../../out", "/abs", "C:\\out", "..\\out", "\\out", "C:out"])
def test_names_that_lead_out_of_an_archive_are_refused(tmp_path: Path, name: str) -> None:
    content = save(image(1), tmp_path / "f").read_bytes()
    archive = write_zip(tmp_path / "z", {name: content, "in/side": content})
    intake = take_in(archive)
    assert intake.counts == {"assessed": 1, "archive-path": 1}
    assert sorted(each.name for each in tmp_path.iterdir()) == ["f", "z"]


def test_an_archive_in_an_archive_is_counted_and_not_entered(tmp_path: Path) -> None:
    inner = write_zip(tmp_path / "inner", {"f": save(image(1), tmp_path / "f").read_bytes()})
    (left,) = take_in(write_zip(tmp_path / "z", {"inner": inner.read_bytes()})).left_out
    assert (left.reason, left.detail) == ("not-dicom", "an archive within an archive, not entered")


def test_a_preamble_that_imitates_an_archive_is_dicom(tmp_path: Path) -> None:
    path = save(image(1), tmp_path / "f")
    path.write_bytes(b"PK\x03\x04" + path.read_bytes()[4:])
    assert take_in(path).counts == {"assessed": 1}


def test_a_bomb_is_refused_by_name(tmp_path: Path) -> None:
    archive = write_zip(tmp_path / "z", {"bomb": bytes(32 * 1024 * 1024)})
    assert take_in(archive).counts == {"assessed": 0, "archive-bomb": 1}


def test_a_deflated_bomb_is_refused_by_name(tmp_path: Path) -> None:
    big = image(1, Rows=4096, Columns=4096, PixelData=bytes(32 * 1024 * 1024))
    assert take_in(save(big, tmp_path / "f", DEFLATED)).counts == {"assessed": 0, "archive-bomb": 1}


def test_members_over_the_limit_are_refused_by_name(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    archive = write_zip(tmp_path / "z", {"big": os.urandom(5000), "small": os.urandom(3000)})
    monkeypatch.setattr(source_module, "WHOLE_LIMIT_BYTES", 4000)
    assert take_in(archive).counts == {"assessed": 0, "too-large": 1, "not-dicom": 1}
    with pytest.raises(InputRefused, match="too-large"):
        open_source(Source(archive, "big"))


def test_deflated_files_over_the_limit_are_refused_by_name(monkeypatch: pytest.MonkeyPatch) -> None:
    engine = zlib.compressobj(wbits=-15)
    packed = engine.compress(os.urandom(5000)) + engine.flush()
    assert len(inflate(packed)) == 5000
    monkeypatch.setattr(source_module, "WHOLE_LIMIT_BYTES", 4000)
    with pytest.raises(InputRefused, match="too-large"):
        inflate(packed)


def test_overlapping_members_are_refused(tmp_path: Path) -> None:
    # Two directory entries that share one member's bytes, so that little inflates to much.
    archive = write_zip(tmp_path / "z", {"a": os.urandom(4000)})
    content = archive.read_bytes()
    start = content.index(b"PK\x01\x02")
    end = content.index(b"PK\x05\x06")
    entry, tail = content[start:end], bytearray(content[end:])
    tail[8:12] = (2).to_bytes(2, "little") * 2
    tail[12:16] = (2 * len(entry)).to_bytes(4, "little")
    archive.write_bytes(content[:start] + entry + entry.replace(b"a", b"b", 1) + bytes(tail))
    assert take_in(archive).counts == {"assessed": 0, "archive-bomb": 1}


def test_a_size_other_than_declared_is_refused(tmp_path: Path) -> None:
    archive = write_zip(tmp_path / "z", {"a": bytes(range(256)) * 20})
    content = bytearray(archive.read_bytes())
    for mark, offset in ((b"PK\x03\x04", 22), (b"PK\x01\x02", 24)):
        place = content.index(mark) + offset
        content[place : place + 4] = (100).to_bytes(4, "little")
    archive.write_bytes(content)
    assert set(take_in(archive).counts) & {"archive-bomb", "unreadable"}


@pytest.mark.parametrize("damage", ["cut", "content", "locked"])
def test_damaged_and_locked_archives_are_refused(tmp_path: Path, damage: str) -> None:
    archive = write_zip(tmp_path / "z", {"a": os.urandom(4000)})
    content = bytearray(archive.read_bytes())
    if damage == "cut":
        content = content[:2000]
    elif damage == "content":
        content[1000] ^= 255
    else:
        content[6] |= 1
        content[content.index(b"PK\x01\x02") + 8] |= 1
    archive.write_bytes(content)
    assert take_in(archive).counts == {"assessed": 0, "unreadable": 1}


def test_equal_names_in_an_archive_are_told_apart(tmp_path: Path) -> None:
    with zipfile.ZipFile(tmp_path / "z", "w") as target:
        target.writestr("a", b"first")
        with pytest.warns(UserWarning, match="Duplicate name"):
            target.writestr("a", b"second")
    assert take_in(tmp_path / "z").counts == {"assessed": 0, "archive-path": 1, "not-dicom": 1}


def test_a_source_that_is_gone_is_refused(tmp_path: Path) -> None:
    archive = write_zip(tmp_path / "z", {"a": b"x"})
    for source in (Source(tmp_path / "gone"), Source(archive, "gone"), Source(tmp_path / "gone", "a")):
        with pytest.raises(InputRefused, match="unreadable") as caught:
            open_source(source)
        assert "gone" not in str(caught.value)


def test_an_inflated_source_is_seekable(tmp_path: Path) -> None:
    archive = write_zip(tmp_path / "z", {"a": b"content"})
    stream = open_source(Source(archive, "a"))
    assert isinstance(stream, io.BytesIO)
    assert stream.read() == b"content"


def test_an_archive_that_changed_is_opened_again(tmp_path: Path) -> None:
    archive = write_zip(tmp_path / "z", {"a": b"content"})
    assert open_source(Source(archive, "a")).read() == b"content"
    write_zip(tmp_path / "z", {"a": b"another content", "b": b""})
    assert open_source(Source(archive, "a")).read() == b"another content"


def test_the_directory_of_an_archive_is_read_once_for_all_its_members(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    archive = write_zip(tmp_path / "z", {f"{n}": b"content" for n in range(20)})
    opened: list[Path] = []

    class Counted(zipfile.ZipFile):
        def __init__(self, path: Path) -> None:
            opened.append(path)
            super().__init__(path)

    monkeypatch.setattr(zipfile, "ZipFile", Counted)
    for n in range(20):
        assert open_source(Source(archive, f"{n}")).read() == b"content"
    assert len(opened) == 1
