"""Entries of the record about the candidates, and what each took and saved in bytes."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document

__all__ = ["CandidateEntry", "LedgerEntry"]


class CandidateEntry(Document):
    """A candidate of the run, or the delivered copies."""

    candidate: str
    codec: str
    role: Literal["candidate", "delivered"]
    status: Literal["proposed", "context"]
    ratio_asked: float | None = None
    basis: str = ""
    archive_can_write: bool
    note: str = ""
    """E.g. that it is an analysis codec, or that sources were second generation."""
    frames: int
    reached: dict[str, int]
    """Frames by what `reached` says."""


class LedgerEntry(Document):
    """Bytes and ratios of one candidate in one stratum: totals over frames, and the spread of ratios."""

    candidate: str
    stratum: str
    frames: int
    bits_stored_bytes: float
    bits_allocated_bytes: float
    content_bytes: float | None = None
    lossless_bytes: int | None = None
    lossless_codecs: dict[str, int]
    """Frames by the codec of the smallest reversible code."""
    bytes_now: int
    code_bytes: int
    ratio_bits_stored: float
    ratio_bits_allocated: float
    ratio_content: float | None = None
    times_smaller_than_lossless: float | None = None
    times_smaller_than_now: float
    bits_per_pixel: float
    ratio_bits_stored_least: float
    ratio_bits_stored_median: float
    ratio_bits_stored_largest: float
