"""A plan counts as declared before the run only if nobody had results of the same inputs when it was first seen."""

from __future__ import annotations

import dataclasses
import json
import re
from pathlib import Path

import pypdf
import pytest

from safecheck.jobs.assess import AssessRequest
from tests.end_to_end.command import run
from tests.end_to_end.hospital import CANDIDATES, CHANGE, CHOSEN, Hospital, assess_here, limit


def declared(dossier: Path) -> str:
    found = json.loads((dossier / "run.json").read_bytes())["plan_declared"]
    assert isinstance(found, str)
    return found


def first_page(dossier: Path) -> str:
    pages = pypdf.PdfReader(dossier / "report.pdf").pages
    return re.sub(r"\s+", " ", " ".join(page.extract_text() for page in pages[:2]))


@pytest.fixture
def request_of(hospital: Hospital, tmp_path: Path) -> AssessRequest:
    """A run over the CT under a key of its own, whose journal is empty."""
    (tmp_path / "a.toml").write_text(CHANGE + CHOSEN + CANDIDATES + limit(10), encoding="utf-8")
    (tmp_path / "b.toml").write_text(CHANGE + CHOSEN + CANDIDATES + limit(1000), encoding="utf-8")
    return AssessRequest((hospital.ct,), tmp_path / "a", plan_file=tmp_path / "a.toml", key_file=tmp_path / "key")


def test_a_plan_first_seen_after_results_of_the_same_inputs_is_marked(
    request_of: AssessRequest, hospital: Hospital, tmp_path: Path
) -> None:
    assess_here(request_of)
    assert declared(tmp_path / "a") == "before the first results"
    later = dataclasses.replace(request_of, out=tmp_path / "b", plan_file=tmp_path / "b.toml")
    assess_here(later)
    assert declared(tmp_path / "b") == "after the first results"
    assert "FIRST SEEN AFTER RESULTS OF THE SAME INPUTS" in first_page(tmp_path / "b")
    assert "AFTER RESULTS" not in first_page(tmp_path / "a")
    assert "after the first results" in (tmp_path / "b" / "summary.txt").read_text(encoding="utf-8")
    # The first plan stays what it was, and other inputs have no results yet.
    assess_here(dataclasses.replace(request_of, out=tmp_path / "c"))
    assert declared(tmp_path / "c") == "before the first results"
    others = dataclasses.replace(later, out=tmp_path / "d", paths=(hospital.studies / "mr",))
    assess_here(others)
    assert declared(tmp_path / "d") == "before the first results"


def test_a_dry_run_prints_the_hash_that_the_record_then_holds_and_registers_the_plan(
    request_of: AssessRequest, hospital: Hospital, tmp_path: Path
) -> None:
    plan, key = tmp_path / "b.toml", tmp_path / "key"
    ended = run("assess", hospital.ct, "--plan", plan, "--key", key, "--dry-run", folder=tmp_path)
    assert ended.code == 0, ended.err
    assert not (tmp_path / "a").exists()
    found = re.search(r"Plan hash \(SHA-256\): ([0-9a-f]{64})", ended.out)
    assert found is not None
    assess_here(request_of)
    later = dataclasses.replace(request_of, out=tmp_path / "b", plan_file=plan)
    assert assess_here(later).plan.sha256 == found.group(1)
    # First seen in the dry run, before anyone had results.
    assert declared(tmp_path / "b") == "before the first results"
    for words in ("Files: 3 to assess", "Frames: 3", "Time: about", "Disk: about"):
        assert words in ended.out


def test_candidates_of_the_command_line_are_no_declared_plan(hospital: Hospital, tmp_path: Path) -> None:
    request = AssessRequest(
        (hospital.ct,), tmp_path / "d", ratios=(5.0,), codecs=("jpeg2000",), key_file=tmp_path / "key"
    )
    assert assess_here(request).plan.source == "command line"
    assert declared(tmp_path / "d") == "not known"
