"""Two runs in one dossier: the second is turned away, whoever it is; what a killed run leaves is no obstacle."""

from __future__ import annotations

import errno
import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

from safecheck.errors import UsageError
from safecheck.runner import lock
from safecheck.runner.manifest import begin
from safecheck.wording import lint
from tests.runner.studies import environment, manifest_of, run_study, study, work_of

BUSY = "another run is at work in the dossier's folder"
HOLD = """
import sys, time
from pathlib import Path
from safecheck.runner.manifest import begin
from tests.runner.studies import manifest_of, study
with begin(Path(sys.argv[1]), manifest_of(study())):
    Path(sys.argv[2]).touch()
    time.sleep(60)
"""


def hold_elsewhere(dossier: Path, sign: Path) -> subprocess.Popen[bytes]:
    """A process that has begun a run and does not end it."""
    process = subprocess.Popen([sys.executable, "-c", HOLD, str(dossier), str(sign)], env=environment())
    until_s = time.monotonic() + 20
    while not sign.exists() and time.monotonic() < until_s:
        time.sleep(0.01)
    assert sign.exists()
    return process


def test_a_second_process_is_turned_away_until_the_first_is_killed(tmp_path: Path) -> None:
    process = hold_elsewhere(tmp_path / "d", tmp_path / "sign")
    try:
        with pytest.raises(UsageError, match=BUSY) as caught:
            begin(tmp_path / "d", manifest_of(study()))
    finally:
        process.kill()
        process.wait()
    assert not list(lint(str(caught.value)))
    assert (tmp_path / "d" / "work" / "lock").exists()
    with begin(tmp_path / "d", manifest_of(study())):
        pass


def test_a_second_run_in_the_same_process_is_turned_away_and_takes_nothing_from_the_first(tmp_path: Path) -> None:
    with begin(tmp_path, manifest_of(study())):
        # Twice: closing the second one's file must not give the first one's lock back.
        for _ in range(2):
            with pytest.raises(UsageError, match=BUSY):
                begin(tmp_path, manifest_of(study()))
    with begin(tmp_path, manifest_of(study())):
        pass


def test_another_run_is_turned_away_before_it_is_compared(tmp_path: Path) -> None:
    with begin(tmp_path, manifest_of(study())), pytest.raises(UsageError, match=BUSY):
        begin(tmp_path, manifest_of(study(), plan_hash="q" * 64))


def test_it_holds_while_a_whole_run_goes_on_and_not_after_one_that_fails(tmp_path: Path) -> None:
    with begin(tmp_path, manifest_of(study())), pytest.raises(UsageError, match=BUSY):
        run_study(tmp_path, study())
    with pytest.raises(ValueError, match="of the body"), begin(tmp_path, manifest_of(study())):
        raise ValueError("of the body")
    run_study(tmp_path, study())


def test_a_comparison_that_fails_gives_the_lock_back(tmp_path: Path) -> None:
    work_of(tmp_path, study())
    for _ in range(2):
        with pytest.raises(UsageError, match="other values of: plan"):
            begin(tmp_path, manifest_of(study(), plan_hash="q" * 64))
    work_of(tmp_path, study())


@pytest.mark.parametrize(
    "number", [errno.EAGAIN, errno.EACCES, errno.EDEADLK], ids=["POSIX", "Windows", "Windows, late"]
)
def test_every_answer_of_a_system_that_another_holds_the_lock_is_understood(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    # fcntl(2): EACCES or EAGAIN; the C runtime's _locking: EACCES, or EDEADLOCK after ten tries.
    def refuse(_: int) -> None:
        raise OSError(number, "")

    monkeypatch.setattr(lock, "_lock", refuse)
    with pytest.raises(UsageError, match=BUSY):
        begin(tmp_path, manifest_of(study()))


def test_a_file_system_without_locks_is_named_as_such(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(_: int) -> None:
        raise OSError(errno.ENOLCK, "")

    monkeypatch.setattr(lock, "_lock", refuse)
    with pytest.raises(UsageError, match=f"cannot be used: {os.strerror(errno.ENOLCK)}"):
        begin(tmp_path, manifest_of(study()))


def test_a_dossier_that_was_finished_in_between_is_not_begun_again(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def finish_first(_: int) -> None:
        (tmp_path / "seal.json").touch()

    monkeypatch.setattr(lock, "_lock", finish_first)
    with pytest.raises(UsageError, match="finished dossier"):
        begin(tmp_path, manifest_of(study()))


def test_a_finished_run_leaves_no_lock(tmp_path: Path) -> None:
    with begin(tmp_path, manifest_of(study())) as held:
        held.finish()
        with begin(tmp_path, manifest_of(study())):
            pass
