"""How far a run is, and an honest guess at how long it still takes; how that is shown is another matter."""

from __future__ import annotations

from dataclasses import dataclass, field

from safecheck.codecs.registry import reversible_names
from safecheck.evaluation import Assignment
from safecheck.runner.tasks import Task, pixels_of

__all__ = ["Pace", "Progress", "full_controls_of", "kind_of", "weight_of"]

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


def full_controls_of(assignment: Assignment) -> int:
    """About how many treatments a frame's full controls are: reversible codecs, two of each codec, and planted."""
    codecs = {candidate.codec for candidate in assignment.candidates}
    return len(reversible_names()) + 2 * len(codecs) + 1


def weight_of(task: Task, assignment: Assignment) -> float:
    """Work in a task: samples times treatments, of which the pipe's own reversible control is one."""
    each, full = 1 + len(assignment.candidates), full_controls_of(assignment)
    return float(
        sum(
            pixels_of(frame.instance) * (each + (frame.delivered is not None) + (full if frame.full_controls else 0))
            for frame in task.frames
        )
    )


def kind_of(task: Task) -> str:
    """What tasks whose work takes about the same time have in common: the modality."""
    return task.frames[0].instance.origin.modality


@dataclass(slots=True)
class _Kind:
    """Tasks of one kind."""

    left: float = 0.0
    """Work not done."""
    work: float = 0.0
    """Work done by tasks that count for the pace."""
    took_s: float = 0.0
    """Time that it took."""


@dataclass(slots=True)
class Pace:
    """Time per work, learnt from the tasks that this run finished, for each kind by itself where one is known.

    The run takes tasks in the order of their names, which is as good as drawn at random, so that all kinds of a mixed
    study are met early.
    """

    workers: int
    """How many tasks are done at once, at least 1."""
    finished: int = 0
    _kinds: dict[str, _Kind] = field(default_factory=dict)

    def expect(self, kind: str, weight: float) -> None:
        """Take note of a task that is to be done, of a kind and with so much work."""
        self._kinds.setdefault(kind, _Kind()).left += weight

    def finish(self, kind: str, weight: float, took_s: float) -> None:
        """Take note of a task that is done.

        Parameters
        ----------
        kind, weight
            As it was expected.
        took_s
            Time it took its worker, in seconds.
        """
        self.finished += 1
        tasks = self._kinds[kind]
        tasks.left -= weight
        # A worker's first task holds the time in which libraries are loaded, which will not come again.
        if self.finished > self.workers:
            tasks.work += weight
            tasks.took_s += took_s

    @property
    def remaining_s(self) -> float | None:
        """Seconds that remain, or None while too few tasks were finished to say."""
        work = sum(kind.work for kind in self._kinds.values())
        took_s = sum(kind.took_s for kind in self._kinds.values())
        counted = self.finished - self.workers
        if counted < _TASKS_NEEDED or work == 0:
            return None
        to_do_s = sum(
            kind.left * (kind.took_s / kind.work if kind.work else took_s / work) for kind in self._kinds.values()
        )
        # Of the tasks being done, half is done on average.
        begun_s = self.workers * took_s / counted / 2
        return max(to_do_s - begun_s, to_do_s / 2) / self.workers
