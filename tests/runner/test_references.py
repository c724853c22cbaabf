"""The reference frame of a series, and one setting for all its frames, whoever looks for it and whenever."""

from __future__ import annotations

import contextlib
import dataclasses
import os
import random
import signal
from collections.abc import Iterator
from pathlib import Path

import pytest

from safecheck.dicom.instance import Instance
from safecheck.errors import InputRefused, Interrupted
from safecheck.evaluation import Assignment, Candidate, evaluate, load_kernels
from safecheck.frames import Frame, SizeBasis
from safecheck.record.rows import FrameResult
from safecheck.record.tables import TableReader
from safecheck.runner import worker
from safecheck.runner.executor import InProcess
from safecheck.runner.manifest import begin, describe
from safecheck.runner.merge import merge
from safecheck.runner.pool import LocalPool
from safecheck.runner.progress import Progress
from safecheck.runner.references import REFERENCES, Reference, find_series_dials, references_of
from safecheck.runner.run import run
from safecheck.runner.tasks import Task, plan_tasks
from safecheck.runner.worker import Treatment
from tests.runner.studies import ASSIGNMENT, KEY, Reader, instance, open_instance, tables_of

PER_SERIES = Assignment(
    (
        Candidate("tiled 4:1 per series", "tiled", 4.0, SizeBasis.BITS_STORED, per="series"),
        Candidate("tiled 4:1", "tiled", 4.0, SizeBasis.BITS_STORED),
    )
)


def slice_at(name: str, position: float | None, number: int | None = None, *, frames: int = 1) -> Instance:
    made = instance(name, number=number, frames=frames, size=(64, 64))
    return dataclasses.replace(made, origin=dataclasses.replace(made.origin, slice_position_mm=position))


def named(references: tuple[Reference, ...]) -> list[tuple[str, int]]:
    return [(each.instance, number) for each, number in references]


@pytest.mark.parametrize(
    ("instances", "expected"),
    [
        pytest.param(
            [slice_at("a", 30.0, 1), slice_at("b", 10.0, 2), slice_at("c", 20.0, 3)],
            [("I-c", 1), ("I-b", 1), ("I-a", 1)],
            id="by position along the normal, not by number",
        ),
        pytest.param(
            [slice_at("a", None, 4), slice_at("b", None, 2), slice_at("c", None, 3), slice_at("d", None, 1)],
            [("I-b", 1), ("I-d", 1), ("I-c", 1), ("I-a", 1)],
            id="by number without a position, the earlier of two in the middle",
        ),
        pytest.param(
            [slice_at("a", None, 1, frames=3), slice_at("b", 0.0, 2)],
            [("I-a", 1), ("I-b", 1), ("I-a", 2), ("I-a", 3)],
            id="positions first, then frames of one instance",
        ),
    ],
)
def test_the_middle_frame_stands_first_and_then_its_neighbours(
    instances: list[Instance], expected: list[tuple[str, int]]
) -> None:
    for seed in range(3):
        random.Random(seed).shuffle(instances)
        assert named(references_of(instances)["S-1", "R-1"]) == expected


def test_a_long_series_gives_no_more_frames_than_are_tried() -> None:
    references = references_of([slice_at("long", None, 1, frames=1001)])["S-1", "R-1"]
    assert len(references) == REFERENCES
    assert references[0][1] == 501


def test_names_of_tasks_hold_the_reference_where_candidates_need_it() -> None:
    first, second, third = slice_at("a", 10.0, 1), slice_at("b", 20.0, 2), slice_at("c", 30.0, 3)
    moved = dataclasses.replace(first, origin=dataclasses.replace(first.origin, slice_position_mm=25.0))

    def tasks(assignment: Assignment, *instances: Instance) -> tuple[Task, ...]:
        manifest = describe(instances, {}, assignment, plan_hash="p", key=KEY, key_id="K", versions={})
        return plan_tasks(instances, {}, manifest, KEY, assignment=assignment, share_percent=5.0, seed=1)

    def names(assignment: Assignment, *instances: Instance) -> list[str]:
        return [task.name for task in tasks(assignment, *instances)]

    assert {task.references[0][0].input for task in tasks(PER_SERIES, first, second, third)} == {"F-b"}
    assert names(PER_SERIES, first, second, third) == names(PER_SERIES, third, first, second)
    assert not set(names(PER_SERIES, first, second, third)) & set(names(PER_SERIES, moved, second, third))
    assert {task.references for task in tasks(ASSIGNMENT, first, second, third)} == {()}
    assert names(ASSIGNMENT, first, second, third) == names(ASSIGNMENT, moved, second, third)


