"""Worker processes of this machine.

Each worker is a process of its own with one task at a time, so that a library that crashes takes one task with it and
it is known which. A task whose worker died is tried once more after all others, alone, in case it died for want of
memory; a frame under which a worker dies for the second time is refused, and the rest of its task is done.
"""

from __future__ import annotations

import json
import os
import pickle
import queue
import subprocess
import sys
import threading
import time
from collections import Counter, deque
from collections.abc import Generator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from safecheck.errors import DossierError, WorkerLost
from safecheck.runner.executor import Event, TaskDone, WorkerDied
from safecheck.runner.faults import interrupted_by
from safecheck.runner.process import Order
from safecheck.runner.standby import Standby, close, start_process
from safecheck.runner.tasks import Task
from safecheck.runner.worker import Treatment

__all__ = ["LocalPool", "cores"]

_STILLBORN = 3
"""So many workers in a row that die before they begin anything: the next would too."""


def cores() -> int:
    """Cores that this process may use."""
    if sys.platform == "linux":
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


@dataclass(frozen=True, slots=True)
class LocalPool:
    """Performs tasks in worker processes on this machine."""

    workers: int
    """At least 1."""
    standby: Standby | None = None
    """A worker that was started ahead, the first to be taken."""

    def __post_init__(self) -> None:
        """Check the number of workers."""
        if self.workers < 1:
            raise ValueError(f"workers is {self.workers}, expected at least 1")

    def perform(self, tasks: Sequence[Task], treatment: Treatment, work: Path) -> Generator[Event]:
        """Perform the tasks, see `Executor.perform`."""
        crew = _Crew(self.workers, pickle.dumps((treatment, work)), deque(tasks), self.standby)
        try:
            yield from crew.run()
        finally:
            crew.stop()


@dataclass(slots=True, eq=False)
class _Worker:
    """One worker process, and what it is at."""

    process: subprocess.Popen[bytes]
    listener: threading.Thread | None = None
    task: Task | None = None
    since_s: float = 0.0
    position: int | None = None
    """Frame it last began; the number of frames while it writes the shard."""

    def send(self, content: bytes) -> None:
        """Send it a pickle; one that is dead already is noticed by whoever listens to it."""
        assert self.process.stdin is not None
        try:
            self.process.stdin.write(content)
            self.process.stdin.flush()
        except OSError:
            self.process.kill()

    def listen(self, inbox: queue.SimpleQueue[tuple[_Worker, Any]]) -> None:
        """Pass its answers on until it ends; then, or if it sends anything else, pass on None."""
        assert self.process.stdout is not None
        try:
            for line in self.process.stdout:
                inbox.put((self, dict(json.loads(line))))
        except (ValueError, TypeError, OSError):
            self.process.kill()
        inbox.put((self, None))

    def stop(self) -> None:
        """End it at once."""
        self.process.kill()
        if self.listener is not None:
            self.listener.join()
        close(self.process)


@dataclass(slots=True)
class _Crew:
    """Who does what, while one run lasts."""

    size: int
    treatment: bytes
    waiting: deque[Task]
    standby: Standby | None
    again: deque[Task] = field(default_factory=deque)
    """Tasks whose worker died: done last, one at a time."""
    workers: list[_Worker] = field(default_factory=list)
    inbox: queue.SimpleQueue[tuple[_Worker, Any]] = field(default_factory=queue.SimpleQueue)
    deaths: Counter[tuple[str, int]] = field(default_factory=Counter)
    """(task, position) -> workers that died there."""
    lost: dict[str, frozenset[int]] = field(default_factory=dict)
    """Task -> positions of frames that are refused."""
    stillborn: int = 0

    def run(self) -> Generator[Event]:
        """Hand out all tasks and tell what comes of them."""
        while self.waiting or self.again or self._busy():
            self._hand_out()
            worker, message = self.inbox.get()
            if message is None:
                yield self._bury(worker)
            elif "begun" in message:
                worker.position = message["begun"]
                self.stillborn = 0
            elif "unfit" in message:
                raise WorkerLost(f"a worker process could not take its orders: {message['unfit']}")
            elif "fault" in message:
                raise interrupted_by(message["fault"])
            elif "error" in message:
                raise DossierError(f"a part of the results could not be put into its tables: {message['error']}")
            elif worker.task is not None:
                yield TaskDone(worker.task, message["refused"], time.monotonic() - worker.since_s)
                worker.task = None

    def stop(self) -> None:
        """End all workers."""
        for worker in self.workers:
            worker.stop()

    def _busy(self) -> bool:
        return any(worker.task is not None for worker in self.workers)

    def _hand_out(self) -> None:
        """Give each idle worker a task; start workers while there are fewer than tasks to do."""
        while self.waiting and (worker := self._idle()):
            self._give(worker, self.waiting.popleft())
        if self.again and not self._busy() and (worker := self._idle()):
            self._give(worker, self.again.popleft())

    def _idle(self) -> _Worker | None:
        """A worker without a task, a new one if there may be more."""
        for worker in self.workers:
            if worker.task is None:
                return worker
        return self._hire() if len(self.workers) < self.size else None

    def _hire(self) -> _Worker:
        """Take the worker on standby or start one, and a thread that listens to it."""
        worker = _Worker((self.standby and self.standby.take()) or start_process())
        self.workers.append(worker)
        worker.listener = threading.Thread(target=worker.listen, args=(self.inbox,), daemon=True)
        worker.listener.start()
        worker.send(self.treatment)
        return worker

    def _give(self, worker: _Worker, task: Task) -> None:
        """Hand a task to a worker."""
        worker.task, worker.position, worker.since_s = task, None, time.monotonic()
        worker.send(pickle.dumps(Order(task, self.lost.get(task.name, frozenset()))))

    def _bury(self, worker: _Worker) -> WorkerDied:
        """Take note of a worker's end, and decide what becomes of its task."""
        worker.stop()
        self.workers.remove(worker)
        task, position = worker.task, worker.position
        if task is None or position is None:
            self._count_stillborn()
            if task is not None:
                self.waiting.appendleft(task)
            return WorkerDied(task, refused=False)
        self.again.append(task)
        self.deaths[task.name, position] += 1
        refused = self.deaths[task.name, position] > 1
        if refused:
            self._give_up(task, position)
        return WorkerDied(task, refused)

    def _count_stillborn(self) -> None:
        """Stop the run if workers do not live at all."""
        self.stillborn += 1
        if self.stillborn >= _STILLBORN:
            raise WorkerLost(f"{self.stillborn} worker processes in a row ended before they began a frame")

    def _give_up(self, task: Task, position: int) -> None:
        """Refuse a frame; where workers die while they write, the whole task; where even that does not go, stop."""
        lost = self.lost.get(task.name, frozenset())
        everything = frozenset(range(len(task.frames)))
        if lost == everything:
            raise WorkerLost("worker processes end while they write to the dossier")
        self.lost[task.name] = everything if position == len(task.frames) else lost | {position}
