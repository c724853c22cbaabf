"""Members of a zip archive, each read in memory and none written out."""

from __future__ import annotations

import zipfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath

from safecheck.dicom.source import read_member
from safecheck.errors import InputRefused

__all__ = ["Member", "begins_archive", "member_names", "read_members"]


@dataclass(frozen=True, slots=True)
class Member:
    """One member: its content, or why it was not taken in."""

    name: str
    """Name in the archive: never written."""
    content: bytes
    refused: tuple[str, str] | None = None
    """(reason code, detail) instead of content."""
    size_bytes: int = 0
    """Size as the archive declares it."""
    mark: str = ""
    """Checksum and sizes from the archive's directory, by which a member not taken in is named."""


def begins_archive(start: bytes) -> bool:
    """Whether the first 132 bytes are those of a zip archive; a DICOM preamble may imitate one, and goes first."""
    return start[:4] in (b"PK\x03\x04", b"PK\x05\x06") and start[128:132] != b"DICM"


def read_members(path: Path) -> Iterator[Member]:
    """Read each member of an archive in turn, in the order of their names; folders are skipped.

    Raises
    ------
    InputRefused
        'unreadable' if the archive itself is damaged, 'archive-bomb' if its members overlap.
    """
    try:
        with zipfile.ZipFile(path) as archive:
            if sum(each.compress_size for each in archive.infolist()) > path.stat().st_size:
                raise InputRefused("archive-bomb", "members that overlap")
            for member in sorted(archive.infolist(), key=lambda each: each.filename):
                if not member.is_dir():
                    yield _read(archive, member)
    except (OSError, zipfile.BadZipFile, NotImplementedError, ValueError) as error:
        raise InputRefused("unreadable", f"a damaged archive ({type(error).__name__})") from None


def _read(archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> Member:
    mark = f"{member.CRC:08x} {member.file_size} {member.compress_size}"
    try:
        _check_name(archive, member)
        content = read_member(archive, member)
    except InputRefused as refusal:
        return Member(member.filename, b"", (refusal.reason, refusal.detail), member.file_size, mark)
    return Member(member.filename, content, None, member.file_size, mark)


def _check_name(archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> None:
    """Refuse names that would lead out of a folder on any system, and all but the last of equal names."""
    name = member.filename
    windows = PureWindowsPath(name)
    parts = {*PurePosixPath(name).parts, *windows.parts}
    if ".." in parts or name.startswith("/") or windows.drive or windows.root:
        raise InputRefused("archive-path", "its name leads out of the archive")
    if archive.getinfo(name) is not member:
        raise InputRefused("archive-path", "another member of the same name comes after it")


def member_names(path: Path) -> frozenset[str]:
    """Names of all members of an archive."""
    with zipfile.ZipFile(path) as archive:
        return frozenset(archive.namelist())
