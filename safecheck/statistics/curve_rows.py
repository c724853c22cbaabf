"""The rows of a table that candidates gave, each with its frame, its achieved ratio and its codec."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.policy.plan import CandidatePlan, Plan
from safecheck.statistics.groups import Groups, Indices

__all__ = ["CurveRows", "codec_of", "curve_rows"]

ROLES = ("candidate", "bracket")
"""Rows that are points of a codec's curve: what was asked for, and the neighbour of an integer dial."""


@dataclass(frozen=True, slots=True, eq=False)
class CurveRows:
    """Rows of one table, as columns."""

    rows: Indices
    """(n,) row numbers of the table."""
    frame: Indices
    """(n,) number of the frame, the same in all tables."""
    ratio: npt.NDArray[np.float64]
    """(n,) achieved ratio on the bits-stored basis."""
    bits: npt.NDArray[np.float64]
    """(n,) bits stored of a pixel, all channels."""
    candidate: Indices
    """(n,) number of the candidate in the plan."""
    asked: npt.NDArray[np.bool_]
    """(n,) whether the row is the candidate's own, not its neighbour's."""
    codec: Indices
    """(n,) number of the codec in `codecs`."""
    codecs: tuple[str, ...]
    """Codecs with the settings that tell one from another, in the plan's order."""

    def worst(self, members: Indices, damage: npt.NDArray[np.float64]) -> Indices:
        """Keep of several rows of one frame and candidate, such as regions of one label, that of the largest damage."""
        known = members[~np.isnan(damage[members])]
        own = (self.frame[known], self.candidate[known], self.asked[known])
        order = np.lexsort((damage[known], *own))
        last = np.zeros(len(known), dtype=bool)
        last[-1:] = True
        for column in own:
            ordered = column[order]
            last[:-1] |= ordered[1:] != ordered[:-1]
        return known[order[last]]


def codec_of(candidate: CandidatePlan, dial: str) -> str:
    """Name a candidate's codec with its settings but the one that sets its size: candidates alike lie on one curve."""
    settings = "".join(f", {key} {value}" for key, value in sorted(candidate.settings.items()) if key != dial)
    outside = ", outside flattened" if candidate.outside == "flatten" else ""
    return f"{candidate.codec}{settings}{outside}"


def curve_rows(plan: Plan, measures: Groups, groups: Groups) -> CurveRows:
    """Gather the rows of a table.

    Parameters
    ----------
    plan
        Names the candidates.
    measures
        Table of measures, which holds the ratios.
    groups
        The table wanted.
    """
    codec_of_candidate, codecs = _codecs(plan, measures)
    source = _Keyed.of(plan, measures, measures)
    found = source if groups is measures else _Keyed.of(plan, measures, groups)
    known, at = found.partners(source)
    reader, candidate = measures.reader, found.candidate[known]
    return CurveRows(
        rows=found.rows[known],
        frame=found.frame[known],
        ratio=reader.numbers("ratio_bits_stored")[at],
        bits=(reader.numbers("bits_stored") * reader.numbers("channels"))[at],
        candidate=candidate,
        asked=found.asked[known],
        codec=codec_of_candidate[candidate],
        codecs=codecs,
    )


def _codecs(plan: Plan, measures: Groups) -> tuple[Indices, tuple[str, ...]]:
    """Return the codec of each candidate of the plan, (candidates,), and the codecs' names."""
    dial_of, dials = measures.reader.codes("dial")
    names = []
    for candidate in plan.candidates:
        rows = measures.of_candidate(candidate.name)
        names.append(codec_of(candidate, dials[dial_of[rows[0]]] if len(rows) else ""))
    codecs = tuple(dict.fromkeys(names))
    return np.array([codecs.index(name) for name in names], dtype=np.int64), codecs


@dataclass(frozen=True, slots=True, eq=False)
class _Keyed:
    """Rows of a table with a number that is the same in all tables."""

    rows: Indices
    frame: Indices
    candidate: Indices
    asked: npt.NDArray[np.bool_]
    key: Indices
    """(n,) of frame, candidate and role."""

    @classmethod
    def of(cls, plan: Plan, measures: Groups, groups: Groups) -> _Keyed:
        """Number the rows of a table that candidates gave."""
        numbers = {candidate.name: index for index, candidate in enumerate(plan.candidates)}
        of_name = np.array([numbers.get(name, -1) for name in groups.candidates], dtype=np.int64)
        of_role = np.array([role in ROLES for role in groups.roles], dtype=bool)
        rows = np.flatnonzero(of_role[groups.role_of] & (of_name[groups.candidate_of] >= 0))
        frame = _frames(measures, groups)[rows]
        candidate = of_name[groups.candidate_of[rows]]
        asked = np.array([role == ROLES[0] for role in groups.roles], dtype=bool)[groups.role_of[rows]]
        key = (frame * len(plan.candidates) + candidate) * 2 + asked
        return cls(rows, frame, candidate, asked, key)

    def partners(self, source: _Keyed) -> tuple[npt.NDArray[np.bool_], Indices]:
        """Find the row of another table with the same key: which have one, and its row number there.

        Each has one in a table as it was written; in one that was altered a row without takes no part.
        """
        order = np.argsort(source.key, kind="stable")
        place = np.searchsorted(source.key[order], self.key)
        known = place < len(order)
        known[known] = source.key[order[place[known]]] == self.key[known]
        return known, source.rows[order[place[known]]]


def _frames(measures: Groups, groups: Groups) -> Indices:
    """Return the number of the frame of each row: by instance in the table of measures, and frame number."""
    instance_of, instances = groups.reader.codes("instance")
    every = instances if groups is measures else measures.reader.codes("instance")[1]
    place = {name: index for index, name in enumerate(every)}
    most = int(measures.reader.numbers("frame").max(initial=0)) + 1
    number = groups.reader.numbers("frame").astype(np.int64)
    return np.array([place.get(name, -1) for name in instances], dtype=np.int64)[instance_of] * most + number
