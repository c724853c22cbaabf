"""Which cautions stand in a record: eight always, the others where they apply."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from safecheck.policy.plan import Plan
from safecheck.record.inputs import StratumEntry
from safecheck.record.outcomes import OutcomeEntry
from safecheck.statistics.bounds import patients_needed
from safecheck.statistics.groups import Groups
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN

__all__ = ["MANY_COMPARISONS", "cautions_that_apply", "image_cautions"]

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
    under_18, source_lossy, may_show_text = (
        bool(np.any(measures.reader.numbers(column) == 1)) for column in ("under_18", "source_lossy", "may_show_text")
    )
    yield from image_cautions(
        [(entry.modality, entry.stratum) for entry in strata],
        under_18=under_18,
        source_lossy=source_lossy,
        may_show_text=may_show_text,
    )


def image_cautions(
    strata: Sequence[tuple[str, str]], *, under_18: bool, source_lossy: bool, may_show_text: bool
) -> Iterator[str]:
    """Yield the keys of the cautions that images call for by what they are.

    Parameters
    ----------
    strata
        Modality and words of each group of like images.
    under_18, source_lossy, may_show_text
        Whether any image is such.
    """
    modalities = {modality for modality, _ in strata}
    if "MG" in modalities:
        yield "mammography"
    if modalities & {"RTIMAGE", "CT"}:
        yield "radiotherapy"
    if modalities & {"PT", "NM"}:
        yield "quantification"
    if any(modality == "CT" and _DENSITY_PARTS & set(stratum.split(", ")) for modality, stratum in strata):
        yield "density"
    if strata:
        yield "ai_or_cad"
    if under_18:
        yield "paediatric"
    if source_lossy:
        yield "already_lossy"
    if may_show_text:
        yield "burned_in_text"


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
