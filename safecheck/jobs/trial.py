"""A few frames tried as a run would assess them, to say how long it takes and how many rows it writes."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass

from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.evaluation import Assignment, evaluate, load_kernels
from safecheck.jobs.series import SeriesAssignments
from safecheck.record.rows import FrameResult
from safecheck.runner.references import SeriesKey, series_of
from safecheck.runner.tasks import FrameTask, pixels_of

__all__ = ["Expected", "expect"]

_MOST_STRATA = 3
"""So many strata are tried, those with the most samples; the rest is taken to cost the same by the sample."""


@dataclass(frozen=True, slots=True)
class Expected:
    """What all frames are expected to take and give."""

    seconds: float
    """On one worker, without its start."""
    measures: float
    windows: float
    regions: float


@dataclass(frozen=True, slots=True)
class _Trial:
    """What one frame took and gave."""

    pixels: int
    dials_s: float
    """To find the settings of its series, where candidates need them."""
    plain_s: float
    rows: FrameResult
    """Without the controls that only a share of frames carries."""


def expect(frames: Sequence[FrameTask], assignment: Assignment, full_controls: int) -> Expected | None:
    """Try the middle frame of the largest series of each of the largest strata.

    Parameters
    ----------
    frames
        All frames of the run.
    assignment
        What is done to each.
    full_controls
        Rows that the full controls of a frame give.

    Returns
    -------
    Expected or None
        None where every frame tried was refused.
    """
    load_kernels()
    strata = _grouped(frames)
    largest = sorted(strata, key=lambda name: -_pixels(strata[name]))[:_MOST_STRATA]
    chosen = {name: _middle(strata[name]) for name in largest}
    smallest = min(chosen.values(), key=lambda each: pixels_of(each.instance))
    # The full controls take several times a frame's own time: how many is learnt where that is least.
    factor = _full_over_plain(smallest, strata[smallest.instance.origin.stratum], assignment)
    tried = {
        name: found for name, each in chosen.items() if (found := _tried(each, strata[name], assignment)) is not None
    }
    if not tried:
        return None
    usual = next(iter(tried.values()))
    parts = [_scaled(group, tried.get(name, usual), full_controls, factor) for name, group in strata.items()]
    return Expected(*(sum(values) for values in zip(*parts, strict=True)))


def _grouped(frames: Sequence[FrameTask]) -> dict[str, list[FrameTask]]:
    """Frames by stratum."""
    strata: dict[str, list[FrameTask]] = {}
    for frame in frames:
        strata.setdefault(frame.instance.origin.stratum, []).append(frame)
    return strata


def _pixels(frames: Sequence[FrameTask]) -> int:
    return sum(pixels_of(frame.instance) for frame in frames)


def _middle(frames: Sequence[FrameTask]) -> FrameTask:
    """Middle frame of the largest series."""
    series: dict[SeriesKey, list[FrameTask]] = {}
    for frame in frames:
        series.setdefault(series_of(frame.instance), []).append(frame)
    largest = max(series.values(), key=_pixels)
    return largest[len(largest) // 2]


def _full_over_plain(each: FrameTask, stratum: Sequence[FrameTask], assignment: Assignment) -> float:
    """How many times as long a frame takes with the full controls; 1 where it is refused."""
    try:
        own = SeriesAssignments(assignment, [frame.instance for frame in stratum]).of(each.instance)
        # The first time includes what is done once.
        _evaluated(each, own, full_controls=False)
        plain_s, _ = _evaluated(each, own, full_controls=False)
        full_s, _ = _evaluated(each, own, full_controls=True)
    except InputRefused:
        return 1.0
    return full_s / plain_s


def _tried(each: FrameTask, stratum: Sequence[FrameTask], assignment: Assignment) -> _Trial | None:
    """Try a frame; None where it is refused."""
    try:
        since = time.monotonic()
        own = SeriesAssignments(assignment, [frame.instance for frame in stratum]).of(each.instance)
        dials_s = time.monotonic() - since
        plain_s, rows = _evaluated(each, own, full_controls=False)
    except InputRefused:
        return None
    return _Trial(pixels_of(each.instance), dials_s, plain_s, rows)


def _evaluated(each: FrameTask, assignment: Assignment, *, full_controls: bool) -> tuple[float, FrameResult]:
    """Seconds that a frame takes, and its rows."""
    since = time.monotonic()
    with open_instance(each.instance) as reader:
        rows = evaluate(reader.frame(each.number), assignment, full_controls=full_controls)
    return time.monotonic() - since, rows


def _scaled(
    frames: Sequence[FrameTask], trial: _Trial, full_controls: int, factor: float
) -> tuple[float, float, float, float]:
    """Seconds and rows of a stratum, by the samples of its frames; a frame with full controls counts `factor` times."""
    references = {series_of(frame.instance): pixels_of(frame.instance) for frame in frames}
    seconds = trial.dials_s * sum(references.values())
    for frame in frames:
        own_s = trial.plain_s * (factor if frame.full_controls else 1.0)
        # A delivered copy is one treatment more.
        copy_s = trial.plain_s / max(len(trial.rows.measures), 1) if frame.delivered else 0.0
        seconds += (own_s + copy_s) * pixels_of(frame.instance)
    controls = full_controls * sum(frame.full_controls for frame in frames)
    copies = sum(frame.delivered is not None for frame in frames)
    return (
        seconds / trial.pixels,
        float(len(frames) * len(trial.rows.measures) + controls + copies),
        float(len(frames) * len(trial.rows.windows)),
        float(len(frames) * len(trial.rows.regions)),
    )
