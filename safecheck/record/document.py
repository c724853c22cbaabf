"""The canonical record: what the run found, as a document that is hashed, redrawn and compared.

No dates, host names or durations (they stand in run.json), no identifiers, no figure without its unit. A value that
would be infinite or is not a number is null, with its reason beside it.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from safecheck.documents import Document

__all__ = [
    "SCHEMA_VERSION",
    "CandidateEntry",
    "CodecCheckEntry",
    "Condition",
    "ControlEntry",
    "CountEntry",
    "DeliveredEntry",
    "DeliveredPairEntry",
    "ExpectationEntry",
    "FigureEntry",
    "InputCounts",
    "LedgerEntry",
    "OutcomeEntry",
    "Place",
    "PlanEntry",
    "RecordDocument",
    "RegionEntry",
    "StratumEntry",
    "TableEntry",
    "WorstPlaceEntry",
    "WorstStudyEntry",
]

SCHEMA_VERSION = "1"


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


class FigureEntry(Document):
    """One measure of one candidate in one stratum, over frames: the middle never without its tail."""

    candidate: str
    stratum: str
    measure: str
    """Name in the table of measures."""
    window: str = ""
    """Window with its setting, for window measures: frames of another setting stand in another entry."""
    unit: str
    worse: Literal["higher", "lower"]
    """Which way the change is larger; of signed measures the size counts."""
    frames: int
    """Frames with a value."""
    without_value: int = 0
    reason: str = ""
    """Why frames have no value, where some have none."""
    median: float | None = None
    p05: float | None = None
    p95: float | None = None
    least: float | None = None
    largest: float | None = None
    worst: Place | None = None
    """Where the worst value was found."""


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


class OutcomeEntry(Document):
    """One limit held against one candidate."""

    limit: str
    measure: str
    unit: str
    side: Literal["at most", "at least"]
    bound: float
    scope: str
    """In words: region, role, window, modality, body part, or 'every frame'."""
    declared_by: str
    declared_on: str
    candidate: str
    status: Literal["proposed", "context"]
    outcome: Literal["within declared limits", "outside declared limits", "not evaluated"]
    reason: str = ""
    """Why not evaluated, or how many values were not."""
    values: int
    values_outside: int
    values_missing: int
    studies: int
    """In scope, whether or not they gave a value."""
    studies_within: int
    studies_not_evaluated: int = 0
    """In scope, without any value."""
    frames_not_run: int = 0
    """In scope, not taken by the codec."""
    patients: int
    patients_within: int
    patients_not_evaluated: int = 0
    """In scope, without any value."""
    upper_bound_percent: float | None = None
    """Exact one-sided 95 % bound on the share of patients with an exceedance; None without a random sample."""
    bound_text: str
    """The bound in words, or 'no bound: not a random sample'."""
    worst_value: float | None = None
    worst: Place | None = None
    worst_region: str = ""
    """Label of the region of the worst value, for region measures."""
    over_compressed_also_within: bool | None = None
    """Of the candidate's own codec, on the frames that carry the control; True: the limit does not tell it apart."""


class ControlEntry(Document):
    """One kind of control, for one codec where it applies."""

    control: Literal["reversible", "repeat", "over-compressed", "planted"]
    codec: str
    frames: int
    held: int
    not_held: int
    text: str
    """What was asked of it."""
    first_not_held: Place | None = None
    found: str = ""
    """What was found at the first place where it was not held."""


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


class RegionEntry(Document):
    """One region under one candidate, over the frames it covers."""

    candidate: str
    region: str
    label: str
    role: str
    unit: str
    frames: int
    area_mm2: float | None = None
    """Median over frames, as are the means, SDs, CNR and noise removed."""
    area_pixels: float
    rmse_median: float | None = None
    rmse_largest: float | None = None
    bias_median: float | None = None
    bias_largest_absolute: float | None = None
    max_largest: float | None = None
    mean_before: float | None = None
    mean_after: float | None = None
    sd_before: float | None = None
    sd_after: float | None = None
    background: str = ""
    contrast_before: float | None = None
    """Median of the mean of the region less that of its background, before."""
    contrast_after: float | None = None
    """The same after."""
    contrast_kept_percent: float | None = None
    """Median over frames of the contrast after by the contrast before."""
    contrast_kept_percent_p05: float | None = None
    """5th percentile of it over frames."""
    contrast_kept_percent_least: float | None = None
    """Least of it over frames."""
    cnr_before: float | None = None
    cnr_after: float | None = None
    cnr_after_least: float | None = None
    """Least over frames."""
    noise_removed_percent: float | None = None
    noise_removed_percent_largest: float | None = None
    """Largest over frames."""
    worst: Place | None = None
    """Where the largest error was found."""


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


class Condition(Document):
    """One exit condition that holds."""

    code: int
    text: str


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
    figures: tuple[FigureEntry, ...]
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
