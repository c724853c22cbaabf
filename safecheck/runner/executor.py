"""The one interface behind which tasks are performed: on this machine's processes, or elsewhere."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Generator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol, TypeAlias

from safecheck.runner.tasks import Task
from safecheck.runner.worker import Opened, Treatment, perform

__all__ = ["Event", "Executor", "InProcess", "TaskDone", "WorkerDied"]


@dataclass(frozen=True, slots=True)
class TaskDone:
    """A task's shard is in its place."""

    task: Task
    refused: int
    """Its frames that gave no rows."""
    took_s: float
    """Time from handing it out to its end."""


@dataclass(frozen=True, slots=True)
class WorkerDied:
    """A worker died; its task is tried again, or the frame under which it died for the second time is refused."""

    task: Task | None
    """What it held, if anything."""
    refused: bool
    """Whether the frame is refused now."""


Event: TypeAlias = TaskDone | WorkerDied


class Executor(Protocol):
    """Performs tasks, each at least once; shards are written by whoever performs, under one work folder."""

    @property
    def workers(self) -> int:
        """How many tasks it performs at once, at least 1."""
        ...

    def perform(self, tasks: Sequence[Task], treatment: Treatment, work: Path) -> Generator[Event]:
        """Perform the tasks in any order and tell what happens as it happens; closing the generator stops all work.

        Raises
        ------
        Interrupted, OSError
            If the system refuses to write shards.
        DossierError
            If results cannot be put into a shard.
        WorkerLost
            If no worker lives long enough to begin a frame.
        """
        ...


@dataclass(frozen=True, slots=True)
class InProcess:
    """Performs in this very process: a codec library that crashes takes the run with it."""

    workers: int = 1

    def perform(self, tasks: Sequence[Task], treatment: Treatment, work: Path) -> Generator[Event]:
        """Perform one task after the other."""
        with contextlib.closing(Opened.for_treatment(treatment)) as opened:
            for task in tasks:
                since_s = time.monotonic()
                done = perform(task, treatment, work, (), lambda _: None, opened)
                yield TaskDone(task, done.refused, time.monotonic() - since_s)
