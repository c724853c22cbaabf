"""A source of bytes, and the instance found in it: all that later stages need to read its frames again."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from safecheck.frames import Origin

__all__ = ["Instance", "Source"]


@dataclass(frozen=True, slots=True, order=True)
class Source:
    """Where bytes lie: a file, or a member of a zip archive. Never written to any output."""

    path: Path
    member: str = ""
    """Name inside the archive, or '' for the file itself."""


@dataclass(frozen=True, slots=True)
class Instance:
    """One DICOM image instance that may be assessed, or that was delivered; under pseudonyms, but for its source."""

    source: Source
    input: str
    """Pseudonym of the file, by its content: the same wherever the file lies."""
    patient: str
    study: str
    series: str
    instance: str
    series_number: int | None
    instance_number: int | None
    frames: int
    """Number of frames declared, at least 1."""
    object_class: str
    """Name of the SOP class."""
    rows: int
    columns: int
    bits_allocated: int
    bits_stored: int
    photometric: str
    """As declared in the header."""
    size_bytes: int
    """Size of the file or member."""
    pixel_bytes: int
    """Size of the pixel data element's code or samples, as it lies there."""
    derived: bool
    """Image Type begins with DERIVED."""
    origin: Origin
    """With `source_bytes` and `slice_position_mm` of the instance; the reader sets those of each frame."""
    uid: str
    """Raw SOP Instance UID, for matching only: never written."""
    frame_of_reference: str = ""
    """Pseudonym, or '' where the file names none."""
    source_uids: tuple[str, ...] = ()
    """Raw UIDs of the Source Image Sequence, for matching only: never written."""
