import multiprocessing
import resource
from multiprocessing.connection import Connection
from pathlib import Path

import pytest

from tests.runner.studies import instance, run_study


def peaks_of(dossier: Path, frames: int, answer: Connection) -> None:
    """Largest resident memory of a run's own process and of its worker, in KiB."""
    run_study(dossier, [instance("cine", frames=frames, size=(64, 64))], workers=1)
    answer.send([resource.getrusage(who).ru_maxrss for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)])


@pytest.mark.slow
def test_ten_times_the_frames_take_the_same_memory(tmp_path: Path) -> None:
    # Wanted: 2,000 frames within 1.2 of 200 frames.
    found = []
    for frames in (200, 2000):
        here, there = multiprocessing.Pipe()
        # Started afresh: a fork would begin with the memory of the tests.
        process = multiprocessing.get_context("spawn").Process(
            target=peaks_of, args=(tmp_path / f"{frames}", frames, there)
        )
        process.start()
        found.append(here.recv())
        process.join()
    (own, worker), (own_of_more, worker_of_more) = found
    assert own_of_more < 1.2 * own
    assert worker_of_more < 1.2 * worker
