"""One file looked at: an instance, or left out by name of a reason."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import PurePosixPath
from typing import BinaryIO, Literal

from safecheck.dicom.directory import Listing, listing_of
from safecheck.dicom.facts import Facts, facts_of
from safecheck.dicom.header import Header, read_header
from safecheck.dicom.instance import Instance, Source
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.rules import Include, excluded_by
from safecheck.dicom.syntaxes import Coding
from safecheck.errors import InputExcluded, InputRefused
from safecheck.wording import REASONS

__all__ = ["Content", "Examined", "LeftOut", "examine", "leave_out"]


@dataclass(frozen=True, slots=True)
class Content:
    """Bytes of one input, and under which name."""

    source: Source
    input: str
    """Pseudonym by content."""
    stream: BinaryIO
    size_bytes: int
    holds: Callable[[PurePosixPath], bool]
    """Whether a file lies below the folder of this one, for a DICOMDIR."""


@dataclass(frozen=True, slots=True)
class LeftOut:
    """An input that is not assessed, and why."""

    source: Source
    """Never written."""
    input: str
    """Pseudonym of the file, by its content; by its place for what was not read."""
    status: Literal["excluded", "refused"]
    reason: str
    """Code of `safecheck.wording.REASONS`."""
    detail: str
    """What was found, without identifiers."""
    size_bytes: int
    facts: Facts | None = None
    """Of the header, where one was read. Its `uid` and `source_uids` are never written."""


@dataclass(frozen=True, slots=True)
class Examined:
    """Either an instance or left out."""

    facts: Facts | None
    instance: Instance | None = None
    left_out: LeftOut | None = None
    listing: Listing | None = None
    """Of a DICOMDIR."""


def leave_out(
    source: Source, name: str, reason: str, detail: str, size_bytes: int, facts: Facts | None = None
) -> LeftOut:
    """Leave an input out by a reason, whose status the words decide."""
    return LeftOut(source, name, REASONS[reason].status, reason, detail, size_bytes, facts)


def examine(content: Content, pseudonyms: Pseudonyms, include: Include) -> Examined:
    """Look at one file: its header, the rules, and what an assessment cannot do without.

    Parameters
    ----------
    content
        Bytes and name.
    pseudonyms
        Names under the site key.
    include
        What is assessed only when asked for.

    Returns
    -------
    Examined
        Never an exception for a malformed file: that is a reason.
    """
    try:
        header = read_header(content.stream)
    except (InputExcluded, InputRefused) as left:
        return Examined(None, left_out=_left_out(content, left.reason, left.detail, None))
    facts = facts_of(header, content.input, pseudonyms)
    reason = excluded_by(header, facts, include) or _doubt(header, facts)
    if reason is None:
        return Examined(facts, instance=_instance(content, facts))
    if reason[0] == "dicomdir":
        listing = listing_of(header)
        return Examined(facts, left_out=_left_out(content, *_listed(content, listing), facts), listing=listing)
    return Examined(facts, left_out=_left_out(content, *reason, facts))


def _left_out(content: Content, reason: str, detail: str, facts: Facts | None) -> LeftOut:
    return leave_out(content.source, content.input, reason, detail, content.size_bytes, facts)


def _listed(content: Content, listing: Listing) -> tuple[str, str]:
    missing = sum(not content.holds(each) for each in listing.files)
    return "dicomdir", f"lists {len(listing.files)} files, {missing} missing, {listing.outside} outside its folder"


def _doubt(header: Header, facts: Facts) -> tuple[str, str] | None:
    """(reason code, detail) where the header or the pixel element forbids any further reading."""
    if header.cut:
        return "truncated", "the file ends before its header does"
    if not header.syntax_declared:
        return "header", "Transfer Syntax UID is missing"
    if header.syntax.coding in (Coding.UNKNOWN, Coding.REFERENCED):
        return "syntax", header.syntax.name
    if header.pixels and header.pixels.floating:
        return "bits", "floating-point pixel data"
    if missing := _missing(facts):
        return "header", f"missing or malformed: {', '.join(missing)}"
    if header.pixels and not header.pixels.complete:
        return "truncated", "the file ends before the pixel data does"
    return None


def _missing(facts: Facts) -> list[str]:
    """Names of the attributes without which no frame can be read."""
    numbers = {
        "Rows": facts.rows,
        "Columns": facts.columns,
        "Bits Allocated": facts.bits_allocated,
        "Bits Stored": facts.bits_stored,
        "Number of Frames": facts.frames,
    }
    names = [name for name, number in numbers.items() if number is None or number < 1]
    return names if facts.photometric else [*names, "Photometric Interpretation"]


def _instance(content: Content, facts: Facts) -> Instance:
    numbers = (facts.frames, facts.rows, facts.columns, facts.bits_allocated, facts.bits_stored)
    frames, rows, columns, allocated, stored = (number or 0 for number in numbers)
    return Instance(
        source=content.source,
        input=content.input,
        patient=facts.patient,
        study=facts.study,
        series=facts.series,
        instance=facts.instance,
        series_number=facts.series_number,
        instance_number=facts.instance_number,
        frames=frames,
        object_class=facts.object_class,
        rows=rows,
        columns=columns,
        bits_allocated=allocated,
        bits_stored=stored,
        photometric=facts.photometric,
        size_bytes=content.size_bytes,
        pixel_bytes=facts.pixel_bytes or 0,
        derived=bool(facts.derived),
        origin=facts.origin,
        frame_of_reference=facts.frame_of_reference,
        uid=facts.uid,
        source_uids=facts.source_uids,
    )
