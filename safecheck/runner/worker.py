"""What a worker does with one task, wherever it runs: read frame by frame, evaluate, write the shard."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection
from contextlib import ExitStack
from dataclasses import dataclass, field
from pathlib import Path
from typing import Protocol

import pyarrow as pa

from safecheck.dicom.instance import Instance
from safecheck.errors import InputExcluded, InputRefused
from safecheck.evaluation import Assignment, SeriesDials
from safecheck.frames import Frame
from safecheck.record.rows import FrameResult
from safecheck.record.tables import from_rows
from safecheck.runner.references import FrameReader, OpenInstance, SeriesKey, find_series_dials
from safecheck.runner.shards import SHARD_TABLES, LeftOut, write_shard
from safecheck.runner.tasks import FrameTask, Task

__all__ = ["Done", "Evaluate", "Opened", "Treatment", "perform"]


class Evaluate(Protocol):
    """Frame -> rows."""

    def __call__(
        self, frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: Frame | None = None
    ) -> FrameResult:
        """See `safecheck.evaluation.evaluate`."""
        ...


@dataclass(frozen=True, slots=True)
class Treatment:
    """What is done to each frame; goes to each worker once, so all of it can be pickled."""

    assignment: Assignment
    evaluate: Evaluate
    open_instance: OpenInstance


@dataclass(frozen=True, slots=True)
class Done:
    """A task whose shard is in its place."""

    task: str
    """Its name."""
    refused: int
    """Its frames that gave no rows."""


@dataclass(slots=True)
class _Side:
    """The instance last opened on one side, original or delivered: frames that follow each other share it.

    It stays open from one task to the next: a member of an archive is inflated whole when it is opened.
    """

    open_instance: OpenInstance
    input: str = ""
    reader: FrameReader | None = None
    stack: ExitStack = field(default_factory=ExitStack)

    def read(self, instance: Instance, number: int) -> Frame:
        """Read a frame."""
        if self.reader is None or self.input != instance.input:
            self.close()
            self.reader = self.stack.enter_context(self.open_instance(instance))
            self.input = instance.input
        return self.reader.frame(number)

    def close(self) -> None:
        """Close what is open."""
        self.reader = None
        self.stack.close()


@dataclass(slots=True)
class Opened:
    """What a worker keeps from one task to the next: an open instance of each side at most, and settings of series."""

    originals: _Side
    delivered: _Side
    dials: dict[SeriesKey, SeriesDials] = field(default_factory=dict)
    """Series -> settings that serve all its frames, where candidates need them."""

    @classmethod
    def for_treatment(cls, treatment: Treatment) -> Opened:
        """Nothing yet, to be opened as a treatment says."""
        return cls(_Side(treatment.open_instance), _Side(treatment.open_instance))

    def close(self) -> None:
        """Close both instances."""
        self.originals.close()
        self.delivered.close()


@dataclass(slots=True)
class _Bench:
    """What a worker holds while it is at one task."""

    treatment: Treatment
    opened: Opened
    tables: dict[str, list[pa.Table]] = field(default_factory=lambda: {name: [] for name in SHARD_TABLES})
    left_out: list[LeftOut] = field(default_factory=list)
    notes: Counter[str] = field(default_factory=Counter)


def perform(
    task: Task,
    treatment: Treatment,
    work: Path,
    lost: Collection[int],
    begun: Callable[[int], None],
    opened: Opened,
) -> Done:
    """Assess the frames of one task and write its shard.

    Parameters
    ----------
    task
        The task.
    treatment
        What is done to each frame.
    work
        Work folder of the dossier.
    lost
        Positions in the task, from 0, of frames under which workers died: refused without a try.
    begun
        Called with the position of each frame before it is touched, and with the number of frames before the shard is
        written, so that whoever outlives this process knows what it died of.
    opened
        What earlier tasks of the same treatment left open; the caller closes it after the last.

    Raises
    ------
    OSError
        If the shard cannot be written. What goes wrong with a frame is in the shard, never raised.
    """
    bench = _Bench(treatment, opened)
    for position, each in enumerate(task.frames):
        if position in lost:
            bench.left_out.append(_left_out(each, "worker-lost", ""))
            continue
        begun(position)
        _assess(each, task, bench)
    begun(len(task.frames))
    write_shard(work, task, bench.tables, bench.left_out, bench.notes)
    return Done(task.name, sum(each.side == "original" for each in bench.left_out))


def _assess(each: FrameTask, task: Task, bench: _Bench) -> None:
    """Assess one frame; whatever goes wrong with it becomes an entry, and the run goes on."""
    try:
        frame = bench.opened.originals.read(each.instance, each.number)
        delivered = _read_delivered(each, bench)
        assignment = _assignment(task, bench)
        result = bench.treatment.evaluate(frame, assignment, full_controls=each.full_controls, delivered=delivered)
        tables = {name: from_rows(name, getattr(result, name)) for name in SHARD_TABLES}
    except (InputRefused, InputExcluded) as refusal:
        bench.left_out.append(_left_out(each, refusal.reason, refusal.detail))
    except Exception as error:
        # The text of a foreign exception may hold identifiers or paths; its class cannot.
        bench.left_out.append(_left_out(each, "internal", type(error).__name__))
        # Nor is it known in what state a reader was left, which no frame after this one may depend on.
        bench.opened.close()
    else:
        for name, table in tables.items():
            bench.tables[name].append(table)
        bench.notes.update({*frame.origin.notes, *result.notes})
        if each.delivered is not None and result.delivered_differs:
            bench.left_out.append(
                _without_copy(each.delivered, each.number, "delivered-differs", result.delivered_differs)
            )


def _assignment(task: Task, bench: _Bench) -> Assignment:
    """What is done to a frame of a task, with the settings of its series where candidates need them."""
    treatment, dials = bench.treatment, bench.opened.dials
    if not task.references:
        return treatment.assignment
    if task.series not in dials:
        dials[task.series] = find_series_dials(task.references, treatment.assignment, treatment.open_instance)
    return treatment.assignment.in_series(dials[task.series])


def _read_delivered(each: FrameTask, bench: _Bench) -> Frame | None:
    """Delivered copy of a frame; where it is refused, the original is assessed without it."""
    if each.delivered is None:
        return None
    try:
        return bench.opened.delivered.read(each.delivered, each.number)
    except (InputRefused, InputExcluded) as refusal:
        reason, detail = refusal.reason, refusal.detail
    except Exception as error:
        reason, detail = "internal", type(error).__name__
        bench.opened.delivered.close()
    bench.left_out.append(_without_copy(each.delivered, each.number, reason, detail))
    return None


def _without_copy(delivered: Instance, number: int, reason: str, detail: str) -> LeftOut:
    """Entry of a delivered copy that gave no row."""
    return LeftOut(input=delivered.input, side="delivered", frame=number, reason=reason, detail=detail)


def _left_out(each: FrameTask, reason: str, detail: str) -> LeftOut:
    """Entry of an original frame without rows."""
    return LeftOut(input=each.instance.input, side="original", frame=each.number, reason=reason, detail=detail)
