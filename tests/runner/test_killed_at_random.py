"""The law: whatever is killed and whenever, no row twice, none lost, the tables equal byte for byte."""

import multiprocessing
import os
import random
import signal
import time
from collections import Counter
from multiprocessing.context import ForkServerProcess
from pathlib import Path

import pytest

from safecheck.record.tables import read_table
from tests.runner.studies import FakeEvaluation, Killed, run_study, study, tables_of

TAKES_S = 0.02
PROCESSES = multiprocessing.get_context("forkserver")
# What the runs import is there when they start, so that they can be killed early.
PROCESSES.set_forkserver_preload(["tests.runner.studies"])


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    dossier = tmp_path_factory.mktemp("undisturbed") / "d"
    run_study(dossier, study(), workers=1)
    return dossier


def start(dossier: Path, log: Path, workers: int = 2, takes_s: float = TAKES_S) -> ForkServerProcess:
    """Do a whole run in a process of its own."""
    process = PROCESSES.Process(target=whole_run, args=(dossier, log, workers, takes_s))
    process.start()
    return process


def whole_run(dossier: Path, log: Path, workers: int, takes_s: float) -> None:
    """What that process does."""
    run_study(dossier, study(), workers=workers, evaluation=FakeEvaluation(takes_s=takes_s, log=str(log)))


def wait_for_frames(log: Path, frames: int, process: ForkServerProcess) -> None:
    """Wait until so many frames were begun since the log was removed, or the run is over."""
    while process.is_alive() and (not log.exists() or len(log.read_text().splitlines()) < frames):
        time.sleep(0.002)


def kill(process: ForkServerProcess) -> bool:
    """Kill a run; whether it was still going on."""
    process.kill()
    process.join()
    return process.exitcode == -signal.SIGKILL


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(4))
def test_killed_five_times_and_started_again_the_tables_are_the_same(
    tmp_path: Path, undisturbed: Path, seed: int
) -> None:
    chance = random.Random(seed)
    dossier, log = tmp_path / "d", tmp_path / "log"
    killed = 0
    for _ in range(5):
        log.unlink(missing_ok=True)
        process = start(dossier, log, workers=1 + seed % 2)
        # From before the first frame up to one in three of those left, and anywhere within a frame.
        wait_for_frames(log, chance.randrange(0, 8), process)
        time.sleep(chance.uniform(0, 2 * TAKES_S))
        killed += kill(process)
    assert killed == 5
    run_study(dossier, study())
    assert tables_of(dossier) == tables_of(undisturbed)
    rows = read_table(dossier / "measures.parquet", "measures").to_pylist()
    assert set(Counter((row["instance"], row["frame"], row["candidate"]) for row in rows).values()) == {1}


def test_killed_while_it_merges_and_started_again_the_tables_are_the_same(tmp_path: Path, undisturbed: Path) -> None:
    dossier, log = tmp_path / "d", tmp_path / "log"
    process = start(dossier, log)
    while process.is_alive() and not list(dossier.glob("*.parquet*")):
        time.sleep(0.001)
    assert kill(process)
    run_study(dossier, study())
    assert tables_of(dossier) == tables_of(undisturbed)


def test_workers_killed_at_random_cost_no_frame(tmp_path: Path, undisturbed: Path) -> None:
    chance = random.Random(7)
    dossier, log = tmp_path / "d", tmp_path / "log"
    process = start(dossier, log)
    # Long before the end: then come the tasks tried once more, and a frame that is killed twice is refused by design.
    for frames in (3, 9, 15):
        wait_for_frames(log, frames, process)
        time.sleep(chance.uniform(0, TAKES_S))
        os.kill(chance.choice(Killed.workers_of(process.pid or 0)), signal.SIGKILL)
    process.join()
    assert process.exitcode == 0
    assert tables_of(dossier) == tables_of(undisturbed)


def test_workers_do_not_outlive_a_run_that_is_killed(tmp_path: Path) -> None:
    dossier, log = tmp_path / "d", tmp_path / "log"
    # Each frame takes a minute: nobody is to wait until it is done.
    process = start(dossier, log, takes_s=60)
    wait_for_frames(log, 2, process)
    workers = Killed.workers_of(process.pid or 0)
    assert len(workers) == 2
    assert kill(process)
    until_s = time.monotonic() + 5
    while any(Killed.alive(pid) for pid in workers) and time.monotonic() < until_s:
        time.sleep(0.01)
    assert not [pid for pid in workers if Killed.alive(pid)]
