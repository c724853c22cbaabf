"""Frame -> candidate -> measures per region -> rows. The only place where they meet."""

from __future__ import annotations

from dataclasses import dataclass

from safecheck.frames import Frame, SizeBasis
from safecheck.policy.plan import WindowPlan
from safecheck.record.rows import FrameResult

__all__ = ["Assignment", "Candidate", "evaluate"]


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


@dataclass(frozen=True, slots=True)
class Assignment:
    """What is done to every frame of a run: goes to each worker once, and into the names of tasks by its hash."""

    candidates: tuple[Candidate, ...]
    windows: tuple[WindowPlan, ...] = ()


def evaluate(
    frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: Frame | None = None
) -> FrameResult:
    """Recompress one frame with every candidate and control, and measure.

    Parameters
    ----------
    frame
        The original.
    assignment
        What is done to every frame.
    full_controls
        Whether this frame carries the controls that only a seeded share of frames carries: repeat, over-compressed,
        planted, and each codec's own reversible form. The pipe's reversible control runs on every frame.
    delivered
        The copy that the archive returned for this frame, measured like a candidate.
    """
    raise NotImplementedError
