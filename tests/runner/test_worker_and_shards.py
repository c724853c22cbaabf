import contextlib
import dataclasses
import itertools
import json
import shutil
from collections.abc import Generator, Iterator, Sequence
from pathlib import Path

import pytest

from safecheck.dicom.instance import Instance, Source
from safecheck.errors import DossierError
from safecheck.runner.executor import Event
from safecheck.runner.merge import merge
from safecheck.runner.run import run
from safecheck.runner.shards import LeftOut, clear_aside, paper_of, read_shard
from safecheck.runner.tasks import Task, plan_tasks
from safecheck.runner.worker import Opened, Treatment, perform
from tests.runner.studies import (
    ASSIGNMENT,
    KEY,
    FakeEvaluation,
    Reader,
    instance,
    manifest_of,
    open_instance,
    tasks_of,
    work_of,
)

CINE = [instance("cine", frames=4, series="R-cine", modality="US")]


def one_task() -> Task:
    """All frames of the cine in one task."""
    tasks = plan_tasks(CINE, {}, manifest_of(CINE), KEY, assignment=ASSIGNMENT, share_percent=0.0, seed=1)
    return dataclasses.replace(tasks[0], frames=tuple(each for task in tasks for each in task.frames))


def do(task: Task, work: Path, evaluation: FakeEvaluation | None = None, lost: tuple[int, ...] = ()) -> list[int]:
    """Perform a task; the positions begun."""
    begun: list[int] = []
    treatment = Treatment(ASSIGNMENT, evaluation or FakeEvaluation(), open_instance)
    with contextlib.closing(Opened.for_treatment(treatment)) as opened:
        perform(task, treatment, work, lost, begun.append, opened)
    return begun


@pytest.fixture
def work(tmp_path: Path) -> Path:
    return work_of(tmp_path / "dossier", CINE)


def frames_in(work: Path, task: Task) -> list[int]:
    return sorted(set(read_shard(work, task, "measures").column("frame").to_pylist()))


def test_a_task_gives_a_shard_with_its_rows_and_its_notes(work: Path) -> None:
    task = one_task()
    assert do(task, work) == [0, 1, 2, 3, 4]
    paper = paper_of(work, task)
    assert paper is not None
    assert paper.frames == tuple(("F-cine", number) for number in (1, 2, 3, 4))
    assert paper.notes == {"padding range turned round": 4}
    # Two candidates on four frames, and the over-compressed control on one; regions on frames of odd number.
    assert paper.tables["measures"].rows == read_shard(work, task, "measures").num_rows == 9
    assert frames_in(work, task) == [1, 2, 3, 4]


@pytest.mark.parametrize(
    ("evaluation", "reason", "detail"),
    [
        pytest.param(
            FakeEvaluation(refuses_on=(("I-cine", 2),)), "range", "5000 found, at most 4095 expected", id="refused"
        ),
        pytest.param(FakeEvaluation(raises_on=(("I-cine", 2),)), "internal", "KeyError", id="unforeseen"),
    ],
)
def test_a_frame_that_goes_wrong_is_an_entry_and_the_others_go_on(
    work: Path, evaluation: FakeEvaluation, reason: str, detail: str
) -> None:
    task = one_task()
    do(task, work, evaluation)
    paper = paper_of(work, task)
    assert paper is not None
    assert paper.left_out == (LeftOut(input="F-cine", side="original", frame=2, reason=reason, detail=detail),)
    assert frames_in(work, task) == [1, 3, 4]
    assert not [path for path in work.rglob("*") if path.is_file() and b"Doe" in path.read_bytes()]


@pytest.mark.parametrize(
    ("object_class", "reason", "detail"),
    [
        pytest.param("refused by the reader", "truncated", "512 bytes expected, 500 found", id="refused"),
        pytest.param("cannot be opened", "internal", "FileNotFoundError", id="gone"),
    ],
)
def test_an_instance_that_cannot_be_read_gives_an_entry_per_frame(
    work: Path, object_class: str, reason: str, detail: str
) -> None:
    task = one_task()
    bad = dataclasses.replace(CINE[0], object_class=object_class)
    task = dataclasses.replace(task, frames=tuple(dataclasses.replace(each, instance=bad) for each in task.frames))
    do(task, work)
    paper = paper_of(work, task)
    assert paper is not None
    assert [(each.frame, each.reason, each.detail) for each in paper.left_out] == [
        (number, reason, detail) for number in (1, 2, 3, 4)
    ]


