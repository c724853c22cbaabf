"""Limits held against the candidates' values, with the bound that the sample carries."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.measures.catalogue import IMAGE_UNIT
from safecheck.policy.limits import Evidence, Outcome, judge, measure_of, scope_in_words
from safecheck.policy.plan import LimitPlan, Plan
from safecheck.record.candidates import CandidateEntry
from safecheck.record.outcomes import OutcomeEntry
from safecheck.statistics.bounds import share_upper_bound
from safecheck.statistics.figures import ROW_AND_COLUMN
from safecheck.statistics.groups import Groups, Indices, place_at
from safecheck.statistics.values import values_of
from safecheck.wording import NO_BOUND, OutcomeWord

__all__ = ["OVER_COMPRESSED", "outcomes"]

OVER_COMPRESSED = "over-compressed"
"""Role of the control."""


def outcomes(
    plan: Plan, groups: Mapping[str, Groups], candidates: tuple[CandidateEntry, ...]
) -> Iterator[OutcomeEntry]:
    """Yield every limit held against every candidate and the delivered copies, in the plan's order."""
    for limit in plan.limits:
        table = groups[measure_of(limit).table]
        for candidate in candidates:
            yield _Held(plan, limit, table, candidate).entry()


@dataclass(frozen=True, slots=True)
class _Held:
    """One limit against one candidate."""

    plan: Plan
    limit: LimitPlan
    table: Groups
    candidate: CandidateEntry

    def entry(self) -> OutcomeEntry:
        """One line of the outcome table."""
        limit, table = self.limit, self.table
        rows = self._in_scope(table.of_candidate(self.candidate.candidate))
        outcome, scope = self._judged(rows), self._scope()
        word, reason = _word(outcome, scope)
        worst = int(rows[outcome.worst]) if outcome.worst is not None else None
        bound, text = self._bound(outcome, scope)
        row, column = ROW_AND_COLUMN.get(limit.measure, ("", ""))
        return OutcomeEntry(
            limit=limit.name,
            measure=limit.measure,
            unit=limit.unit,
            side="at most" if limit.at_most is not None else "at least",
            bound=limit.bound,
            scope=scope_in_words(limit),
            declared_by=limit.declared_by,
            declared_on=limit.declared_on.isoformat(),
            candidate=self.candidate.candidate,
            status=self.candidate.status,
            outcome=word.value,
            reason=reason,
            values=outcome.values,
            values_outside=outcome.values_outside,
            values_missing=outcome.values_missing,
            studies=scope.studies,
            studies_within=outcome.studies_within,
            studies_not_evaluated=scope.studies - outcome.studies,
            frames_not_run=scope.frames - len(np.unique(self._frames(rows))),
            patients=scope.patients,
            patients_within=outcome.patients_within,
            patients_not_evaluated=scope.patients - outcome.patients,
            upper_bound_percent=bound,
            bound_text=text,
            worst_value=self._worst_value(worst),
            worst=None if worst is None else place_at(table.reader, worst, row=row, column=column),
            worst_region=self._label(worst),
            over_compressed_also_within=self._control_also_within(outcome),
        )

    def _in_scope(self, rows: Indices) -> Indices:
        """Rows that the limit speaks of, in its unit."""
        limit = self.limit
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
                codes, names = self.table.reader.codes(column)
                rows = rows[codes[rows] == (names.index(name) if name in names else -1)]
        return rows

    def _values(self) -> npt.NDArray[np.float64]:
        """The measure's values."""
        return values_of(self.table.reader, measure_of(self.limit))

    def _judged(self, rows: Indices) -> Outcome:
        """Hold the limit against some rows."""
        patient_of, _ = self.table.reader.codes("patient")
        study_of, _ = self.table.reader.codes("study")
        evidence = Evidence(self._values()[rows], patient_of[rows], study_of[rows])
        return judge(self.limit, measure_of(self.limit), evidence)

    def _frames(self, rows: Indices) -> Indices:
        """Number that tells the frame of each row."""
        instance_of, _ = self.table.reader.codes("instance")
        frame = self.table.reader.numbers("frame").astype(np.int64)
        most = int(frame.max(initial=0)) + 1
        return np.asarray(instance_of[rows] * most + frame[rows], dtype=np.int64)

    def _scope(self) -> _Scope:
        """Studies, patients and frames that any candidate or control gave rows of: the denominator."""
        role = "delivered" if self.candidate.role == "delivered" else ""
        every = self.table.of_role(role) if role else np.arange(self.table.reader.rows)
        rows = self._in_scope(every)
        patient_of, _ = self.table.reader.codes("patient")
        study_of, _ = self.table.reader.codes("study")
        frames = len(np.unique(self._frames(rows)))
        return _Scope(len(np.unique(study_of[rows])), len(np.unique(patient_of[rows])), frames)

    def _control_also_within(self, outcome: Outcome) -> bool | None:
        """Whether over-compression by the same codec meets the limit on the frames that carry that control."""
        if not outcome.values or self.candidate.role == "delivered":
            return None
        control = self._in_scope(self.table.of_candidate(f"{OVER_COMPRESSED}, {self.candidate.codec}"))
        over = self._judged(control)
        return over.word is OutcomeWord.WITHIN if over.values else None

    def _worst_value(self, worst: int | None) -> float | None:
        """The worst value; None without any, or where even the worst is infinite since nothing changed."""
        value = np.inf if worst is None else float(self._values()[worst])
        return value if np.isfinite(value) else None

    def _label(self, worst: int | None) -> str:
        """Label of the region of a row."""
        if worst is None or self.table.reader.table != "regions":
            return ""
        return str(self.table.reader.at([worst], ["label"])[0]["label"])

    def _bound(self, outcome: Outcome, scope: _Scope) -> tuple[float | None, str]:
        """What such a sample shows of patients not assessed; nothing unless all drawn at random were evaluated."""
        if self.plan.sample.drawn != "random":
            return None, NO_BOUND
        if not outcome.patients:
            return None, "no bound: no patient evaluated"
        if outcome.patients < scope.patients:
            missing = scope.patients - outcome.patients
            return None, f"no bound: {missing} of {_counted(scope.patients, 'patient')} not evaluated"
        patients = _counted(outcome.patients, "patient")
        percent = 100 * share_upper_bound(outcome.patients - outcome.patients_within, outcome.patients)
        text = f"at most {percent:.3g} % of patients exceed it, one-sided 95 % bound, {patients}"
        return percent, text


@dataclass(frozen=True, slots=True)
class _Scope:
    """What a limit speaks of."""

    studies: int
    patients: int
    frames: int


def _word(outcome: Outcome, scope: _Scope) -> tuple[OutcomeWord, str]:
    """The outcome's word: 'within' only where every study in scope gave a value."""
    missing = scope.studies - outcome.studies
    if outcome.word is OutcomeWord.WITHIN and missing:
        reason = f"{missing} of {_counted(scope.studies, 'study', 'studies')} gave no value; the others are within"
        return OutcomeWord.NOT_EVALUATED, reason
    return outcome.word, outcome.reason


def _counted(number: int, one: str, many: str = "") -> str:
    """'1 study', '2 studies'."""
    return f"{number} {one if number == 1 else many or one + 's'}"
