"""Entries of the record about what went in: files by what became of them, and the groups of like images."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document

__all__ = ["CountEntry", "InputCounts", "StratumEntry"]


class CountEntry(Document):
    """Files left out for one reason, and frames refused inside files of which others were assessed."""

    side: Literal["original", "delivered"]
    status: Literal["excluded", "refused"]
    reason: str
    sentence: str
    files: int
    """Whole files."""
    frames: int = 0
    """Frames of files otherwise assessed."""


class InputCounts(Document):
    """Files by what became of them; the first is the sum of the next three, on each side apart."""

    files: int
    assessed: int
    excluded: int
    refused: int
    frames_assessed: int
    frames_refused: int
    """Of files refused whole and of files otherwise assessed."""
    patients: int
    studies: int
    series: int
    patient_unknown_studies: int = 0
    """Studies without a patient identity, which stand in for patients."""
    delivered_files: int = 0
    delivered_assessed: int = 0
    delivered_excluded: int = 0
    delivered_refused: int = 0


class StratumEntry(Document):
    """A group of like images."""

    stratum: str
    modality: str
    unit: str
    patients: int
    studies: int
    series: int
    frames: int
    bytes_now: int
    lossless_bytes: int | None = None
    """Best reversible code of all its frames; None where a frame has none."""
