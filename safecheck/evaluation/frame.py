"""One frame through all its candidates and controls."""

from __future__ import annotations

from dataclasses import dataclass, field

from safecheck.errors import CannotEncode
from safecheck.evaluation.assignment import Assignment
from safecheck.evaluation.controls import full_controls as sampled_controls
from safecheck.evaluation.controls import pipe_control
from safecheck.evaluation.original import Original, prepare
from safecheck.evaluation.rows import measure_row, region_rows, window_rows
from safecheck.evaluation.treatment import Treated, deliver, recompress
from safecheck.frames import Frame
from safecheck.record.rows import FrameResult, MeasureRow, RegionRow, WindowRow

__all__ = ["evaluate", "load_kernels"]


def evaluate(
    frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: Frame | None = None
) -> FrameResult:
    """Recompress one frame with every candidate and control, and measure.

    Parameters
    ----------
    frame
        The original.
    assignment
        What is done to every frame.
    full_controls
        Whether this frame carries the controls that only a seeded share of frames carries: repeat, over-compressed,
        planted, and each codec's own reversible form. The pipe's reversible control runs on every frame.
    delivered
        The copy that the archive returned for this frame, measured like a candidate.

    Returns
    -------
    FrameResult
        A candidate whose codec does not take the frame has no row; `notes` says so.
    """
    original = prepare(frame, assignment)
    rows = _Rows()
    notes = []
    for candidate in assignment.candidates:
        try:
            rows.add(original, recompress(original, candidate))
        except CannotEncode as error:
            notes.append(f"{candidate.name} not run: {error}")
    differs = _differs(frame, delivered) if delivered is not None else ""
    if delivered is not None and not differs:
        rows.add(original, deliver(delivered))
    candidates = tuple(row for row in rows.measures if row.role == "candidate")
    rows.measures.append(pipe_control(original))
    if full_controls:
        for treated, row in sampled_controls(original, assignment, candidates):
            rows.measures.append(row)
            if treated.role == "over-compressed":
                # Limits on windows and regions are held against this control too.
                rows.add_details(original, treated)
    return FrameResult(
        measures=tuple(rows.measures),
        windows=tuple(rows.windows),
        regions=tuple(rows.regions),
        notes=tuple(notes),
        delivered_differs=differs,
    )


@dataclass(slots=True)
class _Rows:
    """Rows of one frame as they come."""

    measures: list[MeasureRow] = field(default_factory=list)
    windows: list[WindowRow] = field(default_factory=list)
    regions: list[RegionRow] = field(default_factory=list)

    def add(self, original: Original, treated: Treated) -> None:
        """Measure over frame, windows and regions."""
        self.measures.append(measure_row(original, treated))
        self.add_details(original, treated)

    def add_details(self, original: Original, treated: Treated) -> None:
        """Measure over windows and regions."""
        at_windows, ssim_map = window_rows(original, treated)
        self.windows += at_windows
        self.regions += region_rows(original, treated, ssim_map)


def _differs(frame: Frame, delivered: Frame) -> str:
    """Why a delivered copy cannot be set against the frame, pixel by pixel, in one unit; '' where it can."""
    if delivered.raster.samples.shape != frame.raster.samples.shape:
        return f"{delivered.raster.samples.shape} samples, the original has {frame.raster.samples.shape}"
    if delivered.unit != frame.unit:
        return f"in {delivered.unit!r}, the original is in {frame.unit!r}"
    if delivered.raster.format.photometric != frame.raster.format.photometric:
        return f"{delivered.raster.format.photometric}, the original is {frame.raster.format.photometric}"
    return ""


def load_kernels() -> None:
    """Compile all kernels, or take them from the disk: once in a parent process, before workers start."""
    from safecheck.codecs.registry import load_kernels as load_codec_kernels
    from safecheck.measures.baseline import load_kernels as load_measure_kernels

    load_measure_kernels()
    load_codec_kernels()
