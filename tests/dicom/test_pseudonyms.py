"""Pseudonyms and the site key."""

from __future__ import annotations

import errno
import hmac
import os
from pathlib import Path

import pytest

from safecheck.dicom import pseudonyms
from safecheck.dicom.pseudonyms import KEY_BYTES, Pseudonyms, default_key_path, load_or_make_key, short_form
from safecheck.errors import UsageError

KEY = bytes(range(32))


def test_short_form_writes_the_first_fifty_bits_in_base_32() -> None:
    # Computed from the stated definition: Crockford's alphabet, most significant bits first.
    assert short_form(b"\xff" * 32) == "ZZZZZ-ZZZZZ"
    assert short_form(bytes(32)) == "00000-00000"
    assert short_form(bytes.fromhex("00443214c74254b6") + bytes(24)) == "01234-56789"


def test_name_is_the_keyed_hash_of_kind_and_value() -> None:
    digest = hmac.digest(KEY, b"patient\0Doe^Jane", "sha256")  # RFC 2104 by the standard library
    assert Pseudonyms(KEY).name("patient", "Doe^Jane") == f"P-{short_form(digest)}"


def test_same_value_takes_the_same_name_and_another_kind_or_key_another() -> None:
    names = Pseudonyms(KEY)
    first = names.name("study", "1.2.3")
    assert Pseudonyms(KEY).name("study", "1.2.3") == first
    assert names.name("series", "1.2.3")[2:] != first[2:]
    assert Pseudonyms(KEY[::-1]).name("study", "1.2.3") != first


def test_two_values_under_one_name_stop_the_run(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(pseudonyms, "short_form", lambda _: "00000-00000")
    names = Pseudonyms(KEY)
    names.name("patient", "a")
    names.name("patient", "a")
    with pytest.raises(UsageError, match="two of kind 'patient' share a pseudonym"):
        names.name("patient", "b")


def test_a_short_key_is_no_key() -> None:
    with pytest.raises(ValueError, match="at least 16 bytes"):
        Pseudonyms(b"short")


def test_text_that_is_no_unicode_still_takes_a_name() -> None:
    assert Pseudonyms(KEY).name("patient", "\udcff").startswith("P-")


def test_key_id_names_the_key_without_telling_it() -> None:
    one, other = Pseudonyms(KEY).key_id, Pseudonyms(KEY[::-1]).key_id
    assert one == Pseudonyms(KEY).key_id
    assert one != other


def test_first_use_makes_a_private_key_and_later_use_reads_it(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    key = load_or_make_key(None)
    assert len(key) == KEY_BYTES
    assert load_or_make_key(None) == key
    assert default_key_path().stat().st_mode & 0o777 == 0o600
    assert [each.name for each in default_key_path().parent.iterdir()] == ["site.key"]


def test_without_xdg_the_key_lies_in_the_home_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("XDG_CONFIG_HOME", raising=False)
    monkeypatch.setenv("HOME", str(tmp_path))
    assert default_key_path() == tmp_path / ".config" / "safecheck" / "site.key"


def test_a_named_key_file_is_its_own_key(tmp_path: Path) -> None:
    one, other = load_or_make_key(tmp_path / "one"), load_or_make_key(tmp_path / "other")
    assert one != other


@pytest.mark.skipif(os.name != "posix", reason="permissions of other systems are not looked at")
@pytest.mark.parametrize("mode", [0o640, 0o604, 0o660])
def test_a_key_that_others_can_read_is_refused(tmp_path: Path, mode: int) -> None:
    load_or_make_key(tmp_path / "key")
    (tmp_path / "key").chmod(mode)
    with pytest.raises(UsageError, match="can be read by others"):
        load_or_make_key(tmp_path / "key")


@pytest.mark.parametrize("text", ["", "not hexadecimal", "00" * 31, "00" * 33], ids=["empty", "text", "short", "long"])
def test_a_file_that_is_no_key_is_refused(tmp_path: Path, text: str) -> None:
    (tmp_path / "key").write_text(text)
    (tmp_path / "key").chmod(0o600)
    with pytest.raises(UsageError, match="expected 64 hexadecimal digits"):
        load_or_make_key(tmp_path / "key")


def test_a_key_that_cannot_be_made_is_said_without_its_path(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(UsageError, match="cannot be read or made") as caught:
        load_or_make_key(tmp_path / "file" / "CANARY")
    assert "CANARY" not in str(caught.value)


def test_a_first_run_that_comes_second_takes_the_key_of_the_other(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    place = tmp_path / "key"
    key = load_or_make_key(place)
    seen = iter([False])
    real = Path.exists
    monkeypatch.setattr(Path, "exists", lambda path: next(seen, None) if path == place else real(path))
    assert load_or_make_key(place) == key


@pytest.mark.parametrize("fault", [errno.EPERM, errno.EOPNOTSUPP, errno.ENOSYS], ids=["FAT", "SMB", "no such call"])
def test_where_links_are_not_known_a_key_is_made_all_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, fault: int
) -> None:
    def refuse(*_: object) -> None:
        raise OSError(fault, os.strerror(fault))

    monkeypatch.setattr(os, "link", refuse)
    key = load_or_make_key(tmp_path / "key")
    assert len(key) == KEY_BYTES
    assert load_or_make_key(tmp_path / "key") == key
    assert [each.name for each in tmp_path.iterdir()] == ["key"]
    assert (tmp_path / "key").stat().st_mode & 0o777 == 0o600


def test_where_links_are_not_known_the_key_that_came_first_stays(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    others = "ab" * KEY_BYTES

    def come_second(_: Path, place: Path) -> None:
        place.write_text(others)
        place.chmod(0o600)
        raise OSError(errno.EPERM, os.strerror(errno.EPERM))

    monkeypatch.setattr(os, "link", come_second)
    assert load_or_make_key(tmp_path / "key") == bytes.fromhex(others)
