"""Entries of the record about where a candidate moved values most."""

from __future__ import annotations

from safecheck.documents import Document
from safecheck.record.place import Place

__all__ = ["WorstPlaceEntry", "WorstStudyEntry"]


class WorstPlaceEntry(Document):
    """A place where a candidate moved values most."""

    candidate: str
    stratum: str
    rank: int
    measure: str
    unit: str
    value: float
    place: Place
    rows: int
    columns: int
    """Size of the frame, for the position sketch."""
    size_rows: int
    size_columns: int
    """Size of the patch."""
    in_region: str = ""
    """Label of a region that it touches, or ''."""
    crop: str = ""
    """Name of the crop in places/, or ''."""
    may_show_text: bool = False


class WorstStudyEntry(Document):
    """A study of those that a candidate moved most, with its worst series and frame."""

    candidate: str
    stratum: str
    rank: int
    measure: str
    unit: str
    frames: int
    series: int
    """Series of the study in this stratum."""
    median: float
    """Over the frames of the study."""
    largest: float
    worst: Place
    """Its worst frame, which lies in its worst series."""
    worst_series_median: float
    """Over the frames of that series."""
