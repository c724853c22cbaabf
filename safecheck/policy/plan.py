"""The plan: scope, candidates, regions, limits and context, declared before the run."""

from __future__ import annotations

import datetime
import hashlib
import math
from typing import Annotated, Literal, TypeAlias

import rfc8785
from pydantic import BeforeValidator, Field, model_validator

from safecheck.documents import Document
from safecheck.frames import SizeBasis

__all__ = [
    "TO_FILL_IN",
    "Allowed",
    "Asked",
    "CandidatePlan",
    "Change",
    "Claim",
    "ControlPlan",
    "LimitPlan",
    "Plan",
    "RegionPlan",
    "SamplePlan",
    "Scope",
    "WindowPlan",
    "asked_of",
    "plan_hash",
]

TO_FILL_IN = "to be filled in"
"""How a draft marks what only a person can say; a plan that still says so is refused."""

Text = Annotated[str, Field(min_length=1, max_length=200)]


def _scalar(value: object) -> object:
    """Say in one sentence what no setting can be; the union of kinds says it once for each."""
    if not isinstance(value, str | int | float):
        kind = "a list" if isinstance(value, list) else "a table" if isinstance(value, dict) else "empty"
        # A TypeError would not reach the one who wrote the plan: pydantic takes a ValueError for a fault of the value.
        raise ValueError(f"is {kind}, expected a text, a number, true or false")  # noqa: TRY004
    if isinstance(value, float) and not math.isfinite(value):
        raise ValueError(f"is {'not a number' if math.isnan(value) else 'infinite'}, expected a finite number")
    return value


Setting: TypeAlias = Annotated[str | int | float | bool, BeforeValidator(_scalar)]
"""A setting's value: a JSON scalar."""


class Change(Document):
    """What is to be decided, by whom it was declared, and when."""

    title: Text
    """One line for the head of the record."""
    reference: str = ""
    """Reference of the change record, as the site writes it."""
    declared_by: Text
    """Role, not name, of who declared the plan."""
    declared_on: datetime.date | None
    """None only for candidates given on the command line, of which no plan was declared."""
    compressed_copy: Text
    """Which copy would be recompressed, e.g. 'archive copy'."""
    compressed_when: Text
    """When, e.g. '90 days after the report'."""

    @model_validator(mode="after")
    def _is_filled_in(self) -> Change:
        """A draft is no declaration."""
        for name in ("title", "declared_by", "compressed_copy", "compressed_when"):
            if str(getattr(self, name)).startswith(TO_FILL_IN):
                raise ValueError(f"{name} is still {TO_FILL_IN}")
        return self


class SamplePlan(Document):
    """How the studies assessed were drawn."""

    drawn: Literal["random", "consecutive", "chosen"]
    """Only a random sample carries a bound on studies not assessed."""
    source: str = ""
    """From which studies, e.g. 'CT head 2025, main site'."""


Asked: TypeAlias = Literal["ratio per frame", "ratio per series", "setting"]
"""What a candidate asks of its codec."""


def asked_of(ratio: float | None, per: Literal["frame", "series"]) -> Asked:
    """Say what a candidate asks of its codec."""
    if ratio is None:
        return "setting"
    return "ratio per series" if per == "series" else "ratio per frame"


class CandidatePlan(Document):
    """One codec at one asked ratio, or at one encoder setting."""

    codec: Text
    ratio: Annotated[float | None, Field(gt=1, le=1000)] = None
    """Ratio asked for on `basis`; without it the codec's dial is among `settings`, and the ratio follows from it."""
    per: Literal["frame", "series"] = "frame"
    """Whether each frame is brought to the ratio, or one setting, found on the middle frame of a series, serves it."""
    basis: SizeBasis = SizeBasis.BITS_STORED
    status: Literal["proposed", "context"] = "proposed"
    """Only proposed candidates decide the exit code."""
    settings: dict[str, Setting] = Field(default_factory=dict)
    """The codec's other settings, e.g. size = 16 for tiled; without a ratio its dial too, e.g. quality = 85."""
    outside: Literal["keep", "flatten"] = "keep"
    """Whether what is neither content nor padding is coded like the rest, or set to one value before coding."""

    @model_validator(mode="after")
    def _of_a_ratio(self) -> CandidatePlan:
        """Two keys say how a ratio is meant, and nothing without one."""
        if self.ratio is None and self.per == "series":
            raise ValueError("per = 'series' is expected with a ratio; a setting serves every frame as it is")
        if self.ratio is None and self.basis is not SizeBasis.BITS_STORED:
            raise ValueError("basis is expected with a ratio, and there is none")
        return self

    @property
    def name(self) -> str:
        """How outputs name it: codec, ratio, basis where it is not bits-stored, what else was asked."""
        basis = "" if self.basis is SizeBasis.BITS_STORED else f" of {self.basis}"
        per = " per series" if self.per == "series" else ""
        ratio = "" if self.ratio is None else f" {self.ratio:g}:1{basis}{per}"
        settings = "".join(f", {key} {_in_name(value)}" for key, value in sorted(self.settings.items()))
        outside = ", outside flattened" if self.outside == "flatten" else ""
        return f"{self.codec}{ratio}{settings}{outside}"


