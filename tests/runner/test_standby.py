from __future__ import annotations

from pathlib import Path

from safecheck.runner.pool import LocalPool
from safecheck.runner.run import run
from safecheck.runner.standby import Standby
from safecheck.runner.worker import Treatment
from tests.runner.studies import ASSIGNMENT, FakeEvaluation, instance, open_instance, tasks_of, work_of

ONE = [instance("one", series="R-one")]


def test_the_worker_on_standby_does_the_first_task_and_prepares_itself_before(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", ONE)
    log = tmp_path / "pid"
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(pid_file=str(log)), open_instance)
    with Standby() as standby:
        process = standby._process
        assert process is not None
        standby.prepare()
        summary = run(
            tasks_of(ONE),
            treatment,
            work,
            executor=LocalPool(2, standby),
            warm_up=lambda: None,
            report=lambda _: None,
        )
        assert standby.take() is None
    assert (summary.tasks, summary.workers_died) == (1, 0)
    assert log.read_text().split()[0] == str(process.pid)
    assert process.returncode is not None


def test_a_worker_that_nobody_took_is_ended() -> None:
    with Standby() as standby:
        process = standby._process
    assert process is not None
    assert process.returncode is not None


def test_a_worker_that_died_on_standby_is_replaced(tmp_path: Path) -> None:
    work = work_of(tmp_path / "d", ONE)
    with Standby() as standby:
        assert standby._process is not None
        standby._process.kill()
        standby._process.wait()
        standby.prepare()
        summary = run(
            tasks_of(ONE),
            Treatment(ASSIGNMENT, FakeEvaluation(), open_instance),
            work,
            executor=LocalPool(2, standby),
            warm_up=lambda: None,
            report=lambda _: None,
        )
    assert (summary.tasks, summary.refused) == (1, 0)
