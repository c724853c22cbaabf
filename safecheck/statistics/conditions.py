"""What a finished run ends with, each condition in words that name what gave rise to it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from safecheck.policy.conditions import CONDITION_TEXTS, ExitCondition
from safecheck.policy.plan import Plan
from safecheck.record.candidates import CandidateEntry
from safecheck.record.delivered import DeliveredEntry
from safecheck.record.inputs import InputCounts
from safecheck.record.outcomes import OutcomeEntry
from safecheck.statistics.bounds import patients_needed

__all__ = ["Finished", "conditions_of"]

MOST_NAMED = 3
"""Candidates without a value that the condition's words name."""


@dataclass(frozen=True, slots=True)
class Finished:
    """What a finished run found."""

    plan: Plan
    counts: InputCounts
    held: tuple[OutcomeEntry, ...]
    controls_held: bool
    candidates: tuple[CandidateEntry, ...]
    copies: DeliveredEntry | None
    notes: Mapping[str, int]
    """What preflight noticed, with the number of frames; says why a candidate was not run."""

    @property
    def proposed(self) -> list[OutcomeEntry]:
        """Outcomes that decide."""
        return [entry for entry in self.held if entry.status == "proposed"]


def conditions_of(run: Finished) -> dict[ExitCondition, str]:
    """Return the conditions that hold, in words."""
    found = {}
    if not run.controls_held:
        found[ExitCondition.CONTROLS] = CONDITION_TEXTS[ExitCondition.CONTROLS]
    missing = "; ".join((*_left_out(run.plan, run.counts), *_nothing(run), *_unheard(run)))
    if missing:
        found[ExitCondition.LEFT_OUT] = missing
    if any(entry.outcome == "outside declared limits" for entry in run.proposed):
        found[ExitCondition.OUTSIDE] = CONDITION_TEXTS[ExitCondition.OUTSIDE]
    if run.plan.claim and _too_little(run.plan, run.proposed):
        found[ExitCondition.LITTLE_EVIDENCE] = CONDITION_TEXTS[ExitCondition.LITTLE_EVIDENCE]
    return found


def _left_out(plan: Plan, counts: InputCounts) -> Iterator[str]:
    """Yield what was refused or excluded beyond the plan."""
    allowed = plan.allowed
    frames = counts.frames_assessed + counts.frames_refused
    parts = (
        ("files refused", counts.refused, counts.assessed + counts.refused, allowed.refused_percent),
        ("frames refused", counts.frames_refused, frames, allowed.refused_percent),
        ("files excluded", counts.excluded, counts.files, allowed.excluded_percent),
    )
    for what, number, total, most in parts:
        if 100 * number > most * max(total, 1):
            yield f"more {what} than the plan allows: {number} of {total}, at most {most:g} %"


def _nothing(run: Finished) -> Iterator[str]:
    """Yield that nothing was evaluated, of images or of delivered copies."""
    if not run.counts.frames_assessed:
        yield "nothing evaluated: no frame was assessed"
    elif not any(candidate.frames for candidate in run.candidates):
        yield "nothing evaluated: no candidate took a frame"
    if run.copies is not None and not run.copies.pairs_measured:
        yield "nothing evaluated: no delivered copy could be measured beside its original"


def _unheard(run: Finished) -> Iterator[str]:
    """Yield the proposed candidates that gave no value to any declared limit, and why."""
    values: dict[str, int] = {}
    for entry in run.proposed:
        values[entry.candidate] = values.get(entry.candidate, 0) + entry.values
    without = [name for name, number in values.items() if number == 0]
    if not without or not run.counts.frames_assessed:
        return
    named = "; ".join(f"{name} {_why(run, name)}" for name in without[:MOST_NAMED])
    more = f"; and {len(without) - MOST_NAMED} more" if len(without) > MOST_NAMED else ""
    yield f"a proposed candidate without a value for any limit: {named}{more}"


def _why(run: Finished, name: str) -> str:
    """Why a candidate gave no value: it took no frame, or no limit spoke of what it gave."""
    (entry,) = (item for item in run.candidates if item.candidate == name)
    start = f"{name} not run: "
    reasons = [
        text.removeprefix(start).removeprefix(f"{entry.codec}: ") for text in run.notes if text.startswith(start)
    ]
    if not entry.frames:
        return f"took no frame{f' ({reasons[0]})' if reasons else ''}"
    told = next((item.reason for item in run.proposed if item.candidate == name and item.reason), "")
    return f"gave none{f' ({told})' if told else ''}"


def _too_little(plan: Plan, proposed: list[OutcomeEntry]) -> bool:
    """Whether any limit without an exceedance rests on fewer patients than the claim needs."""
    if plan.claim is None or plan.sample.drawn != "random" or not proposed:
        return True
    share, confidence = plan.claim.exceeding_at_most_percent / 100, plan.claim.confidence_percent / 100
    needed = patients_needed(share, confidence=confidence)
    return any(entry.patients < needed for entry in proposed)
