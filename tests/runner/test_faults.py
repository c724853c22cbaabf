"""A full disk and its like, planted where files are written: the run stops, says why, and goes on later."""

from __future__ import annotations

import errno
import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from safecheck.errors import DossierError, Interrupted
from safecheck.record.tables import write_table
from safecheck.runner import merge as merge_module
from safecheck.runner import shards
from safecheck.runner.executor import InProcess
from safecheck.runner.faults import resumable, word_of
from safecheck.runner.merge import merge
from safecheck.runner.pool import LocalPool
from safecheck.runner.run import run
from safecheck.runner.worker import Treatment
from safecheck.wording import lint
from tests.runner.studies import (
    ASSIGNMENT,
    FakeEvaluation,
    instance,
    open_instance,
    run_study,
    tables_of,
    tasks_of,
    work_of,
)

SMALL = [instance("cine", frames=6, series="R-cine"), instance("one", series="R-one")]
FAULTS = [
    pytest.param(errno.ENOSPC, id="disk full"),
    pytest.param(errno.EDQUOT, id="quota"),
    pytest.param(errno.EIO, id="device"),
    pytest.param(errno.EROFS, id="read-only"),
]


def full_after(writes: int, real: Callable[..., Any], number: int) -> Callable[..., Any]:
    """A write that finds the disk full after so many, and names a path as the system does."""
    done = [0]

    def write(path: Path, *rest: Any) -> Any:
        done[0] += 1
        if done[0] > writes:
            path.write_bytes(b"PAR1 cut short")
            raise OSError(number, os.strerror(number), "Doe_Jane")
        return real(path, *rest)

    return write


def heard(caught: pytest.ExceptionInfo[Interrupted], number: int) -> None:
    """One sentence with the system's word and no path."""
    text = str(caught.value)
    assert os.strerror(number) in text
    assert "Doe" not in text
    assert "/" not in text.replace(os.strerror(number), "")
    assert not list(lint(text))
    assert caught.value.__cause__ is None


@pytest.mark.parametrize("number", FAULTS)
def test_a_full_disk_under_a_shard_stops_the_run_and_the_same_run_goes_on(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    work = work_of(tmp_path / "d", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(), open_instance)
    with monkeypatch.context() as patched:
        patched.setattr(shards, "write_table", full_after(7, write_table, number))
        with pytest.raises(Interrupted, match="the same command goes on") as caught:
            run(tasks_of(SMALL), treatment, work, executor=InProcess(), warm_up=lambda: None, report=lambda _: None)
    heard(caught, number)
    assert len(list((work / "shards").iterdir())) == 2
    run_study(tmp_path / "d", SMALL, workers=1)
    run_study(tmp_path / "undisturbed", SMALL, workers=1)
    assert tables_of(tmp_path / "d") == tables_of(tmp_path / "undisturbed")


@pytest.mark.parametrize("number", FAULTS)
def test_a_full_disk_under_a_merged_table_stops_the_run_and_the_same_run_goes_on(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    with monkeypatch.context() as patched:
        patched.setattr(merge_module, "write_table", full_after(1, write_table, number))
        with pytest.raises(Interrupted, match="the same command goes on") as caught:
            run_study(tmp_path / "d", SMALL, workers=1)
    heard(caught, number)
    assert not (tmp_path / "d" / "windows.parquet").exists()
    run_study(tmp_path / "d", SMALL, workers=1)
    run_study(tmp_path / "undisturbed", SMALL, workers=1)
    assert tables_of(tmp_path / "d") == tables_of(tmp_path / "undisturbed")


def test_a_worker_process_tells_the_fault_by_its_word(tmp_path: Path) -> None:
    work = work_of(tmp_path / "Doe", SMALL)
    treatment = Treatment(ASSIGNMENT, FakeEvaluation(breaks=str(work / "aside")), open_instance)
    with pytest.raises(Interrupted, match="the same command goes on") as caught:
        run(tasks_of(SMALL), treatment, work, executor=LocalPool(1), warm_up=lambda: None, report=lambda _: None)
    heard(caught, errno.ENOTDIR)


def test_a_fault_without_a_number_has_no_word_of_the_system() -> None:
    # strerror(0) is "Success", which would tell the contrary.
    assert word_of(OSError("Doe_Jane")) == "a fault without a number"


def test_a_reader_that_is_gone_is_no_fault_of_the_dossier() -> None:
    with pytest.raises(BrokenPipeError, match="gone"), resumable():
        raise BrokenPipeError(errno.EPIPE, "gone")


def test_other_errors_pass() -> None:
    with pytest.raises(DossierError, match="damaged"), resumable():
        raise DossierError("damaged")
    with pytest.raises(DossierError, match="missing or damaged"):
        merge(tasks_of(SMALL), Path("nowhere"), Path("nowhere"))
