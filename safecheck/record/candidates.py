"""Entries of the record about the candidates, and what each took and saved in bytes."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document

__all__ = [
    "CandidateEntry",
    "CarriageEntry",
    "LedgerEntry",
    "NeighbourEntry",
    "ReversibleEntry",
    "SeriesMissedEntry",
    "SpreadEntry",
]


class SpreadEntry(Document):
    """One figure of a candidate that what was asked of the codec leaves open, over all its frames of one unit."""

    figure: Literal["ratio_bits_stored", "dial_value", "rmse_content"]
    """Column of the table of measures."""
    unit: str
    """'' for the codec's dial, which is a number of its own."""
    frames: int
    """Frames with a value."""
    median: float
    p05: float
    p95: float
    least: float
    largest: float


class SeriesMissedEntry(Document):
    """Series whose total, with one setting for all their frames, misses the ratio asked for by more than 1 %."""

    series: int
    """Series that miss it."""
    of_series: int
    """Series that were run."""
    frames: int
    """Frames of the series that miss it."""
    ratio_least: float
    """Least of the totals of those series, on the basis asked."""
    ratio_largest: float
    """Largest of them."""


class CandidateEntry(Document):
    """A candidate of the run, or the delivered copies."""

    candidate: str
    codec: str
    role: Literal["candidate", "delivered"]
    status: Literal["proposed", "context"]
    asked: Literal["ratio per frame", "ratio per series", "setting", ""] = ""
    """What was asked of the codec; '' for the delivered copies."""
    ratio_asked: float | None = None
    basis: str = ""
    dial: str = ""
    """Setting by which the codec's size is set; '' where no frame was run with it."""
    archive_can_write: bool
    note: str = ""
    """E.g. that it is an analysis codec, or that sources were second generation."""
    frames: int
    reached: dict[str, int]
    """Frames by what `reached` says."""
    spread: tuple[SpreadEntry, ...] = ()
    """What was not fixed by what was asked: error and dial by ratio, ratio and error by setting."""
    series_missed: SeriesMissedEntry | None = None
    """Where a ratio per series was asked and some series miss it in all."""


class NeighbourEntry(Document):
    """The setting on the other side of the ratio asked for, where the dial is a whole number."""

    frames: int
    """Frames that the two settings bracket."""
    dial_least: float
    dial_largest: float
    code_bytes: int
    ratio_bits_stored: float
    """Of the totals over those frames."""
    ratio_bits_stored_least: float
    ratio_bits_stored_median: float
    ratio_bits_stored_largest: float


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
    ratio_bits_stored_p05: float | None = None
    ratio_bits_stored_p95: float | None = None
    dial_least: float | None = None
    """Least value of the codec's dial."""
    dial_largest: float | None = None
    neighbour: NeighbourEntry | None = None


class ReversibleEntry(Document):
    """A reversible codec in one stratum, on frames that carry the full controls and that it takes."""

    stratum: str
    codec: str
    frames: int
    bits_stored_bytes: float
    code_bytes: int
    ratio_bits_stored: float
    smallest_bytes: int | None = None
    """Of the smallest reversible codes of the same frames, as the ledger counts them."""


class CarriageEntry(Document):
    """How a codec carries samples of one form, where its code stream says other than the image."""

    codec: str
    bits_stored: int
    signed: bool
    code_precision: int
    """Bits a sample that the code stream declares."""
    sample_offset: int
    """Stored values added before coding."""
    sample_scale: float
    """Factor before coding."""
    clipped_on_reading: bool = False
    """Whether values read beyond the range of the bits stored were brought to the nearest inside."""
    rows: int
    """Rows of the table of measures."""