def test_a_delivered_copy_is_measured_and_one_that_is_refused_does_not_take_its_original_along(work: Path) -> None:
    good, bad = instance("returned"), dataclasses.replace(instance("broken"), object_class="cannot be opened")
    task = one_task()
    frames = tuple(dataclasses.replace(each, delivered=bad if each.number == 3 else good) for each in task.frames)
    task = dataclasses.replace(task, frames=frames)
    do(task, work)
    paper = paper_of(work, task)
    assert paper is not None
    assert [(each.input, each.side, each.frame) for each in paper.left_out] == [("F-broken", "delivered", 3)]
    rows = read_shard(work, task, "measures").to_pylist()
    assert [row["frame"] for row in rows if row["candidate"] == "delivered"] == [1, 2, 4]
    assert frames_in(work, task) == [1, 2, 3, 4]


def test_frames_under_which_workers_died_are_refused_without_a_try(work: Path) -> None:
    task = one_task()
    assert do(task, work, lost=(1,)) == [0, 2, 3, 4]
    paper = paper_of(work, task)
    assert paper is not None
    assert [(each.frame, each.reason) for each in paper.left_out] == [(2, "worker-lost")]


def test_a_result_that_no_table_can_hold_is_an_entry_too(work: Path) -> None:
    task = one_task()
    do(task, work, FakeEvaluation(misfits_on=(("I-cine", 1),)))
    paper = paper_of(work, task)
    assert paper is not None
    assert [(each.frame, each.reason) for each in paper.left_out] == [(1, "internal")]


def test_what_was_half_written_is_ignored_and_removed(work: Path) -> None:
    task = one_task()
    do(task, work)
    shard = work / "shards" / task.name
    half = work / "aside" / "half"
    shutil.copytree(shard, half)
    (half / "frames.json").unlink()
    clear_aside(work)
    assert not list((work / "aside").iterdir())
    assert paper_of(work, task) is not None


