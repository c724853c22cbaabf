"""Where something was found."""

from __future__ import annotations

from safecheck.documents import Document

__all__ = ["Place"]


class Place(Document):
    """Where something was found, under pseudonyms."""

    patient: str
    study: str
    series: str
    instance: str
    series_number: int | None = None
    instance_number: int | None = None
    frame: int
    slice_position_mm: float | None = None
    row: int | None = None
    column: int | None = None
