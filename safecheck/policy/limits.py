"""A limit held against values: three words, none of which is an exception."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.errors import DocumentError
from safecheck.measures.catalogue import IMAGE_UNIT, MEASURES, Measure
from safecheck.policy.plan import LimitPlan, Plan
from safecheck.wording import OutcomeWord

__all__ = ["Evidence", "Outcome", "check_limits", "judge", "measure_of", "scope_in_words"]


@dataclass(frozen=True, slots=True, eq=False)
class Evidence:
    """The values that a limit is held against, with whose they are."""

    values: npt.NDArray[np.float64]
    """(n,), NaN where a value could not be had."""
    patients: npt.NDArray[Any]
    """(n,) pseudonyms."""
    studies: npt.NDArray[Any]
    """(n,) pseudonyms."""

    def __post_init__(self) -> None:
        """Check that the columns belong together."""
        if not len(self.values) == len(self.patients) == len(self.studies):
            raise ValueError("values, patients and studies are columns of one table")


@dataclass(frozen=True, slots=True)
class Outcome:
    """What came of holding one limit against one candidate's values."""

    word: OutcomeWord
    values: int
    """Values that could be held against the limit."""
    values_outside: int
    values_missing: int
    studies: int
    """Studies with at least one value."""
    studies_within: int
    """Studies of which no value is outside."""
    patients: int
    patients_within: int
    worst: int | None
    """Index of the worst value; None without values."""
    reason: str = ""


def judge(limit: LimitPlan, measure: Measure, evidence: Evidence) -> Outcome:
    """Hold a limit against values: a study or patient is outside if any of its values is.

    Parameters
    ----------
    limit
        The bound.
    measure
        The measure that it names, which says in which direction a value is worse.
    evidence
        Values in the limit's unit.
    """
    known = np.flatnonzero(~np.isnan(evidence.values))
    missing = len(evidence.values) - len(known)
    if not len(known):
        reason = "no value in the limit's unit and scope" if not missing else "no value could be computed"
        return Outcome(OutcomeWord.NOT_EVALUATED, 0, 0, missing, 0, 0, 0, 0, None, reason)
    values = evidence.values[known]
    if measure.signed:
        values = np.abs(values)
    outside = values > limit.bound if limit.at_most is not None else values < limit.bound
    worst = known[int(np.argmax(values) if limit.at_most is not None else np.argmin(values))]
    studies, patients = evidence.studies[known], evidence.patients[known]
    n_studies, n_patients = len(np.unique(studies)), len(np.unique(patients))
    return Outcome(
        word=OutcomeWord.OUTSIDE if outside.any() else OutcomeWord.WITHIN,
        values=len(known),
        values_outside=int(outside.sum()),
        values_missing=missing,
        studies=n_studies,
        studies_within=n_studies - len(np.unique(studies[outside])),
        patients=n_patients,
        patients_within=n_patients - len(np.unique(patients[outside])),
        worst=int(worst),
        reason=f"{missing} values could not be computed" if missing else "",
    )


def measure_of(limit: LimitPlan) -> Measure:
    """Look the limit's measure up.

    Raises
    ------
    KeyError
        If there is none of that name; `check_limits` finds this before a run.
    """
    return MEASURES[limit.measure]


def check_limits(plan: Plan) -> None:
    """Check what the document alone cannot say: that each limit names a measure, its unit and its worse side.

    Raises
    ------
    DocumentError
        With the dotted path of the key at fault.
    """
    for index, limit in enumerate(plan.limits):
        path = f"limits[{index}]"
        measure = MEASURES.get(limit.measure)
        if measure is None:
            known = ", ".join(sorted(name for name, item in MEASURES.items() if item.limitable))
            raise DocumentError(f"{path}.measure", f"no measure is named {limit.measure!r}; expected one of {known}")
        if not measure.limitable:
            raise DocumentError(f"{path}.measure", f"no limit can rest on {limit.measure}: {measure.why_not}")
        if measure.unit != IMAGE_UNIT and limit.unit != measure.unit:
            raise DocumentError(f"{path}.unit", f"{limit.measure} is in {measure.unit!r}, found {limit.unit!r}")
        _check_side(path, limit, measure)
        _check_scope(path, limit, measure)


def _check_side(path: str, limit: LimitPlan, measure: Measure) -> None:
    """A bound on the harmless side would be met by any damage, and one below zero by nothing."""
    if limit.at_most is not None and limit.at_most < 0:
        raise DocumentError(
            f"{path}.at_most", f"{limit.measure} is held by its size: a bound of at least 0 is expected"
        )
    if measure.worse == "lower" and limit.at_most is not None:
        raise DocumentError(f"{path}.at_most", f"{limit.measure} is worse when lower: at_least is expected")
    if measure.worse != "lower" and limit.at_least is not None:
        raise DocumentError(f"{path}.at_least", f"{limit.measure} is worse when higher: at_most is expected")


def _check_scope(path: str, limit: LimitPlan, measure: Measure) -> None:
    """Region and window keys belong to measures of regions and windows."""
    if measure.table != "regions" and (limit.region or limit.region_role):
        key = "region" if limit.region else "region_role"
        raise DocumentError(f"{path}.{key}", f"{limit.measure} is no measure of a region")
    if measure.table != "windows" and limit.window:
        raise DocumentError(f"{path}.window", f"{limit.measure} is no measure at a window")


def scope_in_words(limit: LimitPlan) -> str:
    """What the limit is held against, as one phrase."""
    parts = [
        f"region {limit.region}" if limit.region else "",
        f"regions of role {limit.region_role}" if limit.region_role else "",
        f"window {limit.window}" if limit.window else "",
        limit.modality,
        limit.body_part,
    ]
    return ", ".join(["every frame", *(part for part in parts if part)])
