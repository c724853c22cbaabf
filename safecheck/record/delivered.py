"""Entries of the record about the copies that the archive delivered."""

from __future__ import annotations

from safecheck.documents import Document
from safecheck.record.place import Place

__all__ = ["DeliveredEntry", "DeliveredPairEntry", "ExpectationEntry"]


class ExpectationEntry(Document):
    """One attribute of a delivered copy: as found, and what the standard asks."""

    attribute: str
    asked: str
    found: dict[str, int]
    """Copies by what was found, reduced to known terms."""
    as_asked: int
    not_as_asked: int


class DeliveredPairEntry(Document):
    """An original and its delivered copy."""

    original: Place
    how: str
    """How they were matched."""
    ratio_header: str
    """Ratio that the copy's header declares, or ''."""
    ratio_bits_allocated: float
    ratio_bits_stored: float
    max_frame: float
    rmse_frame: float
    unit: str


class DeliveredEntry(Document):
    """The copies that the archive delivered."""

    pairs: int
    """Matched by header."""
    pairs_measured: int = 0
    """Of them, with at least one frame measured."""
    pairs_unchanged: int = 0
    """Of them, with every sample equal: the headers are not held against what the standard asks of a lossy copy."""
    pairs_out_of_scope: int = 0
    """Of them, whose original the plan's scope leaves out."""
    originals_without_copy: int
    copies_without_original: int
    matched_by: dict[str, int]
    expectations: tuple[ExpectationEntry, ...]
    shown: tuple[DeliveredPairEntry, ...]
    """Up to 30 pairs, largest error first; all stand in the tables."""
