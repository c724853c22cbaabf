"""Limits held against the candidates' values, with the bound that the sample carries."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from safecheck.measures.catalogue import IMAGE_UNIT
from safecheck.policy.limits import Evidence, Outcome, judge, measure_of, scope_in_words
from safecheck.policy.plan import LimitPlan, Plan
from safecheck.record.document import CandidateEntry, OutcomeEntry
from safecheck.statistics.bounds import share_upper_bound
from safecheck.statistics.groups import Groups, Indices, place_at
from safecheck.wording import NO_BOUND, OutcomeWord

__all__ = ["OVER_COMPRESSED", "outcomes"]

OVER_COMPRESSED = "over-compressed"
"""Role and name of the control."""


def outcomes(
    plan: Plan, groups: Mapping[str, Groups], candidates: tuple[CandidateEntry, ...]
) -> Iterator[OutcomeEntry]:
    """Yield every limit held against every candidate and the delivered copies, in the plan's order."""
    for limit in plan.limits:
        table = groups[measure_of(limit).table]
        for candidate in candidates:
            rows = _in_scope(limit, table, table.of_candidate(candidate.candidate))
            # The control runs on a share of the frames only: like is held against like.
            control = _in_scope(limit, table, table.of_role(OVER_COMPRESSED))
            yield _entry(plan, limit, table, candidate, rows, control)


def _in_scope(limit: LimitPlan, table: Groups, rows: Indices) -> Indices:
    """Rows that a limit speaks of, in its unit."""
    wanted = {
        "modality": limit.modality,
        "body_part": limit.body_part,
        "window": limit.window,
        "region_role": limit.region_role,
        "label": limit.region,
        "unit": limit.unit if measure_of(limit).unit == IMAGE_UNIT else "",
    }
    for column, name in wanted.items():
        if name and len(rows):
            codes, names = table.reader.codes(column)
            rows = rows[codes[rows] == (names.index(name) if name in names else -1)]
    return rows


def _judged(limit: LimitPlan, table: Groups, rows: Indices) -> Outcome:
    """Hold the limit against some rows."""
    measure = measure_of(limit)
    patient_of, _ = table.reader.codes("patient")
    study_of, _ = table.reader.codes("study")
    values = table.reader.numbers(measure.column)[rows]
    return judge(limit, measure, Evidence(values, patient_of[rows], study_of[rows]))


def _entry(
    plan: Plan, limit: LimitPlan, table: Groups, candidate: CandidateEntry, rows: Indices, control: Indices
) -> OutcomeEntry:
    """One line of the outcome table."""
    outcome = _judged(limit, table, rows)
    over = _judged(limit, table, control)
    worst = int(rows[outcome.worst]) if outcome.worst is not None else None
    bound, text = _bound(plan, outcome)
    return OutcomeEntry(
        limit=limit.name,
        measure=limit.measure,
        unit=limit.unit,
        side="at most" if limit.at_most is not None else "at least",
        bound=limit.bound,
        scope=scope_in_words(limit),
        declared_by=limit.declared_by,
        declared_on=limit.declared_on.isoformat(),
        candidate=candidate.candidate,
        status=candidate.status,
        outcome=outcome.word.value,
        reason=outcome.reason,
        values=outcome.values,
        values_outside=outcome.values_outside,
        values_missing=outcome.values_missing,
        studies=outcome.studies,
        studies_within=outcome.studies_within,
        patients=outcome.patients,
        patients_within=outcome.patients_within,
        upper_bound_percent=bound,
        bound_text=text,
        worst_value=None if worst is None else float(table.reader.numbers(measure_of(limit).column)[worst]),
        worst=None if worst is None else place_at(table.reader, worst),
        over_compressed_also_within=None if not over.values else over.word is OutcomeWord.WITHIN,
    )


def _bound(plan: Plan, outcome: Outcome) -> tuple[float | None, str]:
    """What such a sample shows of patients not assessed; nothing unless it was drawn at random."""
    if plan.sample.drawn != "random":
        return None, NO_BOUND
    if not outcome.patients:
        return None, "no bound: no patient evaluated"
    percent = 100 * share_upper_bound(outcome.patients - outcome.patients_within, outcome.patients)
    text = f"at most {percent:.3g} % of patients exceed it, one-sided 95 % bound, {outcome.patients} patients"
    return percent, text
