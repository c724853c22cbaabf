import os
import signal
import subprocess
import sys
import threading
import time
from collections import Counter
from pathlib import Path

import pytest

from safecheck.errors import Interrupted, WorkerLost
from safecheck.record.tables import read_table
from safecheck.runner.executor import InProcess
from safecheck.runner.merge import merge
from safecheck.runner.pool import LocalPool, cores
from safecheck.runner.progress import Progress
from safecheck.runner.run import RunSummary, run
from safecheck.runner.worker import Treatment
from tests.runner.studies import (
    ASSIGNMENT,
    FakeEvaluation,
    Killed,
    environment,
    instance,
    open_instance,
    run_study,
    study,
    tables_of,
    tasks_of,
    work_of,
)

SMALL = [instance("cine", frames=12, series="R-cine"), instance("one", series="R-one")]


def measured(dossier: Path) -> Counter[tuple[str, int, str]]:
    """How often each row stands in the table."""
    rows = read_table(dossier / "measures.parquet", "measures").to_pylist()
    return Counter((row["instance"], row["frame"], row["candidate"]) for row in rows)


def test_one_and_two_workers_and_this_process_alone_give_the_same_bytes(tmp_path: Path) -> None:
    few = study(slices=4, cine_frames=8)
    run_study(tmp_path / "one", few, workers=1)
    run_study(tmp_path / "two", few[::-1], workers=2)
    work = work_of(tmp_path / "here", few)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), open_instance)
    run(tasks_of(few), treatment, work, executor=InProcess(), warm_up=lambda: None, report=lambda _: None)
    merge(tasks_of(few), work, tmp_path / "here")
    assert tables_of(tmp_path / "one") == tables_of(tmp_path / "two") == tables_of(tmp_path / "here")


def test_a_frame_that_kills_its_worker_twice_is_refused_and_all_others_are_there(tmp_path: Path) -> None:
    reports: list[Progress] = []
    log = tmp_path / "log"
    evaluation = FakeEvaluation(dies_on=(("I-cine", 5),), log=str(log))
    merged = run_study(tmp_path / "d", SMALL, evaluation=evaluation, reports=reports)
    assert [(each.input, each.frame, each.reason) for each in merged.left_out] == [("F-cine", 5, "worker-lost")]
    assert merged.assessed == {"F-cine": 11, "F-one": 1}
    rows = measured(tmp_path / "d")
    assert {(name, frame) for name, frame, _ in rows} == {("I-one", 1)} | {
        ("I-cine", number) for number in range(1, 13) if number != 5
    }
    assert set(rows.values()) == {1}
    assert log.read_text().splitlines().count("I-cine 5") == 2
    notes = [report.note for report in reports if report.note]
    assert notes == [
        "a worker process died; its part is tried once more",
        "a worker process died again on the same frame, which is refused",
    ]


def test_a_worker_that_dies_once_costs_no_frame(tmp_path: Path) -> None:
    evaluation = FakeEvaluation(dies_on=(("I-cine", 5),), dies_once=str(tmp_path / "dead"))
    merged = run_study(tmp_path / "d", SMALL, evaluation=evaluation)
    assert merged.left_out == ()
    run_study(tmp_path / "undisturbed", SMALL)
    assert tables_of(tmp_path / "d") == tables_of(tmp_path / "undisturbed")


def test_two_frames_of_one_task_that_kill_are_both_refused(tmp_path: Path) -> None:
    long = [instance("long", frames=1600, series="R-long", size=(1, 1))]
    first = tasks_of(long)[0]
    assert len(first.frames) > 3
    work = work_of(tmp_path / "d", long)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(dies_on=(("I-long", 1), ("I-long", 3))), open_instance)
    summary = run([first], treatment, work, executor=LocalPool(2), warm_up=lambda: None, report=lambda _: None)
    assert summary == RunSummary(tasks=1, resumed=0, frames=len(first.frames), refused=2, workers_died=4)


def test_a_dead_worker_is_reported_within_ten_seconds_and_long_before_the_run_ends(tmp_path: Path) -> None:
    # Wanted: within 10 s. The other worker is busy for a minute, so nothing else can wake the parent.
    begun, reported = tmp_path / "begun", threading.Event()
    one = [instance("one"), instance("two", series="R-2")]
    work = work_of(tmp_path / "d", one)
    evaluation = FakeEvaluation(takes_s=60, pid_file=str(begun))
    events = LocalPool(2).perform(tasks_of(one), Treatment(ASSIGNMENT, evaluation, open_instance), work)

    def wait() -> None:
        next(events)
        reported.set()

    waiting = threading.Thread(target=wait)
    waiting.start()
    killed_s = Killed.first_pid(begun)
    assert reported.wait(10)
    assert time.monotonic() - killed_s < 10
    waiting.join()
    events.close()


