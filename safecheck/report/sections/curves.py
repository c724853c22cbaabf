"""Curves of error against achieved ratio for one group of like images."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.candidates import CandidateEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Bound, Chart, Point, Series
from safecheck.report.definitions import label_of
from safecheck.report.numbers import figure
from safecheck.report.sections.view import View

__all__ = ["FAR", "beyond", "curves", "left_off"]

FAR = 3.0
"""Delivered copies above this many times the largest ratio of the candidates are named below the charts instead."""


def curves(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> list[Chart]:
    """Error against achieved ratio, for the content's RMSE and the worst patch."""
    charts = []
    near = [item for item in candidates if not _is_far(view, stratum, candidates, item)]
    for measure in ("rmse_content", "worst_patch_rmse"):
        series: dict[str, list[Point]] = {}
        for item in near:
            point = _point(view, stratum.stratum, item.candidate, measure)
            if point:
                series.setdefault(_codec_name(item), []).append(point)
        drawn = tuple(Series(name, tuple(sorted(points, key=lambda p: p.x))) for name, points in series.items())
        if drawn:
            title, bounds = label_of(measure), _bounds(view, stratum, measure)
            charts.append(Chart(title, "Achieved ratio, to 1", stratum.unit, drawn, bounds))
    return charts


def left_off(charts: Sequence[Chart]) -> str:
    """Name the declared limits that lie too far above the values to be drawn."""
    far = [f"{bound.text} of {chart.title}" for chart in charts for bound in chart.far_bounds]
    return f" Above the charts: {'; '.join(far)}." if far else ""


def _is_far(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry], item: CandidateEntry) -> bool:
    """Whether delivered copies lie so far beyond the candidates that drawing them would press the curves flat."""
    ratios = {
        entry.candidate: view.ledger[entry.candidate, stratum.stratum].ratio_bits_stored_median
        for entry in candidates
        if (entry.candidate, stratum.stratum) in view.ledger
    }
    asked = [ratio for name, ratio in ratios.items() if name != item.candidate]
    return item.role == "delivered" and bool(asked) and ratios.get(item.candidate, 0.0) > FAR * max(asked)


def beyond(view: View, stratum: StratumEntry, candidates: Sequence[CandidateEntry]) -> str:
    """Name the delivered copies that the charts leave out."""
    for item in candidates:
        point = _point(view, stratum.stratum, item.candidate, "rmse_content")
        if point and _is_far(view, stratum, candidates, item):
            return (
                f" The delivered copies lie beyond the charts, at {figure(point.x)} to 1 and an RMSE of "
                f"{figure(point.y)} {stratum.unit}."
            )
    return ""


def _codec_name(item: CandidateEntry) -> str:
    """Name of a curve: the codec, with settings other than its dial kept apart, however it was asked."""
    if item.role == "delivered":
        return "delivered copies"
    _, *settings = item.candidate.split(", ")
    others = [setting for setting in settings if not setting.startswith(f"{item.dial} ")]
    return ", ".join((item.codec, *others))


def _point(view: View, stratum: str, candidate: str, measure: str) -> Point | None:
    """One candidate on the chart."""
    ledger = view.ledger.get((candidate, stratum))
    found = view.figure(candidate, stratum, measure)
    if ledger is None or found is None or found.median is None:
        return None
    return Point(ledger.ratio_bits_stored_median, found.median, found.p05, found.p95, found.largest)


def _bounds(view: View, stratum: StratumEntry, measure: str) -> tuple[Bound, ...]:
    """Declared upper limits on the measure that speak of this group's frames."""
    found = {
        item.limit: Bound(item.bound, f"declared limit {item.bound:g}: {item.limit}")
        for item in view.record.outcomes
        if item.measure == measure and item.side == "at most" and item.unit == stratum.unit
    }
    speaking = _limits_of(view, stratum)
    return tuple(bound for name, bound in found.items() if name in speaking)


def _limits_of(view: View, stratum: StratumEntry) -> set[str]:
    """Names of the plan's limits whose scope, in modality and body part, takes in this group."""
    limits = view.record.plan.content.get("limits")
    parts = stratum.stratum.split(", ")
    return {
        str(item.get("name"))
        for item in (limits if isinstance(limits, list | tuple) else ())
        if item.get("modality") in (None, "", stratum.modality) and (item.get("body_part") or parts[0]) in parts
    }