@pytest.mark.parametrize("name", ["measures.parquet", "windows.parquet", "regions.parquet", "frames.json"])
@pytest.mark.parametrize("how", ["cut", "gone", "flipped"])
def test_a_damaged_shard_is_removed_so_that_it_is_done_again(work: Path, name: str, how: str) -> None:
    task = one_task()
    do(task, work)
    path = work / "shards" / task.name / name
    content = bytearray(path.read_bytes())
    if how == "cut":
        path.write_bytes(content[: len(content) // 2])
    elif how == "gone":
        path.unlink()
    else:
        content[len(content) // 2] ^= 0x80
        path.write_bytes(content)
    assert paper_of(work, task) is None
    assert not (work / "shards" / task.name).exists()


def test_a_shard_of_other_frames_does_not_count(work: Path) -> None:
    task = one_task()
    do(task, work)
    assert paper_of(work, dataclasses.replace(task, frames=task.frames[:2])) is None


def test_two_workers_at_the_same_task_leave_one_shard(work: Path) -> None:
    task = one_task()
    do(task, work)
    before = {path.name: path.read_bytes() for path in (work / "shards" / task.name).iterdir()}
    do(task, work)
    assert {path.name: path.read_bytes() for path in (work / "shards" / task.name).iterdir()} == before
    assert not list((work / "aside").iterdir())


def test_a_shard_names_no_uid_and_no_path(work: Path) -> None:
    task = one_task()
    do(task, work)
    paper = json.loads((work / "shards" / task.name / "frames.json").read_bytes())
    assert "1.2.3" not in str(paper)
    assert "somewhere" not in str(paper)


def test_merging_without_all_shards_is_an_error(work: Path, tmp_path: Path) -> None:
    with pytest.raises(DossierError, match="missing or damaged"):
        merge([one_task()], work, tmp_path)


def test_merging_sums_what_stands_beside_the_rows(work: Path, tmp_path: Path) -> None:
    task = one_task()
    do(task, work, FakeEvaluation(refuses_on=(("I-cine", 2),)))
    merged = merge([task], work, tmp_path)
    assert merged.assessed == {"F-cine": 3}
    assert merged.notes == {"padding range turned round": 3}
    assert [each.frame for each in merged.left_out] == [2]
    assert sorted(path.name for path in tmp_path.iterdir() if path.is_file()) == [
        "measures.parquet",
        "regions.parquet",
        "windows.parquet",
    ]


class Opener:
    """Opens instances of no file, and keeps count."""

    def __init__(self) -> None:
        self.opened: list[str] = []
        self.open_now = 0
        self.most = 0

    @contextlib.contextmanager
    def __call__(self, which: Instance, /) -> Iterator[Reader]:
        self.opened.append(which.input)
        self.open_now += 1
        self.most = max(self.most, self.open_now)
        with open_instance(which) as reader:
            yield reader
        self.open_now -= 1


def test_tasks_of_one_instance_open_it_once_and_never_hold_two(work: Path) -> None:
    counter = Opener()
    instances = [instance("cine", frames=60, series="R-a"), instance("other", frames=60, series="R-b")]
    tasks = tasks_of(instances)
    assert len(tasks) > 8
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), counter)
    with contextlib.closing(Opened.for_treatment(treatment)) as opened:
        for task in tasks:
            perform(task, treatment, work, (), lambda _: None, opened)
    assert counter.opened == ["F-cine", "F-other"]
    assert (counter.most, counter.open_now) == (1, 0)


def test_an_unforeseen_error_leaves_no_reader_to_the_next_task(work: Path) -> None:
    counter = Opener()
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(raises_on=(("I-cine", 2),)), counter)
    with contextlib.closing(Opened.for_treatment(treatment)) as opened:
        perform(one_task(), treatment, work, (), lambda _: None, opened)
    assert counter.opened == ["F-cine", "F-cine"]
    assert counter.open_now == 0


def test_a_delivered_copy_stays_open_beside_its_original(work: Path) -> None:
    counter = Opener()
    task = one_task()
    copy = instance("returned", frames=4)
    task = dataclasses.replace(task, frames=tuple(dataclasses.replace(each, delivered=copy) for each in task.frames))
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), counter)
    with contextlib.closing(Opened.for_treatment(treatment)) as opened:
        perform(task, treatment, work, (), lambda _: None, opened)
        perform(task, treatment, work, (), lambda _: None, opened)
    assert counter.opened == ["F-cine", "F-returned"]
    assert (counter.most, counter.open_now) == (2, 0)


def test_tasks_of_one_archive_member_follow_each_other_and_all_others_are_mixed(work: Path) -> None:
    members = [
        dataclasses.replace(each, source=Source(Path("z"), each.input))
        for each in (instance("m1", frames=40, series="R-1"), instance("m2", frames=40, series="R-2"))
    ]
    tasks = tasks_of([*members, instance("f1", frames=40, series="R-3"), instance("f2", frames=40, series="R-4")])
    seen = performed_in_order(tasks, work)
    turns = [name for name, _ in itertools.groupby(seen)]
    assert turns.count("F-m1") == turns.count("F-m2") == 1
    assert turns.count("F-f1") > 2
    assert len(seen) == len(tasks)


def performed_in_order(tasks: Sequence[Task], work: Path) -> list[str]:
    """Input of each task, in the order in which a run hands them out."""
    seen: list[str] = []

    class Watch:
        workers = 1

        def perform(
            self,
            tasks: Sequence[Task],
            treatment: Treatment,  # noqa: ARG002
            work: Path,  # noqa: ARG002
        ) -> Generator[Event]:
            seen.extend(task.frames[0].instance.input for task in tasks)
            yield from ()

    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), open_instance)
    run(tasks, treatment, work, executor=Watch(), warm_up=lambda: None, report=lambda _: None)
    return seen
