"""At which ratio each codec does the damage of the reference candidate: interpolated frame by frame, then pooled."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from safecheck.measures.catalogue import IMAGE_UNIT, MEASURES, Measure
from safecheck.policy.limits import measure_of
from safecheck.policy.plan import LimitPlan, Plan
from safecheck.record.candidates import CandidateEntry
from safecheck.record.equal_damage import Between, EqualDamageEntry
from safecheck.statistics.crossings import Crossings, first_crossings, percentile_between
from safecheck.statistics.curve_rows import CurveRows, curve_rows
from safecheck.statistics.groups import Groups, Indices
from safecheck.statistics.values import damage_of, values_of

__all__ = ["ALWAYS", "equal_damage", "reference_of"]

Reals: TypeAlias = npt.NDArray[np.float64]

ALWAYS = ("rmse_content", "region_max")
"""Measures by which damage is made equal whether or not a limit names them."""

_APART: Mapping[str, tuple[str, ...]] = {"measures": (), "windows": ("window",), "regions": ("label", "region_role")}
"""Columns whose values are told apart, beside stratum and unit."""


def reference_of(plan: Plan, candidates: tuple[CandidateEntry, ...]) -> str:
    """Name the candidate whose damage is taken: the plan's, or the middle ratio of the first codec proposed at ratios.

    Codecs that took the most frames come first, since others cannot be held beside a codec that was not run. At either
    end of the ratios run the damage of another codec would mostly lie beyond them.

    Parameters
    ----------
    plan
        May name it.
    candidates
        In the order of all tables; where none is proposed at a ratio the first proposed counts, else the first.
    """
    own = [item for item in candidates if item.role == "candidate"]
    ranked = sorted(own, key=lambda item: (item.status != "proposed", item.ratio_asked is None, -item.frames))
    first = ranked[0]
    peers = [item for item in ranked if (item.status, item.codec) == (first.status, first.codec) and item.ratio_asked]
    peers.sort(key=lambda item: item.ratio_asked or 0.0)
    return plan.reference or (peers[(len(peers) - 1) // 2] if peers else first).candidate


def equal_damage(
    plan: Plan, groups: Mapping[str, Groups], candidates: tuple[CandidateEntry, ...]
) -> Iterator[EqualDamageEntry]:
    """Yield an entry for each measure, stratum and codec beside the reference's; none where one codec was run.

    Parameters
    ----------
    plan
        Its candidates, reference and limits.
    groups
        Tables of measures, windows and regions by name.
    candidates
        In the order of all tables.
    """
    names = [candidate.name for candidate in plan.candidates]
    reference = names.index(reference_of(plan, candidates))
    tables: dict[str, CurveRows] = {}
    for measure in dict.fromkeys([*(MEASURES[name] for name in ALWAYS), *map(measure_of, plan.limits)]):
        table = groups[measure.table]
        if measure.table not in tables:
            tables[measure.table] = curve_rows(plan, groups["measures"], table)
        if len(np.unique(tables[measure.table].codec)) > 1:
            yield from _Measured.of(plan, table, tables[measure.table], measure, reference).entries()


@dataclass(frozen=True, slots=True, eq=False)
class _Measured:
    """One measure on the rows of its table."""

    plan: Plan
    table: Groups
    rows: CurveRows
    measure: Measure
    reference: int
    """Number of the reference candidate in the plan."""
    values: Reals
    damage: Reals

    @classmethod
    def of(cls, plan: Plan, table: Groups, rows: CurveRows, measure: Measure, reference: int) -> _Measured:
        """Read the measure's values."""
        values = values_of(table.reader, measure)[rows.rows]
        return cls(plan, table, rows, measure, reference, values, damage_of(measure, values))

    def entries(self) -> Iterator[EqualDamageEntry]:
        """Yield the entries of every stratum, window or region, and codec."""
        limits = {limit.name: self._in_scope(limit) for limit in self.plan.limits if limit.measure == self.measure.name}
        wanted = np.ones(len(self.values), dtype=bool)
        if self.measure.name not in ALWAYS:
            wanted = np.logical_or.reduce(list(limits.values()))
        for names, members in self._apart(np.flatnonzero(wanted)):
            held = tuple(name for name, scope in limits.items() if scope[members].any())
            yield from self._beside(names, held, members)

    def _in_scope(self, limit: LimitPlan) -> npt.NDArray[np.bool_]:
        """Which rows a limit speaks of."""
        scope = np.ones(len(self.values), dtype=bool)
        named = {
            "modality": limit.modality,
            "body_part": limit.body_part,
            "window": limit.window,
            "region_role": limit.region_role,
            "label": limit.region,
            "unit": limit.unit if self.measure.unit == IMAGE_UNIT else "",
        }
        for column, name in named.items():
            if name:
                codes, names = self.table.reader.codes(column)
                scope &= codes[self.rows.rows] == (names.index(name) if name in names else -1)
        return scope

    def _apart(self, members: Indices) -> Iterator[tuple[dict[str, str], Indices]]:
        """Split rows by stratum, unit, and window or region; yield the names with them."""
        columns = ("stratum", "unit", *_APART[self.measure.table])
        read = [self.table.reader.codes(column) for column in columns]
        kind = np.zeros(len(members), dtype=np.int64)
        for codes, names in read:
            kind = kind * len(names) + codes[self.rows.rows[members]]
        for each in np.unique(kind):
            same = members[kind == each]
            row = self.rows.rows[same[0]]
            yield {column: names[codes[row]] for column, (codes, names) in zip(columns, read, strict=True)}, same

    def _beside(self, names: dict[str, str], limits: tuple[str, ...], members: Indices) -> Iterator[EqualDamageEntry]:
        """Yield the entry of each codec beside the reference's among some rows."""
        rows = self.rows
        own = members[(rows.candidate[members] == self.reference) & rows.asked[members]]
        aim = rows.worst(own, self.damage)
        if not len(aim):
            return
        run = len(np.unique(rows.frame[own]))
        changed = aim[self.damage[aim] > 0]
        codecs = np.unique(rows.codec[members])
        for codec in codecs[codecs != rows.codec[own[0]]]:
            points = rows.worst(members[rows.codec[members] == codec], self.damage)
            found = first_crossings(
                rows.frame[points], rows.ratio[points], self.damage[points], rows.frame[changed], self.damage[changed]
            )
            reached = changed[np.searchsorted(rows.frame[changed], found.frames)]
            bits = rows.bits[reached]
            yield EqualDamageEntry(
                reference=self.plan.candidates[self.reference].name,
                codec=rows.codecs[codec],
                stratum=names["stratum"],
                measure=self.measure.name,
                window=names.get("window", ""),
                region=names.get("label", ""),
                region_role=names.get("region_role", ""),
                unit=names["unit"] if self.measure.unit == IMAGE_UNIT else self.measure.unit,
                worse=self.measure.worse,
                limits=limits,
                candidates=len(np.unique(rows.candidate[points])),
                frames=len(reached),
                frames_below=found.below,
                frames_above=found.above,
                frames_unchanged=len(aim) - len(changed),
                frames_without=run - len(aim) + len(changed) - len(reached),
                reference_value=_median(self.values[reached]),
                reference_ratio=_median(rows.ratio[reached]),
                reference_bits_per_pixel=_median(bits / rows.ratio[reached]),
                ratio_median=_middle(found, found.least, found.most),
                ratio_p05=_between(found.least, found.most, 5),
                ratio_p95=_between(found.least, found.most, 95),
                bits_per_pixel_median=_middle(found, *_per_pixel(found, bits)),
            )


def _median(values: Reals) -> float | None:
    """Median; None of nothing."""
    return float(np.median(values)) if len(values) else None


def _between(least: Reals, most: Reals, percent: float) -> Between:
    """Bounds of a percentile; None of nothing, and where there is none."""
    if not len(least):
        return Between()
    low, high = percentile_between(least, most, percent)
    return Between(least=low if np.isfinite(low) else None, most=high if np.isfinite(high) else None)


def _middle(found: Crossings, least: Reals, most: Reals) -> Between:
    """Bounds of the median; none at all where most frames lie beyond what was run, some on either side."""
    middle = _between(least, most, 50)
    mostly_beyond = 2 * (found.below + found.above) > len(found.frames)
    return Between() if mostly_beyond and middle.least is not None and middle.most is not None else middle


def _per_pixel(found: Crossings, bits: Reals) -> tuple[Reals, Reals]:
    """Bounds of the bits per pixel: large ratios are few bits."""
    open_below, open_above = np.isneginf(found.least), np.isposinf(found.most)
    least = np.where(open_above, -np.inf, bits / np.where(open_above, 1.0, found.most))
    most = np.where(open_below, np.inf, bits / np.where(open_below, 1.0, found.least))
    return least, most
