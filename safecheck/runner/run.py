"""A run: do the tasks that have no shard yet, and tell how far it is."""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from safecheck.dicom.instance import Source
from safecheck.errors import Interrupted
from safecheck.runner.executor import Executor, TaskDone, WorkerDied
from safecheck.runner.faults import resumable
from safecheck.runner.progress import Pace, Progress, kind_of, weight_of
from safecheck.runner.shards import LeftOut, clear_aside, paper_of
from safecheck.runner.tasks import Task
from safecheck.runner.worker import Treatment

__all__ = ["RunSummary", "refused_frames", "run"]


@dataclass(frozen=True, slots=True)
class RunSummary:
    """What a run came to."""

    tasks: int
    """Tasks in all."""
    resumed: int
    """Tasks whose shard an earlier run had left."""
    frames: int
    """Frames in all."""
    refused: int
    """Frames without rows."""
    workers_died: int
    """Worker processes that died in this run."""


@dataclass(slots=True)
class _Tally:
    """What was counted so far."""

    tasks: Sequence[Task]
    pace: Pace
    report: Callable[[Progress], None]
    done: int = 0
    frames: int = 0
    refused: int = 0
    died: int = 0

    def add(self, task: Task, refused: int) -> None:
        """Count a task whose shard is there."""
        self.done += 1
        self.frames += len(task.frames)
        self.refused += refused

    def tell(self, note: str = "") -> None:
        """Report how far the run is."""
        self.report(Progress(self.done, len(self.tasks), self.frames, self.pace.remaining_s, note))


@resumable()
def run(
    tasks: Sequence[Task],
    treatment: Treatment,
    work: Path,
    *,
    executor: Executor,
    warm_up: Callable[[], None],
    report: Callable[[Progress], None],
) -> RunSummary:
    """Perform all tasks that have no shard yet.

    Parameters
    ----------
    tasks
        All tasks, in order.
    treatment
        What is done to each frame.
    work
        Work folder, from `safecheck.runner.manifest.begin`.
    executor
        Who performs them.
    warm_up
        Called once before the first task where there is anything to do: compiles kernels into the cache that workers
        read, so that each need not.
    report
        Called on each task done and each worker that died.

    Raises
    ------
    Interrupted
        On Ctrl-C, or if the system refuses to write, as on a full disk; what was finished stays.
    DossierError
        If a worker cannot put its results into a shard.
    WorkerLost
        If no worker lives long enough to begin a frame.
    """
    clear_aside(work)
    tally = _Tally(tasks, Pace(executor.workers), report)
    try:
        left = _find_left(work, tally)
        resumed = tally.done
        if left:
            for task in left:
                tally.pace.expect(kind_of(task), weight_of(task, treatment.assignment))
            tally.tell(f"{resumed} of {len(tasks)} parts were done before" if resumed else "")
            warm_up()
            _perform(left, treatment, work, executor, tally)
    except KeyboardInterrupt:
        raise Interrupted(f"stopped with {tally.done} of {len(tasks)} parts done; the same command resumes") from None
    return RunSummary(len(tasks), resumed, tally.frames, tally.refused, tally.died)


def refused_frames(tasks: Sequence[Task], work: Path) -> frozenset[tuple[str, int]]:
    """(input pseudonym, frame number) of the originals' frames that gave no rows, of the tasks that are done."""
    papers = (paper_of(work, task) for task in tasks)
    return frozenset(
        (each.input, each.frame)
        for paper in papers
        if paper is not None
        for each in paper.left_out
        if each.side == "original"
    )


def _find_left(work: Path, tally: _Tally) -> list[Task]:
    """Tasks without a shard, in the order of their names; those with one are counted.

    Names are keyed hashes, so kinds of images are well mixed in this order, and the first tasks speak for the rest when
    the remaining time is estimated. Tasks of one archive member follow each other, since a worker inflates it whole and
    keeps it from one task to the next.
    """
    left = []
    for task in tally.tasks:
        paper = paper_of(work, task)
        if paper is None:
            left.append(task)
        else:
            tally.add(task, _refused(paper.left_out))
    left.sort(key=lambda task: task.name)
    first: dict[Source, str] = {}
    for task in left:
        first.setdefault(_source(task), task.name)
    return sorted(left, key=lambda task: first[_source(task)] if _source(task).member else task.name)


def _source(task: Task) -> Source:
    """Where the first frame of a task lies."""
    return task.frames[0].instance.source


def _refused(left_out: Sequence[LeftOut]) -> int:
    """Originals among frames left out."""
    return sum(each.side == "original" for each in left_out)


def _perform(tasks: Sequence[Task], treatment: Treatment, work: Path, executor: Executor, tally: _Tally) -> None:
    """Let the executor perform the tasks, counting as it goes."""
    with contextlib.closing(executor.perform(tasks, treatment, work)) as events:
        for event in events:
            match event:
                case TaskDone(task, refused, took_s):
                    tally.add(task, refused)
                    tally.pace.finish(kind_of(task), weight_of(task, treatment.assignment), took_s)
                    tally.tell()
                case WorkerDied():
                    tally.died += 1
                    tally.tell(_obituary(event))


def _obituary(event: WorkerDied) -> str:
    """What became of a worker and its task, in words."""
    if event.task is None:
        return "a worker process died while it was idle"
    if event.refused:
        return "a worker process died again on the same frame, which is refused"
    return "a worker process died; its part is tried once more"
