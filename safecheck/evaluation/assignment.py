"""What is done to every frame of a run."""

from __future__ import annotations

from dataclasses import dataclass

from safecheck.frames import SizeBasis
from safecheck.policy.plan import CandidatePlan, WindowPlan
from safecheck.regions.region import RegionSet

__all__ = ["Assignment", "Candidate"]


@dataclass(frozen=True, slots=True)
class Candidate:
    """One codec at one asked ratio, as workers need it."""

    name: str
    """How outputs name it."""
    codec: str
    """Name in the codec registry."""
    ratio: float
    basis: SizeBasis
    settings: tuple[tuple[str, str | int | float | bool], ...] = ()
    """The codec's other settings, sorted by name."""
    flatten_outside: bool = False
    """Set what is neither content nor padding to one value before coding."""

    @classmethod
    def of(cls, plan: CandidatePlan) -> Candidate:
        """Take a candidate from the plan."""
        settings = tuple(sorted(plan.settings.items()))
        return cls(plan.name, plan.codec, plan.ratio, plan.basis, settings, plan.outside == "flatten")


@dataclass(frozen=True, slots=True)
class Assignment:
    """Goes to each worker once, and into the names of tasks by its hash."""

    candidates: tuple[Candidate, ...]
    windows: tuple[WindowPlan, ...] = ()
    regions: RegionSet | None = None