def _in_name(value: str | int | float | bool) -> str:
    """A setting as names hold it: canonical JSON knows one number 8, which a plan may write 8 or 8.0."""
    return f"{value:.12g}" if isinstance(value, float) else str(value)


class WindowPlan(Document):
    """A display window on which changes are measured."""

    label: Text
    centre: float
    width: Annotated[float, Field(gt=0)]
    unit: Text
    """Unit of centre and width; frames of another unit do not take the window."""
    function: Literal["LINEAR", "LINEAR_EXACT", "SIGMOID"] = "LINEAR"
    modality: str = ""
    """Only for this modality, or '' for all of that unit."""

    @model_validator(mode="after")
    def _width_of_linear(self) -> WindowPlan:
        """PS3.3 C.11.2: a LINEAR window is at least 1 wide."""
        if self.function == "LINEAR" and self.width < 1:
            raise ValueError(f"a LINEAR window is at least 1 wide, found {self.width:g}")
        return self


class RegionPlan(Document):
    """Where the drawn regions are."""

    file: Text
    """Region file, SEG or RT Structure Set; a relative path counts from the plan's folder."""


class LimitPlan(Document):
    """A bound on a measure."""

    name: Text
    measure: Text
    """Name from the table of measures, e.g. 'rmse_content'."""
    unit: Text
    """Unit of the bound; values in another unit are not held against it."""
    at_most: float | None = None
    at_least: float | None = None
    region: str = ""
    """Label of the region, for region measures; '' for all."""
    region_role: str = ""
    """Role of the regions, for region measures; '' for all."""
    window: str = ""
    """Label of the window, for window measures; '' for all."""
    modality: str = ""
    """Only for this modality; '' for all."""
    body_part: str = ""
    """Only for this body part; '' for all."""
    declared_by: Text
    """Role of its author."""
    declared_on: datetime.date

    @model_validator(mode="after")
    def _one_bound(self) -> LimitPlan:
        """A limit has one side."""
        if (self.at_most is None) == (self.at_least is None):
            raise ValueError("one of at_most and at_least is expected, and only one")
        return self

    @property
    def bound(self) -> float:
        """The bound, whichever side it is on."""
        return self.at_most if self.at_most is not None else self.at_least or 0.0


class Claim(Document):
    """What the sample is to show about studies not assessed."""

    exceeding_at_most_percent: Annotated[float, Field(gt=0, lt=100)]
    """Largest share of patients with an exceedance that the claim allows."""
    confidence_percent: Annotated[float, Field(gt=50, lt=100)] = 95.0


class Allowed(Document):
    """How much of the input may be left out before the run says so by its exit code."""

    refused_percent: Annotated[float, Field(ge=0, le=100)] = 0.0
    """Share of image files that may be refused."""
    excluded_percent: Annotated[float, Field(ge=0, le=100)] = 100.0
    """Share of all files that may be excluded by rule."""


class ControlPlan(Document):
    """Which frames carry the controls that are too dear for every frame."""

    share_percent: Annotated[float, Field(ge=0, le=100)] = 5.0
    """Share of frames; at least one per stratum and codec whatever it says."""
    seed: int = 1


class Scope(Document):
    """Which inputs are subjects of the run."""

    modalities: tuple[str, ...] = ()
    """Only these; empty for all."""
    body_parts: tuple[str, ...] = ()
    """Only these; empty for all."""
    localizers: bool = False
    secondary_captures: bool = False
    lossy_sources: bool = False
    """Take sources already lossy, as second generation."""


class Plan(Document):
    """The whole document."""

    version: Literal[1]
    change: Change
    sample: SamplePlan
    scope: Scope = Scope()
    candidates: Annotated[tuple[CandidatePlan, ...], Field(min_length=1)]
    reference: str = ""
    """Name of the candidate whose damage the others are to equal; '' for the middle ratio of the first codec."""
    windows: tuple[WindowPlan, ...] = ()
    regions: RegionPlan | None = None
    limits: tuple[LimitPlan, ...] = ()
    claim: Claim | None = None
    allowed: Allowed = Allowed()
    controls: ControlPlan = ControlPlan()

    @model_validator(mode="after")
    def _names_differ(self) -> Plan:
        """Outputs name candidates, limits and windows by these."""
        for kind, names in (
            ("candidates", [candidate.name for candidate in self.candidates]),
            ("limits", [limit.name for limit in self.limits]),
            ("windows", [f"{window.label} {window.modality}" for window in self.windows]),
        ):
            twice = sorted({name for name in names if names.count(name) > 1})
            if twice:
                raise ValueError(f"{kind} need different names, found {twice[0]!r} twice")
        return self


def plan_hash(plan: Plan) -> str:
    """SHA-256 of the plan as read, over its canonical JSON (RFC 8785): comments and order of keys do not matter.

    It is the hash of `plan.content` of the record in canonical form, so anyone can compute it again.
    """
    return hashlib.sha256(rfc8785.dumps(plan.model_dump(mode="json"))).hexdigest()
