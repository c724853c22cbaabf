"""The demonstration's folder: new, or that of a run that was stopped."""

from __future__ import annotations

from pathlib import Path

import pytest

from safecheck.errors import UsageError
from safecheck.jobs.demo import DOSSIER, PLAN, REGIONS, STUDY, write_demo
from safecheck.jobs.plans import load_plan
from safecheck.runner.manifest import WORK


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("demo") / "new" / "folder"
    assert write_demo(folder) == folder / PLAN
    return folder


def test_it_holds_a_study_regions_and_a_plan_that_can_be_read(written: Path) -> None:
    assert {path.name for path in written.iterdir()} == {STUDY, REGIONS, PLAN}
    loaded = load_plan(written / PLAN)
    assert (loaded.source, loaded.regions_file) == ("file", written / REGIONS)
    assert {candidate.status for candidate in loaded.plan.candidates} == {"proposed", "context"}


def test_a_folder_that_holds_anything_else_is_refused(written: Path, tmp_path: Path) -> None:
    (tmp_path / "mine").write_text("x", encoding="utf-8")
    for folder in (tmp_path, written):
        with pytest.raises(UsageError, match="not empty; name a new one with --out"):
            write_demo(folder)
    with pytest.raises(UsageError, match="the folder of --out cannot be used: "):
        write_demo(tmp_path / "mine")


def test_the_study_of_a_run_that_was_stopped_is_taken_as_it_is(tmp_path: Path) -> None:
    (tmp_path / DOSSIER / WORK).mkdir(parents=True)
    (tmp_path / PLAN).write_text("as it was", encoding="utf-8")
    assert write_demo(tmp_path).read_text(encoding="utf-8") == "as it was"
