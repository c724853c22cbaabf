"""The seal: hashes over every file of a dossier, so that a change shows against a hash kept elsewhere.

`seal.json` holds size and SHA-256 of every file but the two of the seal. `SHA256SUMS` holds the same hashes and that of
`seal.json`, in the format that `sha256sum -c` reads. What one of the two says is thereby fixed by the other.
"""

from __future__ import annotations

import hashlib
import stat
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, TypeAlias

from safecheck.documents import Document, from_json
from safecheck.errors import DocumentError, DossierError
from safecheck.record.canonical import document_bytes, sha256_of_file

__all__ = ["SEAL", "SUMS", "Difference", "Seal", "SealedFile", "check_seal", "write_seal"]

SEAL = "seal.json"
SUMS = "SHA256SUMS"

Kind: TypeAlias = Literal["changed", "missing", "extra", "not a regular file"]


class SealedFile(Document):
    """One file of the dossier."""

    path: str
    """Relative to the dossier, parts joined by '/'."""
    size_bytes: int
    sha256: str


class Seal(Document):
    """seal.json."""

    schema_version: Literal["1"] = "1"
    files: tuple[SealedFile, ...]
    """Every file but the two of the seal, sorted by path."""


@dataclass(frozen=True, slots=True)
class Difference:
    """A file that is not as it was sealed."""

    path: str
    kind: Kind

    @property
    def sentence(self) -> str:
        """In words."""
        says = {
            "changed": "differs from what was sealed",
            "missing": "was sealed and is missing",
            "extra": "is here and was not sealed",
            "not a regular file": "is a link or another thing that is no regular file",
        }
        return f"{self.path} {says[self.kind]}"


def write_seal(folder: Path) -> None:
    """Write the seal of a finished dossier, in place of one that is there.

    Raises
    ------
    DossierError
        If the folder holds a link or another thing that is no regular file.
    """
    entries: list[SealedFile] = []
    for path, regular in _members(folder):
        if not regular:
            raise DossierError("the dossier holds a link or another thing that is no regular file")
        if path not in (SEAL, SUMS):
            file = folder / path
            entries.append(SealedFile(path=path, size_bytes=file.stat().st_size, sha256=sha256_of_file(file)))
    data = document_bytes(Seal(files=tuple(entries)))
    _replace(folder / SEAL, data)
    _replace(folder / SUMS, _sums(entries, data))


def _replace(path: Path, data: bytes) -> None:
    """Write aside and rename: an interrupted write leaves no half seal."""
    aside = path.with_name(path.name + ".part")
    aside.write_bytes(data)
    aside.replace(path)


def check_seal(folder: Path) -> tuple[Difference, ...]:
    """Compare a dossier with its seal; empty where nothing differs.

    Raises
    ------
    DossierError
        If there is no such folder.
    """
    if not folder.is_dir():
        raise DossierError("there is no dossier folder of that name")
    members = dict(_members(folder))
    found = [Difference(path, "not a regular file") for path, regular in members.items() if not regular]
    missing = [Difference(name, "missing") for name in (SEAL, SUMS) if name not in members]
    if missing or found:
        return _sorted([*found, *missing])
    data = (folder / SEAL).read_bytes()
    try:
        seal = from_json(Seal, data)
    except DocumentError:
        return (Difference(SEAL, "changed"),)
    return _sorted(list(_compared(folder, set(members), seal, data)))


def _compared(folder: Path, members: set[str], seal: Seal, data: bytes) -> Iterator[Difference]:
    """Yield what differs from the seal, the seal's own two files among it."""
    sealed = {entry.path: entry for entry in seal.files}
    for path in sealed.keys() - members:
        yield Difference(path, "missing")
    for path in members - sealed.keys() - {SEAL, SUMS}:
        yield Difference(path, "extra")
    for path in sealed.keys() & members:
        file = folder / path
        if file.stat().st_size != sealed[path].size_bytes or sha256_of_file(file) != sealed[path].sha256:
            yield Difference(path, "changed")
    yield from _own_files(folder, seal, data)


def _own_files(folder: Path, seal: Seal, data: bytes) -> Iterator[Difference]:
    """Yield the seal's two files where they contradict each other; which of them changed may not show."""
    written = (folder / SUMS).read_bytes()
    if written == _sums(seal.files, data):
        return
    yield Difference(SUMS, "changed")
    if f"{hashlib.sha256(data).hexdigest()}  {SEAL}\n".encode() not in written:
        yield Difference(SEAL, "changed")


def _sorted(differences: list[Difference]) -> tuple[Difference, ...]:
    """One order, whatever the file system's."""
    return tuple(sorted(differences, key=lambda item: (item.path, item.kind)))


def _members(folder: Path) -> Iterator[tuple[str, bool]]:
    """Yield all that lies below the folder but folders, and whether it is a regular file; links are not followed."""
    for path in sorted(folder.iterdir(), key=lambda item: item.name):
        mode = path.lstat().st_mode
        if stat.S_ISDIR(mode):
            yield from ((f"{path.name}/{inner}", regular) for inner, regular in _members(path))
        else:
            yield path.name, stat.S_ISREG(mode)


def _sums(entries: tuple[SealedFile, ...] | list[SealedFile], seal: bytes) -> bytes:
    """The lines of SHA256SUMS, sorted by path."""
    hashes = {entry.path: entry.sha256 for entry in entries} | {SEAL: hashlib.sha256(seal).hexdigest()}
    return "".join(_sum_line(path, hashes[path]) for path in sorted(hashes)).encode()


def _sum_line(path: str, sha256: str) -> str:
    """A line as coreutils writes it: names with a backslash or a line break are escaped and marked."""
    escaped = path.replace("\\", "\\\\").replace("\n", "\\n").replace("\r", "\\r")
    mark = "\\" if escaped != path else ""
    return f"{mark}{sha256}  {escaped}\n"
