"""Which cautions stand in a record: eight always, the others where they apply."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from safecheck.policy.plan import Plan
from safecheck.record.inputs import StratumEntry
from safecheck.record.outcomes import OutcomeEntry
from safecheck.statistics.bounds import patients_needed
from safecheck.statistics.groups import Groups
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN

__all__ = ["MANY_COMPARISONS", "cautions_that_apply"]

MANY_COMPARISONS = 10
"""From this many limits times candidates on, chance exceedances are worth a caution."""

_DENSITY_PARTS = frozenset({"CHEST", "HEART", "LUNG", "LSPINE", "SPINE", "TSPINE", "HIP", "THORAX"})


def cautions_that_apply(
    plan: Plan,
    measures: Groups,
    strata: tuple[StratumEntry, ...],
    held: tuple[OutcomeEntry, ...],
    *,
    controls_held: bool,
) -> tuple[str, ...]:
    """Return the cautions in full, the standing ones first."""
    applying = set(_of_images(measures, strata)) | set(_of_evidence(plan, strata, held))
    if not controls_held:
        applying.add("controls")
    return CAUTIONS + tuple(text for name, text in CAUTIONS_WHEN.items() if name in applying)


def _of_images(measures: Groups, strata: tuple[StratumEntry, ...]) -> Iterator[str]:
    """Yield what the images are."""
    modalities = {stratum.modality for stratum in strata}
    if "MG" in modalities:
        yield "mammography"
    if modalities & {"RTIMAGE", "CT"}:
        yield "radiotherapy"
    if modalities & {"PT", "NM"}:
        yield "quantification"
    if any(stratum.modality == "CT" and _DENSITY_PARTS & set(stratum.stratum.split(", ")) for stratum in strata):
        yield "density"
    if strata:
        yield "ai_or_cad"
    for caution, column in (
        ("paediatric", "under_18"),
        ("already_lossy", "source_lossy"),
        ("burned_in_text", "may_show_text"),
    ):
        if np.any(measures.reader.numbers(column) == 1):
            yield caution


def _of_evidence(plan: Plan, strata: tuple[StratumEntry, ...], held: tuple[OutcomeEntry, ...]) -> Iterator[str]:
    """Yield what the sample cannot carry."""
    if plan.claim:
        share, confidence = plan.claim.exceeding_at_most_percent / 100, plan.claim.confidence_percent / 100
        needed = patients_needed(share, confidence=confidence)
        if any(entry.patients < needed for entry in held):
            yield "few_patients"
    wanted = [*plan.scope.modalities, *(limit.modality for limit in plan.limits if limit.modality)]
    if set(wanted) - {stratum.modality for stratum in strata}:
        yield "empty_stratum"
    if len(held) >= MANY_COMPARISONS:
        yield "many_limits"
