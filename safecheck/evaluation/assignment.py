"""What is done to every frame of a run."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal, TypeAlias

from safecheck.codecs.base import Settings
from safecheck.frames import SizeBasis
from safecheck.policy.plan import Asked, CandidatePlan, WindowPlan, asked_of
from safecheck.regions.region import RegionSet

__all__ = ["Assignment", "Candidate", "SeriesDial", "SeriesDials"]


@dataclass(frozen=True, slots=True)
class SeriesDial:
    """One setting for all frames of a series, as it was found on its reference frame."""

    settings: Settings | None
    """Of the codec, its dial among them; None where none was found."""
    note: str = ""
    """Why none was found, or that the reference frame did not meet the ratio; '' otherwise."""


SeriesDials: TypeAlias = Mapping[str, SeriesDial]
"""Name of a candidate by ratio per series -> its setting in one series."""


@dataclass(frozen=True, slots=True)
class Candidate:
    """One codec at one asked ratio or setting, as workers need it."""

    name: str
    """How outputs name it."""
    codec: str
    """Name in the codec registry."""
    ratio: float | None
    """None by setting: the codec's dial is among the settings."""
    basis: SizeBasis
    settings: tuple[tuple[str, str | int | float | bool], ...] = ()
    """The codec's other settings, sorted by name."""
    flatten_outside: bool = False
    """Set what is neither content nor padding to one value before coding."""
    per: Literal["frame", "series"] = "frame"
    """Whether the ratio is asked of each frame, or of the reference frame of each series."""
    dial: SeriesDial | None = None
    """By ratio per series: the setting of the series that is being assessed."""

    @classmethod
    def of(cls, plan: CandidatePlan) -> Candidate:
        """Take a candidate from the plan."""
        settings = tuple(sorted(plan.settings.items()))
        return cls(plan.name, plan.codec, plan.ratio, plan.basis, settings, plan.outside == "flatten", plan.per)

    @property
    def asked(self) -> Asked:
        """What is asked of the codec."""
        return asked_of(self.ratio, self.per)


@dataclass(frozen=True, slots=True)
class Assignment:
    """Goes to each worker once, and into the names of tasks by its hash."""

    candidates: tuple[Candidate, ...]
    windows: tuple[WindowPlan, ...] = ()
    regions: RegionSet | None = None

    @property
    def per_series(self) -> tuple[Candidate, ...]:
        """Candidates that need one setting for each series."""
        return tuple(candidate for candidate in self.candidates if candidate.per == "series")

    def in_series(self, dials: SeriesDials) -> Assignment:
        """The same with the settings of one series."""
        candidates = tuple(replace(candidate, dial=dials.get(candidate.name)) for candidate in self.candidates)
        return replace(self, candidates=candidates)
