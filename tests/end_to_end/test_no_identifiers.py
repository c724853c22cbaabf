"""A study with a canary wherever an identifier may hide, through every command: it turns up nowhere."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from pathlib import Path

import pytest

from synthetic_studies import CanaryTruth, canary_study, deliver
from tests.end_to_end.command import Ended, run
from tests.end_to_end.hospital import CANDIDATES, CHANGE, CHOSEN
from tests.end_to_end.leaks import contents_of, encodings_of, find

CANARY = "QXZJCANARY77"
pytestmark = pytest.mark.slow


@dataclass(frozen=True, slots=True)
class Trip:
    """All commands over the planted study."""

    truth: CanaryTruth
    folder: Path
    """Holds all that the program may write: dossier, key, temporary files, its home."""
    said: dict[str, Ended]

    @property
    def needles(self) -> tuple[str, ...]:
        """Planted words, digits, date and time, and the UIDs of study, series and instances."""
        study = self.truth.study
        return (*self.truth.needles, study.study_uid, study.series_uid, *study.instance_uids)


@pytest.fixture(scope="module")
def trip(tmp_path_factory: pytest.TempPathFactory) -> Trip:
    """Census, dry run, assess, verify, report and lookup; all that they write lies under one folder."""
    inputs, folder = tmp_path_factory.mktemp("in"), tmp_path_factory.mktemp("out")
    truth = canary_study(inputs, CANARY, directory=True)
    copies = inputs / f"{CANARY}_copies"
    deliver(truth.study, copies, step=40.0)
    (inputs / f"{CANARY}.txt").write_text(f"letter to {CANARY}", encoding="utf-8")
    (inputs / f"{CANARY}_loop").symlink_to(inputs)
    assert truth.directory is not None
    paths = (inputs / f"{CANARY}_ward", truth.directory, inputs / f"{CANARY}.txt", inputs / f"{CANARY}_loop")
    home, temporary = folder / "home", folder / "tmp"
    home.mkdir()
    temporary.mkdir()
    key = folder / "site.key"
    plan = folder / "plan.toml"
    # Controls on every frame, so that none depends on the frame that a new key draws.
    plan.write_text(CHANGE + CHOSEN + CANDIDATES + "[controls]\nshare_percent = 100\n", encoding="utf-8")
    assess = ("assess", *paths, "--delivered", copies, "--key", key, "--plan", plan)
    calls: dict[str, tuple[str | Path, ...]] = {
        "census": ("census", *paths, "--key", key, "--draft-plan", folder / "draft.toml"),
        "dry run": (*assess, "--dry-run"),
        "assess": (*assess, "--out", folder / "dossier", "--with-images"),
        "verify": ("verify", folder / "dossier", "--images", *paths[:1], "--delivered", copies, "--key", key),
        "report": ("report", folder / "dossier", "--out", folder / "again.pdf"),
        "lookup": ("lookup", "P-00000-00000", *paths, "--key", key),
        "missing": ("assess", inputs / f"{CANARY}_missing", "--key", key, "--out", folder / "nothing"),
        "plan": ("assess", *paths, "--plan", inputs / f"{CANARY}.txt", "--key", key, "--out", folder / "nothing"),
        "regions": ("assess", *paths, "--regions", truth.study.files[0], "--key", key, "--out", folder / "nothing"),
    }
    places = {"HOME": home, "XDG_CONFIG_HOME": home, "TMPDIR": temporary}
    said = {name: run(*call, folder=folder, **places) for name, call in calls.items()}
    return Trip(truth, folder, said)


def test_the_commands_did_their_work(trip: Trip) -> None:
    codes = {name: ended.code for name, ended in trip.said.items()}
    # Two broken files are refused, of which the plan allows none.
    assert codes == {
        "census": 0,
        "dry run": 0,
        "assess": 3,
        "verify": 0,
        "report": 0,
        "lookup": 2,
        "missing": 2,
        "plan": 2,
        "regions": 2,
    }, trip.said
    record = json.loads((trip.folder / "dossier" / "record.json").read_bytes())
    assert record["inputs"]["assessed"] == len(trip.truth.study.files)
    assert record["inputs"]["refused"] >= len(trip.truth.broken)
    assert record["delivered"]["pairs"] == len(trip.truth.study.files)
    assert list((trip.folder / "dossier" / "places").iterdir()) != []


def test_the_search_would_find_what_it_looks_for(trip: Trip) -> None:
    inputs = trip.truth.study.files[0].parents[2]
    assert {needle for needle, _ in find(trip.needles, contents_of(inputs))} >= {CANARY, trip.truth.study.study_uid}
    assert find([CANARY], [("there", b"xy" + form + b"z") for form in encodings_of(CANARY)]) == [(CANARY, "there")]


def test_no_needle_is_in_any_file_written(trip: Trip) -> None:
    assert find(trip.needles, contents_of(trip.folder)) == []


def test_no_needle_was_said(trip: Trip) -> None:
    said = [(name, f"{ended.out}\n{ended.err}".encode()) for name, ended in trip.said.items()]
    assert find(trip.needles, said) == []


def test_nothing_is_left_among_temporary_files(trip: Trip) -> None:
    assert list((trip.folder / "tmp").iterdir()) == []


def test_the_key_and_its_journal_are_for_their_owner_alone(trip: Trip) -> None:
    if os.name != "posix":
        pytest.skip("permissions of POSIX")
    modes = {path.name: path.stat().st_mode & 0o777 for path in trip.folder.glob("site.key*")}
    assert modes == {"site.key": 0o600, "site.key.journal": 0o600}


def test_no_window_is_named_and_no_title_set(trip: Trip) -> None:
    # OSC 0 and 2 set a terminal's title.
    assert not [name for name, ended in trip.said.items() if "\x1b]" in ended.text]