def test_closing_the_run_ends_its_workers_at_once(tmp_path: Path) -> None:
    pids = tmp_path / "pids"
    one = [instance("one"), instance("two", series="R-2")]
    work = work_of(tmp_path / "d", one)
    evaluation = FakeEvaluation(takes_s=60, pid_file=str(pids), dies_on=(("I-two", 1),))
    events = LocalPool(1).perform(tasks_of(one), Treatment(ASSIGNMENT, evaluation, open_instance), work)
    waiting = threading.Thread(target=lambda: next(events, None))
    waiting.start()
    Killed.first_pid(pids)
    waiting.join(10)
    events.close()
    assert not [pid for pid in Killed.all_pids(pids) if Killed.alive(pid)]


def test_workers_that_cannot_even_begin_stop_the_run(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), Killed.on_arrival)
    with pytest.raises(WorkerLost, match="in a row ended before they began"):
        run(tasks_of(SMALL), treatment, work, executor=LocalPool(2), warm_up=lambda: None, report=lambda _: None)


def test_a_treatment_that_workers_cannot_read_is_named_by_its_error(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), Killed.unreadable)
    with pytest.raises(WorkerLost, match="could not take its orders: LookupError"):
        run(tasks_of(SMALL), treatment, work, executor=LocalPool(2), warm_up=lambda: None, report=lambda _: None)


def test_a_dossier_that_can_no_longer_be_written_stops_the_run_without_naming_its_path(tmp_path: Path) -> None:
    work = work_of(tmp_path / "Doe", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(breaks=str(work / "aside")), open_instance)
    with pytest.raises(Interrupted, match=r"refused to write or read: Not a directory; what is finished stays"):
        run(tasks_of(SMALL), treatment, work, executor=LocalPool(1), warm_up=lambda: None, report=lambda _: None)


def test_nothing_that_a_library_prints_or_warns_of_leaves_a_worker(tmp_path: Path) -> None:
    # Had anything mixed with a worker's answers, its frames would be refused.
    code = (
        "from pathlib import Path; from tests.runner.studies import *; "
        f"merged = run_study(Path({str(tmp_path / 'd')!r}), study(1, 3, 1), evaluation=FakeEvaluation(chatty=True)); "
        "assert merged.left_out == ()"
    )
    ran = subprocess.run([sys.executable, "-c", code], capture_output=True, check=True, env=environment())
    assert ran.stdout + ran.stderr == b""


def test_libraries_in_workers_take_one_thread(tmp_path: Path) -> None:
    log = tmp_path / "threads"
    run_study(tmp_path / "d", SMALL, evaluation=FakeEvaluation(environment_log=str(log)))
    assert set(log.read_text().split()) == {"OMP=1", "OPENBLAS=1", "NUMBA=1"}


def test_warming_up_happens_once_before_the_first_task_and_not_where_nothing_is_to_do(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), open_instance)
    calls: list[int] = []
    for _ in range(2):
        run(
            tasks_of(SMALL),
            treatment,
            work,
            executor=InProcess(),
            warm_up=lambda: calls.append(len(list((work / "shards").iterdir()))),
            report=lambda _: None,
        )
    assert calls == [0]


def test_ctrl_c_stops_promptly_keeps_what_is_finished_and_says_so(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(takes_s=0.05), open_instance)

    def press(progress: Progress) -> None:
        if progress.done == 4:
            os.kill(os.getpid(), signal.SIGINT)

    before_s = time.monotonic()
    with pytest.raises(Interrupted, match=r"stopped with [45] of 13 parts done; the same command resumes"):
        run(tasks_of(SMALL), treatment, work, executor=LocalPool(2), warm_up=lambda: None, report=press)
    assert time.monotonic() - before_s < 10
    assert len(list((work / "shards").iterdir())) >= 4
    merged = run_study(tmp_path / "d", SMALL)
    assert merged.left_out == ()
    run_study(tmp_path / "undisturbed", SMALL)
    assert tables_of(tmp_path / "d") == tables_of(tmp_path / "undisturbed")


def test_a_pool_of_no_workers_is_refused() -> None:
    with pytest.raises(ValueError, match="expected at least 1"):
        LocalPool(0)
    assert cores() >= 1
