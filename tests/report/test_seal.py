from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from safecheck.errors import DossierError
from safecheck.report.seal import SEAL, SUMS, Difference, check_seal, write_seal


@pytest.fixture
def dossier(tmp_path: Path) -> Path:
    folder = tmp_path / "dossier"
    (folder / "places").mkdir(parents=True)
    (folder / "record.json").write_bytes(b'{"title":"Recompression record"}')
    (folder / "measures.parquet").write_bytes(bytes(range(256)))
    (folder / "empty.csv").write_bytes(b"")
    (folder / "places" / "place-001-original.png").write_bytes(b"picture")
    write_seal(folder)
    return folder


def test_a_dossier_as_sealed_has_no_difference(dossier: Path) -> None:
    assert check_seal(dossier) == ()


def test_the_seal_names_every_file_but_its_own_two(dossier: Path) -> None:
    table = json.loads((dossier / SEAL).read_text())
    names = [entry["path"] for entry in table["files"]]
    assert names == ["empty.csv", "measures.parquet", "places/place-001-original.png", "record.json"]


def test_any_single_changed_byte_in_any_file_is_found(dossier: Path) -> None:
    for path in sorted(item for item in dossier.rglob("*") if item.is_file()):
        data = path.read_bytes()
        for position in range(len(data)):
            changed = bytearray(data)
            changed[position] ^= 1
            path.write_bytes(bytes(changed))
            found = check_seal(dossier)
            assert found, (path.name, position)
            name = path.relative_to(dossier).as_posix()
            assert name in {item.path for item in found}, (name, position)
            if name not in (SEAL, SUMS):
                assert found == (Difference(name, "changed"),)
        path.write_bytes(data)
    assert check_seal(dossier) == ()


@pytest.mark.parametrize("name", ["record.json", "empty.csv", "places/place-001-original.png", SEAL, SUMS])
def test_a_missing_file_is_found(dossier: Path, name: str) -> None:
    (dossier / name).unlink()
    assert check_seal(dossier) == (Difference(name, "missing"),)


@pytest.mark.parametrize("name", ["notes.txt", "places/place-002.json", "a/b/c", ".hidden"])
def test_an_extra_file_is_found(dossier: Path, name: str) -> None:
    (dossier / name).parent.mkdir(parents=True, exist_ok=True)
    (dossier / name).write_text("")
    assert check_seal(dossier) == (Difference(name, "extra"),)


def test_a_byte_added_at_the_end_is_found(dossier: Path) -> None:
    for name in ("record.json", "empty.csv", SEAL, SUMS):
        path = dossier / name
        data = path.read_bytes()
        path.write_bytes(data + b"\n")
        assert check_seal(dossier), name
        path.write_bytes(data)


def test_a_file_replaced_by_a_link_to_an_equal_file_is_found(dossier: Path, tmp_path: Path) -> None:
    shutil.move(dossier / "record.json", tmp_path / "elsewhere")
    (dossier / "record.json").symlink_to(tmp_path / "elsewhere")
    assert check_seal(dossier) == (Difference("record.json", "not a regular file"),)


def test_a_folder_replaced_by_a_link_is_found_and_not_followed(dossier: Path, tmp_path: Path) -> None:
    shutil.move(dossier / "places", tmp_path / "elsewhere")
    (dossier / "places").symlink_to(tmp_path / "elsewhere", target_is_directory=True)
    assert Difference("places", "not a regular file") in check_seal(dossier)


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="this system has no named pipes")
def test_a_named_pipe_is_found_and_not_read(dossier: Path) -> None:
    os.mkfifo(dossier / "pipe")
    assert check_seal(dossier) == (Difference("pipe", "not a regular file"),)


def test_a_folder_with_a_link_is_not_sealed(dossier: Path) -> None:
    (dossier / "link").symlink_to("record.json")
    with pytest.raises(DossierError, match="no regular file"):
        write_seal(dossier)


def test_a_folder_that_is_not_there_is_named_as_such(tmp_path: Path) -> None:
    with pytest.raises(DossierError, match="no dossier folder"):
        check_seal(tmp_path / "nowhere")


def test_sealing_twice_gives_the_same_bytes(dossier: Path) -> None:
    before = [(dossier / name).read_bytes() for name in (SEAL, SUMS)]
    write_seal(dossier)
    assert [(dossier / name).read_bytes() for name in (SEAL, SUMS)] == before


def test_every_difference_has_a_sentence() -> None:
    sentences = {Difference("a", kind).sentence for kind in ("changed", "missing", "extra", "not a regular file")}
    assert len(sentences) == 4


@pytest.mark.skipif(shutil.which("sha256sum") is None, reason="this system has no sha256sum")
def test_sha256sum_checks_the_dossier_without_this_program(dossier: Path) -> None:
    # Outside truth: GNU coreutils' sha256sum.
    (dossier / "odd \\ name\nwith a break").write_text("extra")
    write_seal(dossier)
    command = ["sha256sum", "--check", "--strict", "--quiet", SUMS]
    assert subprocess.run(command, cwd=dossier, capture_output=True, check=False).returncode == 0
    (dossier / "record.json").write_bytes(b"{}")
    assert subprocess.run(command, cwd=dossier, capture_output=True, check=False).returncode != 0


def test_checking_a_seal_loads_no_drawing_library() -> None:
    code = "import sys, safecheck.report.seal, safecheck.report.summary; print('reportlab' in sys.modules)"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "False"
