"""The canonical record: what the run found, as a document that is hashed, redrawn and compared.

No dates, host names or durations (they stand in run.json), no identifiers, no figure without its unit. A value that
would be infinite or is not a number is null, with its reason beside it.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from safecheck.documents import Document
from safecheck.record.candidates import CandidateEntry, CarriageEntry, LedgerEntry, ReversibleEntry
from safecheck.record.delivered import DeliveredEntry
from safecheck.record.equal_damage import EqualDamageEntry
from safecheck.record.figures import FigureEntry, RegionEntry
from safecheck.record.inputs import CountEntry, InputCounts, StratumEntry
from safecheck.record.outcomes import Condition, ControlEntry, OutcomeEntry
from safecheck.record.worst import WorstPlaceEntry, WorstStudyEntry

__all__ = ["SCHEMA_VERSION", "CodecCheckEntry", "PlanEntry", "RecordDocument", "TableEntry"]

SCHEMA_VERSION = "1"


class PlanEntry(Document):
    """The plan as read."""

    source: Literal["file", "command line"]
    sha256: str
    content: dict[str, Any]
    """The plan's keys and values."""
    regions_sha256: str = ""
    """Of the region file, segmentation or structure set, or ''."""


class CodecCheckEntry(Document):
    """A line of the selftest."""

    codec: str
    library: str
    version: str
    available: bool
    reversible_exact: bool | None = None
    """None for codecs that are not reversible."""
    detail: str = ""


class TableEntry(Document):
    """A table of the dossier."""

    table: str
    file: str
    sha256: str
    rows: int


class RecordDocument(Document):
    """record.json."""

    schema_version: Literal["1"]
    title: str
    plan: PlanEntry
    key_id: str
    """Short hash of the site key: the same key is needed to recompute pseudonyms."""
    versions: dict[str, str]
    selftest: tuple[CodecCheckEntry, ...]
    inputs: InputCounts
    left_out: tuple[CountEntry, ...]
    strata: tuple[StratumEntry, ...]
    candidates: tuple[CandidateEntry, ...]
    ledger: tuple[LedgerEntry, ...]
    reversible: tuple[ReversibleEntry, ...] = ()
    """Every reversible codec on the frames that carry the full controls."""
    carriage: tuple[CarriageEntry, ...] = ()
    """Where the precision of a code stream is not that of the image, or samples were offset or scaled."""
    figures: tuple[FigureEntry, ...]
    equal_damage: tuple[EqualDamageEntry, ...] = ()
    """At which ratio each other codec does the damage of the reference candidate; empty with one codec."""
    outcomes: tuple[OutcomeEntry, ...]
    outcomes_text: str
    """'no limits declared' or a one-line count of outcomes."""
    controls: tuple[ControlEntry, ...]
    controls_held: bool
    worst_places: tuple[WorstPlaceEntry, ...]
    worst_studies: tuple[WorstStudyEntry, ...] = ()
    regions: tuple[RegionEntry, ...]
    regions_without_frame: tuple[str, ...] = ()
    """Labels of regions that lie on no frame assessed."""
    delivered: DeliveredEntry | None = None
    content_rules: dict[str, int]
    """Frames by the content rule that was applied."""
    content_reasons: dict[str, int] = Field(default_factory=dict)
    """Frames by why the modality's own rule gave way."""
    notes: dict[str, int]
    """What preflight noticed and set right, with the number of frames."""
    cautions: tuple[str, ...]
    conditions: tuple[Condition, ...]
    """Exit conditions that hold, in order of precedence; empty for 0."""
    exit_code: int
    exit_text: str
    tables: tuple[TableEntry, ...]
