"""The whole room with the real reader and the real evaluation, on real files of pydicom's test data."""

import os
import signal
from pathlib import Path

import numpy as np
import pytest
from pydicom.data import get_testdata_file

from safecheck.dicom.instance import Instance
from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.reader import open_instance
from safecheck.errors import Interrupted
from safecheck.evaluation import Assignment, Candidate, evaluate, load_kernels
from safecheck.frames import SizeBasis
from safecheck.policy.plan import WindowPlan
from safecheck.regions.region import Grid, MaskOnGrid, OnFrames, Part, Region, RegionSet
from safecheck.regions.shapes import Rectangle
from safecheck.runner.manifest import begin, describe
from safecheck.runner.merge import Merged, merge
from safecheck.runner.pool import LocalPool
from safecheck.runner.progress import Progress
from safecheck.runner.run import run
from safecheck.runner.tasks import plan_tasks
from safecheck.runner.worker import Treatment
from tests.runner.studies import KEY, tables_of

ASSIGNMENT = Assignment(
    (Candidate("tiled 10:1", "tiled", 10.0, SizeBasis.BITS_STORED),),
    (WindowPlan(label="soft tissue", centre=40.0, width=400.0, unit="HU"),),
)


@pytest.fixture(scope="module")
def instances() -> tuple[Instance, ...]:
    """A CT slice, an MR slice, and ten frames of an enhanced MR."""
    names = ("CT_small.dcm", "MR_small.dcm", "emri_small.dcm")
    paths = [Path(str(get_testdata_file(name, download=False))) for name in names]
    return gather(paths, pseudonyms=Pseudonyms(KEY)).instances


def do(dossier: Path, instances: tuple[Instance, ...], workers: int, press_at: int | None = None) -> Merged:
    """One run; with Ctrl-C after so many tasks."""

    def press(progress: Progress) -> None:
        if progress.done == press_at:
            os.kill(os.getpid(), signal.SIGINT)

    manifest = describe(instances, {}, ASSIGNMENT, plan_hash="p", key=KEY, key_id="K", versions={})
    tasks = plan_tasks(instances, {}, manifest, KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1)
    treatment = Treatment(ASSIGNMENT, evaluate, open_instance)
    with begin(dossier, manifest) as held:
        run(tasks, treatment, held.path, executor=LocalPool(workers), warm_up=load_kernels, report=press)
        return merge(tasks, held.path, dossier)


@pytest.mark.slow
def test_one_worker_two_workers_and_a_resumed_run_give_the_same_bytes(
    tmp_path: Path, instances: tuple[Instance, ...]
) -> None:
    assert sorted(each.frames for each in instances) == [1, 1, 10]
    one = do(tmp_path / "one", instances, workers=1)
    assert one.left_out == ()
    assert sorted(one.assessed.values()) == [1, 1, 10]
    with pytest.raises(Interrupted, match="of 12 parts done"):
        do(tmp_path / "two", instances[::-1], workers=2, press_at=3)
    assert do(tmp_path / "two", instances[::-1], workers=2) == one
    assert tables_of(tmp_path / "one") == tables_of(tmp_path / "two")


def hash_of(assignment: Assignment) -> str:
    return describe((), {}, assignment, plan_hash="p", key=KEY, key_id="K", versions={}).assignment


def test_any_change_of_candidates_windows_or_regions_is_another_assignment() -> None:
    def region(height: float, mask_value: float) -> RegionSet:
        shape = Rectangle(centre=(4.0, 4.0), height=height, width=2.0)
        part = Part(placement=OnFrames(rows=16, columns=16), shape=shape)
        mask = MaskOnGrid(Grid(2, 2), np.full((2, 2), mask_value))
        return RegionSet((Region("a", "a", "target", (part, mask)),), "0" * 64)

    assignments = [
        ASSIGNMENT,
        Assignment(ASSIGNMENT.candidates),
        Assignment(ASSIGNMENT.candidates, ASSIGNMENT.windows, region(3, 0.5)),
        Assignment(ASSIGNMENT.candidates, ASSIGNMENT.windows, region(4, 0.5)),
        Assignment(ASSIGNMENT.candidates, ASSIGNMENT.windows, region(3, 0.25)),
    ]
    hashes = [hash_of(each) for each in assignments]
    assert len(set(hashes)) == len(hashes)
    again = Assignment(ASSIGNMENT.candidates, ASSIGNMENT.windows, region(3, 0.5))
    assert hash_of(again) == hashes[2]
