"""The record from the tables: what a run found, ready to be hashed, read and drawn."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from safecheck.policy.conditions import CONDITION_TEXTS, ExitCondition, in_order, winning
from safecheck.policy.plan import Plan, plan_hash
from safecheck.record.candidates import CandidateEntry
from safecheck.record.document import SCHEMA_VERSION, CodecCheckEntry, PlanEntry, RecordDocument, TableEntry
from safecheck.record.inputs import InputCounts
from safecheck.record.outcomes import Condition, ControlEntry, OutcomeEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.cautions import cautions_that_apply
from safecheck.statistics.conditions import Finished, conditions_of
from safecheck.statistics.controls import controls
from safecheck.statistics.counts import candidate_entries, input_counts, left_out, stratum_entries
from safecheck.statistics.delivered import delivered_entry
from safecheck.statistics.equal_damage import equal_damage
from safecheck.statistics.figures import figures
from safecheck.statistics.groups import Groups
from safecheck.statistics.ledger import ledger
from safecheck.statistics.outcomes import outcomes
from safecheck.statistics.places import worst_places
from safecheck.statistics.regions import region_entries
from safecheck.statistics.reversible import carriages, reversible_codecs
from safecheck.statistics.studies import worst_studies
from safecheck.wording import NO_LIMITS, RECORD_TITLE

__all__ = ["Surroundings", "summarise"]


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the record says beside what stands in the tables."""

    plan_source: Literal["file", "command line"]
    key_id: str
    versions: Mapping[str, str]
    selftest: tuple[CodecCheckEntry, ...]
    tables: tuple[TableEntry, ...]
    notes: Mapping[str, int]
    """What preflight set right, with the number of frames."""
    patient_unknown_studies: int = 0
    archive_codecs: frozenset[str] = frozenset()
    """Codecs that a DICOM archive can write."""
    regions_sha256: str = ""
    regions_without_frame: tuple[str, ...] = ()


def summarise(plan: Plan, tables: Mapping[str, TableReader], around: Surroundings) -> RecordDocument:
    """Build the record.

    Parameters
    ----------
    plan
        As read.
    tables
        The four tables of the dossier by name.
    around
        Versions, selftest, notes and whatever else the tables do not hold.
    """
    groups = {name: Groups.of(tables[name]) for name in ("measures", "windows", "regions")}
    measures = groups["measures"]
    counts = input_counts(tables["inputs"], patient_unknown_studies=around.patient_unknown_studies)
    strata = tuple(stratum_entries(measures))
    candidates = tuple(candidate_entries(plan, measures, around.archive_codecs))
    names = tuple(candidate.candidate for candidate in candidates)
    held = tuple(outcomes(plan, groups, candidates))
    checks = tuple(controls(measures))
    controls_held = _controls_held(checks, counts, candidates)
    copies = delivered_entry(tables["inputs"], measures)
    said = conditions_of(Finished(plan, counts, held, controls_held, candidates, copies, around.notes))
    return RecordDocument(
        schema_version=SCHEMA_VERSION,
        title=RECORD_TITLE,
        plan=PlanEntry(
            source=around.plan_source,
            sha256=plan_hash(plan),
            content=plan.model_dump(mode="json"),
            regions_sha256=around.regions_sha256,
        ),
        key_id=around.key_id,
        versions=dict(around.versions),
        selftest=around.selftest,
        inputs=counts,
        left_out=tuple(left_out(tables["inputs"])),
        strata=strata,
        candidates=candidates,
        ledger=tuple(ledger(measures, names)),
        reversible=tuple(reversible_codecs(measures)),
        carriage=tuple(carriages(measures)),
        figures=tuple(figures(measures, groups["windows"], names)),
        equal_damage=tuple(equal_damage(plan, groups, candidates)),
        outcomes=held,
        outcomes_text=_outcomes_text(held),
        controls=checks,
        controls_held=controls_held,
        worst_places=tuple(worst_places(measures, candidates)),
        worst_studies=tuple(worst_studies(measures, candidates)),
        regions=tuple(region_entries(groups["regions"], candidates)),
        regions_without_frame=around.regions_without_frame,
        delivered=copies,
        content_rules=_counted(measures, "content_rule"),
        content_reasons=_counted(measures, "content_reason"),
        notes=dict(sorted(around.notes.items())),
        cautions=cautions_that_apply(plan, measures, strata, held, controls_held=controls_held),
        conditions=tuple(Condition(code=int(code), text=said[code]) for code in in_order(said)),
        exit_code=int(winning(said)),
        exit_text=said.get(winning(said)) or _done_text(held),
        tables=around.tables,
    )


def _controls_held(
    checks: tuple[ControlEntry, ...], counts: InputCounts, candidates: tuple[CandidateEntry, ...]
) -> bool:
    """Every control held, and none that is owed is missing: reversible for the pipe, two kinds for every codec run."""
    if not counts.frames_assessed:
        return True
    if any(check.not_held for check in checks):
        return False
    ran = {(check.control, check.codec) for check in checks}
    codecs = {candidate.codec for candidate in candidates if candidate.role == "candidate" and candidate.frames}
    wanted = {(kind, codec) for codec in codecs for kind in ("repeat", "over-compressed")}
    return any(control == "reversible" for control, _ in ran) and wanted <= ran


def _done_text(held: tuple[OutcomeEntry, ...]) -> str:
    """Words of a run that ended as it should; without limits no word on limits."""
    return CONDITION_TEXTS[ExitCondition.DONE] if held else f"ran, controls held, {NO_LIMITS}"


def _outcomes_text(held: tuple[OutcomeEntry, ...]) -> str:
    """One line over all limits and proposed candidates."""
    if not held:
        return NO_LIMITS
    proposed = [entry.outcome for entry in held if entry.status == "proposed"]
    words = ("outside declared limits", "within declared limits", "not evaluated")
    return "; ".join(f"{proposed.count(word)} {word}" for word in words if word in proposed)


def _counted(groups: Groups, column: str) -> dict[str, int]:
    """Frames by the name in a column, over the reversible control, which runs once on every frame."""
    rows = groups.of_candidate("reversible")
    codes, names = groups.reader.codes(column)
    return {names[code]: int((codes[rows] == code).sum()) for code in np.unique(codes[rows]) if names[code]}
