"""What is to be done, cut into tasks: each a few frames of one series, named by its keyed content.

Names, order and choice of frames for the full controls depend on the inputs' content and the site key alone: not on
paths, on the order in which files were handed in, or on how many workers there are.
"""

from __future__ import annotations

import hmac
import itertools
from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass

from safecheck.dicom.instance import Instance
from safecheck.evaluation import Assignment
from safecheck.record.canonical import canonical_bytes
from safecheck.runner.full_controls import choose_full_controls, codecs_of
from safecheck.runner.manifest import Manifest
from safecheck.runner.references import Reference, SeriesKey, references_of, series_of

__all__ = ["TASK_FRAMES", "FrameTask", "Task", "pixels_of", "plan_tasks"]

TASK_FRAMES = 16
"""Most frames of a task: what a stop in the middle can lose, and what one shard holds."""
_TASK_PIXELS = TASK_FRAMES * 512 * 512
"""Most pixels of a task of more than one frame."""
_TASKS_WANTED = 64
"""Small runs are cut finer, so that all workers have something to do until the end."""


@dataclass(frozen=True, slots=True)
class FrameTask:
    """One frame to be assessed."""

    instance: Instance
    number: int
    """From 1, as DICOM counts."""
    full_controls: bool
    """Whether it carries the controls that only a seeded share of frames carries."""
    delivered: Instance | None = None
    """The copy that the archive returned for the instance; its frame of the same number is measured."""


@dataclass(frozen=True, slots=True)
class Task:
    """A few frames of one series: the unit that is handed to a worker, retried, and written as one shard."""

    name: str
    """HMAC-SHA256 under the site key over what is done to which frames, as hexadecimal."""
    frames: tuple[FrameTask, ...]
    references: tuple[Reference, ...] = ()
    """Frames of its series on which one setting for all of them is found, the first readable one serving; empty where
    no candidate needs it."""

    @property
    def series(self) -> SeriesKey:
        """Series of its frames."""
        return series_of(self.frames[0].instance)


def pixels_of(instance: Instance) -> int:
    """Samples of one frame of an instance, at least 1."""
    channels = 1 if instance.photometric.startswith(("MONOCHROME", "PALETTE")) else 3
    return max(1, instance.rows * instance.columns * channels)


def plan_tasks(
    instances: Iterable[Instance],
    pairs: Mapping[str, Instance],
    manifest: Manifest,
    key: bytes,
    *,
    assignment: Assignment,
    share_percent: float,
    seed: int,
    without: Collection[tuple[str, int]] = (),
) -> tuple[Task, ...]:
    """Cut a run into tasks.

    Parameters
    ----------
    instances
        The originals to assess, in any order, each with an input pseudonym of its own.
    pairs
        Input pseudonym of an original -> the instance that the archive delivered for it.
    manifest
        What the run is about; its assignment, plan and versions are part of every name.
    key
        Site key.
    assignment
        What is done to every frame.
    share_percent
        Share of frames that carry the full controls, 0 to 100; at least one frame of each stratum and codec does, where
        the codec takes any.
    seed
        Another seed chooses other frames.
    without
        (input pseudonym, frame number) of frames known to be refused: others carry the full controls in their stead.

    Returns
    -------
    tuple of Task
        In the order in which rows stand in the tables: patient, study, series, instance number, frame.

    Raises
    ------
    ValueError
        If two instances share an input pseudonym: rows would stand twice.
    """
    ordered = sorted(instances, key=_place)
    if len({instance.input for instance in ordered}) < len(ordered):
        raise ValueError("two instances to assess share an input pseudonym")
    chosen = choose_full_controls(ordered, codecs_of(assignment), key, share_percent, seed, without)
    frames = [
        FrameTask(instance, number, (instance.input, number) in chosen, pairs.get(instance.input))
        for instance in ordered
        for number in range(1, instance.frames + 1)
    ]
    references = references_of(ordered) if assignment.per_series else {}
    return tuple(_task(part, references.get(series_of(part[0].instance), ()), manifest, key) for part in _cut(frames))


def _task(frames: tuple[FrameTask, ...], references: tuple[Reference, ...], manifest: Manifest, key: bytes) -> Task:
    """One task with its name."""
    return Task(_name(frames, references, manifest, key), frames, references)


def _place(instance: Instance) -> tuple[str, str, str, int, str, str]:
    """Where an instance stands in the tables."""
    number = -1 if instance.instance_number is None else instance.instance_number
    return instance.patient, instance.study, instance.series, number, instance.instance, instance.input


def _cut(frames: list[FrameTask]) -> Iterator[tuple[FrameTask, ...]]:
    """Cut frames in order into parts of one series, few enough frames and few enough pixels."""
    total = sum(pixels_of(frame.instance) for frame in frames)
    most_pixels = min(_TASK_PIXELS, total // _TASKS_WANTED)
    for _, series in itertools.groupby(frames, lambda frame: series_of(frame.instance)):
        part: list[FrameTask] = []
        pixels = 0
        for frame in series:
            weight = pixels_of(frame.instance)
            if part and (len(part) == TASK_FRAMES or pixels + weight > most_pixels):
                yield tuple(part)
                part, pixels = [], 0
            part.append(frame)
            pixels += weight
        yield tuple(part)


def _name(frames: Iterable[FrameTask], references: Iterable[Reference], manifest: Manifest, key: bytes) -> str:
    """Keyed name of a task."""
    content = {
        "assignment": manifest.assignment,
        "plan": manifest.plan,
        "versions": dict(manifest.versions),
        "frames": [
            [each.instance.input, each.number, each.full_controls, each.delivered.input if each.delivered else ""]
            for each in frames
        ],
        "references": [[instance.input, number] for instance, number in references],
    }
    return hmac.digest(key, b"task\0" + canonical_bytes(content), "sha256").hex()
