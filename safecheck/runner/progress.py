"""How far a run is, and an honest guess at how long it still takes; how that is shown is another matter."""

from __future__ import annotations

from dataclasses import dataclass, field

from safecheck.evaluation import Assignment
from safecheck.runner.tasks import Task, pixels_of

__all__ = ["Pace", "Progress", "weight_of"]

_FULL_CONTROLS = 4
"""Further treatments of a frame that carries the full controls: repeat, over-compressed, planted, reversible."""
_TASKS_NEEDED = 3
"""Below so many finished tasks nothing is said about the time that remains."""


@dataclass(frozen=True, slots=True)
class Progress:
    """What a run tells while it goes on."""

    done: int
    """Tasks whose shard is in its place, of an earlier run too."""
    total: int
    """Tasks in all."""
    frames: int
    """Frames in the tasks done."""
    remaining_s: float | None
    """Time that remains, or None while too little is known."""
    note: str
    """What happened that is worth telling, or ''."""


def weight_of(task: Task, assignment: Assignment) -> float:
    """Work in a task: samples times treatments, of which the pipe's own reversible control is one."""
    each = 1 + len(assignment.candidates)
    return float(
        sum(
            pixels_of(frame.instance)
            * (each + (frame.delivered is not None) + (_FULL_CONTROLS if frame.full_controls else 0))
            for frame in task.frames
        )
    )


@dataclass(slots=True)
class Pace:
    """Time per work, learnt from the tasks that this run finished.

    Tasks of all kinds take part as they were finished: the run takes them in the order of their names, which is as good
    as drawn at random, so the first tenth speaks for the rest of a mixed study.
    """

    left: float
    """Work of the tasks that are not done, in units of `weight_of`."""
    workers: int
    """How many tasks are done at once, at least 1."""
    finished: int = 0
    _work: float = field(default=0.0)
    _took_s: float = field(default=0.0)

    def finish(self, weight: float, took_s: float) -> None:
        """Take note of a task.

        Parameters
        ----------
        weight
            Its work.
        took_s
            Time it took its worker, in seconds.
        """
        self.left = max(0.0, self.left - weight)
        self.finished += 1
        # A worker's first task holds the time in which libraries are loaded, which will not come again.
        if self.finished > self.workers:
            self._work += weight
            self._took_s += took_s

    @property
    def remaining_s(self) -> float | None:
        """Seconds that remain, or None while too few tasks were finished to say."""
        if self.left == 0:
            return 0.0
        if self.finished < self.workers + _TASKS_NEEDED or self._work == 0:
            return None
        # Tasks being done are half done on average.
        begun = self.workers * self._work / (self.finished - self.workers) / 2
        return max(self.left - begun, self.left / 2) * self._took_s / self._work / self.workers