@contextlib.contextmanager
def refusing(which: Instance) -> Iterator[Reader]:
    """As the room's reader, but for some instances."""
    if which.instance == "I-raises":
        raise KeyError("Doe^Jane")
    with open_instance(which) as reader:
        if which.instance == "I-refused":
            raise InputRefused("truncated", "512 bytes expected, 500 found")
        yield reader


def dial_of(*names: str) -> object:
    """Setting found where the frames of a series go by these names, in order of position."""
    instances = [slice_at(name, float(index), index) for index, name in enumerate(names)]
    references = references_of(instances)["S-1", "R-1"]
    found = find_series_dials(references, PER_SERIES, refusing)
    assert list(found) == ["tiled 4:1 per series"]
    return found["tiled 4:1 per series"]


def test_the_next_nearest_stands_in_for_a_reference_that_is_refused() -> None:
    assert dial_of("a", "refused", "c") == dial_of("a")
    assert dial_of("raises", "refused", "c") == dial_of("c")
    assert dial_of("a", "b", "c") == dial_of("b")


def test_where_no_reference_can_be_read_no_setting_is_found_and_it_is_said() -> None:
    found = dial_of("refused")
    assert getattr(found, "settings", "") is None
    assert getattr(found, "note", "").startswith("none of the 16 frames nearest to the middle")


def do(dossier: Path, instances: list[Instance], workers: int, press_at: int | None = None) -> None:
    """One run with a series of its own setting; with Ctrl-C after so many tasks."""

    def press(progress: Progress) -> None:
        if progress.done == press_at:
            os.kill(os.getpid(), signal.SIGINT)

    manifest = describe(instances, {}, PER_SERIES, plan_hash="p", key=KEY, key_id="K", versions={})
    tasks = plan_tasks(instances, {}, manifest, KEY, assignment=PER_SERIES, share_percent=5.0, seed=1)
    treatment = Treatment(PER_SERIES, evaluate, refusing)
    with begin(dossier, manifest) as held:
        run(tasks, treatment, held.path, executor=LocalPool(workers), warm_up=load_kernels, report=press)
        merge(tasks, held.path, dossier)


@pytest.mark.slow
def test_one_worker_two_workers_and_a_resumed_run_find_the_same_settings(tmp_path: Path) -> None:
    instances = [slice_at(f"{n}" if n != 5 else "refused", float(n), n) for n in range(11)]
    instances += [dataclasses.replace(each, series="R-2", input=f"{each.input}-2") for each in instances[:3]]
    do(tmp_path / "one", instances, workers=1)
    with pytest.raises(Interrupted, match="parts done"):
        do(tmp_path / "two", instances[::-1], workers=2, press_at=2)
    do(tmp_path / "two", instances[::-1], workers=2)
    assert tables_of(tmp_path / "one") == tables_of(tmp_path / "two")
    reader = TableReader(tmp_path / "one" / "measures.parquet", "measures")
    rows = reader.at(range(reader.rows), ("candidate", "role", "asked", "series", "dial_value"))
    steps = {
        series: {row["dial_value"] for row in rows if (row["asked"], row["series"]) == ("ratio per series", series)}
        for series in ("R-1", "R-2")
    }
    assert {series: len(found) for series, found in steps.items()} == {"R-1": 1, "R-2": 1}
    each = {row["dial_value"] for row in rows if row["asked"] == "ratio per frame" and row["role"] == "candidate"}
    assert len(each) > 2


def test_the_setting_is_sought_once_for_a_series(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    sought = []

    def counted(references: tuple[Reference, ...], assignment: Assignment, opening: object) -> dict[str, object]:
        sought.append(references[0][0].series)
        return {}

    def nothing(frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: object = None) -> FrameResult:
        return FrameResult()

    monkeypatch.setattr(worker, "find_series_dials", counted)
    instances = [slice_at(f"{n}", float(n), n) for n in range(40)]
    manifest = describe(instances, {}, PER_SERIES, plan_hash="p", key=KEY, key_id="K", versions={})
    tasks = plan_tasks(instances, {}, manifest, KEY, assignment=PER_SERIES, share_percent=5.0, seed=1)
    assert len(tasks) > 1
    with begin(tmp_path / "d", manifest) as held:
        treatment = Treatment(PER_SERIES, nothing, open_instance)
        run(tasks, treatment, held.path, executor=InProcess(), warm_up=lambda: None, report=lambda _: None)
    assert sought == ["R-1"]
