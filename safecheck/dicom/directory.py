"""A DICOMDIR: the files that it lists."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import PurePosixPath

from safecheck.dicom.elements import readable_items, words
from safecheck.dicom.header import Header

__all__ = ["Listing", "listing_of"]


@dataclass(frozen=True, slots=True)
class Listing:
    """Files that a directory lists."""

    files: tuple[PurePosixPath, ...]
    """Below the folder of the directory, each once: never written."""
    outside: int
    """Entries that lead out of that folder; they are not followed."""


def listing_of(header: Header) -> Listing:
    """Files listed in a DICOMDIR (PS3.10 8.6, PS3.3 F.3)."""
    files: dict[PurePosixPath, None] = {}
    outside = 0
    for record in readable_items(header.dataset, "DirectoryRecordSequence"):
        parts = words(record, "ReferencedFileID")
        if not parts:
            continue
        if any(part in ("", ".", "..") or "/" in part or "\\" in part or "\0" in part for part in parts):
            outside += 1
        else:
            files[PurePosixPath(*parts)] = None
    return Listing(tuple(files), outside)
