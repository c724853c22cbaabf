"""Entries of the record about what was held against something: limits, controls, and the run as a whole."""

from __future__ import annotations

from typing import Literal

from safecheck.documents import Document
from safecheck.record.place import Place

__all__ = ["Condition", "ControlEntry", "OutcomeEntry"]


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

    control: Literal["reversible", "repeat", "over-compressed", "planted", "promised error"]
    """The last is of candidates, where a codec promises a largest error."""
    codec: str
    frames: int
    """Frames, or rows of candidates for the promised error."""
    held: int
    not_held: int
    text: str
    """What was asked of it."""
    first_not_held: Place | None = None
    found: str = ""
    """What was found at the first place where it was not held."""


class Condition(Document):
    """One exit condition that holds."""

    code: int
    text: str
