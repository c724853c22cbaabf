"""One frame through all its candidates and controls."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import nullcontext
from functools import partial
from typing import TypeAlias

from safecheck.errors import CannotEncode
from safecheck.evaluation.assignment import Assignment, Candidate, SeriesDial
from safecheck.evaluation.controls import ControlWork, checked_row, pipe_control
from safecheck.evaluation.controls import full_controls as controls_of
from safecheck.evaluation.original import Original, prepare
from safecheck.evaluation.rows import region_rows, window_rows
from safecheck.evaluation.treatment import Treated, deliver, find_dial, recompress
from safecheck.frames import Frame
from safecheck.record.rows import FrameResult

__all__ = ["evaluate", "find_dials", "load_kernels"]


def evaluate(
    frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: Frame | None = None, threads: int = 1
) -> FrameResult:
    """Recompress one frame with every candidate and control, and measure.

    Parameters
    ----------
    frame
        The original.
    assignment
        What is done to every frame; with a ratio per series, as `Assignment.in_series` gives it for the frame's series.
    full_controls
        Whether this frame carries the controls that only a seeded share of frames carries: repeat, over-compressed,
        planted, and each codec's own reversible form. The pipe's reversible control runs on every frame.
    delivered
        The copy that the archive returned for this frame, measured like a candidate.
    threads
        How many candidates are treated at once, at least 1; rows do not depend on it.

    Returns
    -------
    FrameResult
        A candidate whose codec does not take the frame has no row; `notes` says so. Where two settings of a codec
        bracket the ratio asked for, the neighbour has rows of its own, with the role bracket.
    """
    with ThreadPoolExecutor(threads) if threads > 1 else nullcontext() as pool:
        return _evaluated(frame, assignment, full_controls, delivered, pool)


def _evaluated(
    frame: Frame, assignment: Assignment, full_controls: bool, delivered: Frame | None, pool: Executor | None
) -> FrameResult:
    """Do the works of one frame, beside each other where there is a pool."""
    original = prepare(frame, assignment, pool)
    differs = _differs(frame, delivered) if delivered is not None else ""
    works: list[_Work] = [partial(_recompressed, original, candidate) for candidate in assignment.candidates]
    if delivered is not None and not differs:
        works.append(lambda: _measured(original, deliver(delivered)))
    works.append(lambda: FrameResult((pipe_control(original),)))
    results = _done(works, pool)
    if full_controls:
        candidates = tuple(row for result in results for row in result.measures if row.role == "candidate")
        results += _done(
            [partial(_controlled, original, control) for control in controls_of(original, assignment, candidates)], pool
        )
    return _joined(results, differs)


_Work: TypeAlias = Callable[[], FrameResult]


def _done(works: Sequence[_Work], pool: Executor | None) -> list[FrameResult]:
    """Results in the order of the works; compiled kernels leave the interpreter's lock, jpeg2000's does not."""
    if pool is None:
        return [work() for work in works]
    return list(pool.map(lambda work: work(), works))


def _recompressed(original: Original, candidate: Candidate) -> FrameResult:
    """Rows of a candidate, or why it was not run."""
    try:
        results = [_measured(original, treated) for treated in recompress(original, candidate)]
    except CannotEncode as error:
        return FrameResult(notes=(f"{candidate.name} not run: {error}",))
    note = candidate.dial.note if candidate.dial else ""
    return _joined([*results, FrameResult(notes=(note,) if note else ())])


def _measured(original: Original, treated: Treated) -> FrameResult:
    """Measure over frame, windows and regions."""
    windows, ssim_map = window_rows(original, treated)
    regions = region_rows(original, treated, ssim_map)
    return FrameResult((checked_row(original, treated),), tuple(windows), tuple(regions))


def _joined(results: Sequence[FrameResult], differs: str = "") -> FrameResult:
    """Rows and notes of several works, in their order."""
    return FrameResult(
        measures=tuple(row for result in results for row in result.measures),
        windows=tuple(row for result in results for row in result.windows),
        regions=tuple(row for result in results for row in result.regions),
        notes=tuple(note for result in results for note in result.notes),
        delivered_differs=differs,
    )


def _controlled(original: Original, control: ControlWork) -> FrameResult:
    """Rows of a control; limits on windows and regions are held against over-compression too."""
    treated, row = control()
    if treated.role != "over-compressed":
        return FrameResult((row,))
    windows, ssim_map = window_rows(original, treated)
    return FrameResult((row,), tuple(windows), tuple(region_rows(original, treated, ssim_map)))


def find_dials(frame: Frame, candidates: Sequence[Candidate]) -> dict[str, SeriesDial]:
    """Find one setting for a series on its reference frame, for each of some candidates by ratio per series.

    Parameters
    ----------
    frame
        Reference frame of the series.
    candidates
        With a ratio per series.

    Returns
    -------
    dict
        Name of the candidate -> setting, or why there is none.
    """
    original = prepare(frame, Assignment(()))
    found = {}
    for candidate in candidates:
        try:
            found[candidate.name] = find_dial(original, candidate)
        except CannotEncode as error:
            found[candidate.name] = SeriesDial(None, str(error))
    return found


def _differs(frame: Frame, delivered: Frame) -> str:
    """Why a delivered copy cannot be set against the frame, pixel by pixel, in one unit; '' where it can."""
    if delivered.raster.samples.shape != frame.raster.samples.shape:
        return f"{delivered.raster.samples.shape} samples, the original has {frame.raster.samples.shape}"
    if delivered.unit != frame.unit:
        return f"in {delivered.unit!r}, the original is in {frame.unit!r}"
    if delivered.raster.format.photometric != frame.raster.format.photometric:
        return f"{delivered.raster.format.photometric}, the original is {frame.raster.format.photometric}"
    return ""


def load_kernels(adaptive: bool = False) -> None:
    """Compile all kernels, or take them from the disk: once in a parent process, before workers start.

    Those of tiles chosen over the frame only if `adaptive`.
    """
    from safecheck.codecs.registry import load_kernels as load_codec_kernels
    from safecheck.measures.baseline import load_kernels as load_measure_kernels

    load_measure_kernels()
    load_codec_kernels(adaptive)
