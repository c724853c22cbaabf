"""What a run ends with: one code for each condition, the most serious one wins, and all stand in the record."""

from __future__ import annotations

import dataclasses
import json
import signal
import subprocess
import time
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pypdf
import pytest
from pydicom import dcmread

from safecheck.codecs.base import Codec
from safecheck.errors import Interrupted, ResumeMismatch
from safecheck.evaluation import treatment
from safecheck.frames import PixelFormat, Samples
from safecheck.jobs import assess as assess_module
from safecheck.jobs.assess import AssessRequest, prepare_run
from safecheck.record.document import RecordDocument
from safecheck.runner.progress import Progress
from synthetic_studies import ct_body
from tests.end_to_end.command import command_line, environment_of, run
from tests.end_to_end.hospital import CANDIDATES, CHANGE, CHOSEN, PLAN, Hospital, assess_here, limit

RANDOM = '[sample]\ndrawn = "random"\nsource = "all CT of one month"\n\n'
CLAIM = "[claim]\nexceeding_at_most_percent = 5\n\n"


def write_plan(folder: Path, *parts: str) -> Path:
    path = folder / "plan.toml"
    path.write_text(CHANGE + "".join(parts), encoding="utf-8")
    return path


def damaged_file(hospital: Hospital, folder: Path) -> Path:
    """A CT slice that ends before its pixels do."""
    whole = sorted(hospital.ct.iterdir())[0].read_bytes()
    path = folder / "damaged"
    path.write_bytes(whole[: len(whole) - 4000])
    return path


def codes_of(record: RecordDocument) -> list[int]:
    return [condition.code for condition in record.conditions]


def pages_of(dossier: Path) -> list[str]:
    return [" ".join(page.extract_text().split()) for page in pypdf.PdfReader(dossier / "report.pdf").pages]


def test_without_limits_a_run_says_so_and_ends_with_0(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES)
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert (record.exit_code, codes_of(record), record.outcomes_text) == (0, [], "no limits declared")


def test_more_refused_than_the_plan_allows_ends_with_3(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES)
    damaged = damaged_file(hospital, tmp_path)
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, damaged, plan=plan))
    assert (record.exit_code, codes_of(record), record.inputs.refused) == (3, [3], 1)
    assert [entry.reason for entry in record.left_out] == ["truncated"]


def test_as_many_refused_as_the_plan_allows_is_no_condition(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, "[allowed]\nrefused_percent = 25\n")
    damaged = damaged_file(hospital, tmp_path)
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, damaged, plan=plan))
    assert (record.exit_code, record.inputs.refused, record.inputs.assessed) == (0, 1, 3)


def test_more_excluded_than_the_plan_allows_ends_with_3(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, "[allowed]\nexcluded_percent = 10\n")
    (tmp_path / "letter.txt").write_text("no image", encoding="utf-8")
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, tmp_path / "letter.txt", plan=plan))
    assert (record.exit_code, record.inputs.excluded) == (3, 1)


def test_nothing_to_assess_ends_with_3_and_still_writes_a_dossier(tmp_path: Path) -> None:
    (tmp_path / "in").mkdir()
    (tmp_path / "in" / "letter").write_text("no image", encoding="utf-8")
    ended = run("assess", "in", "--out", "d", "--key", "key", folder=tmp_path)
    assert (ended.code, "Exit 3: " in ended.out) == (3, True)
    assert run("verify", "d", folder=tmp_path).code == 0
    record = json.loads((tmp_path / "d" / "record.json").read_bytes())
    assert (record["inputs"]["files"], record["inputs"]["excluded"]) == (1, 1)
    assert len(pages_of(tmp_path / "d")) >= 1


def test_limits_that_meet_no_image_end_with_3(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, limit(10, modality="MR"))
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert (record.exit_code, record.outcomes_text) == (3, "1 not evaluated")


def test_a_proposed_candidate_outside_a_limit_ends_with_10(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, limit(0.001))
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert (record.exit_code, codes_of(record)) == (10, [10])
    outcome = next(entry for entry in record.outcomes if entry.status == "proposed")
    assert (outcome.outcome, outcome.values, outcome.values_outside) == ("outside declared limits", 3, 3)


def test_a_context_candidate_outside_a_limit_does_not_decide(hospital: Hospital, tmp_path: Path) -> None:
    candidates = CANDIDATES.replace(
        'codec = "jpeg2000"\nratio = 5', 'codec = "jpeg2000"\nratio = 5\nstatus = "context"'
    )
    plan = write_plan(tmp_path, CHOSEN, candidates, limit(0.001))
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert {entry.outcome for entry in record.outcomes} == {"outside declared limits"}
    assert record.exit_code != 10


@pytest.mark.parametrize("sample", [RANDOM, CHOSEN], ids=["few patients", "not random"])
def test_a_claim_that_the_sample_cannot_carry_ends_with_7(hospital: Hospital, tmp_path: Path, sample: str) -> None:
    plan = write_plan(tmp_path, sample, CLAIM, CANDIDATES, limit(1000))
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert (record.exit_code, codes_of(record)) == (7, [7])


def test_of_several_conditions_the_first_in_order_wins_and_all_are_recorded(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, RANDOM, CLAIM, CANDIDATES, limit(0.001))
    damaged = damaged_file(hospital, tmp_path)
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, damaged, plan=plan))
    assert (record.exit_code, codes_of(record)) == (3, [3, 10, 7])
    text = " ".join(pages_of(tmp_path / "d"))
    assert all(condition.text in text for condition in record.conditions)


def flip_one_bit(codec: Codec, code: bytes, form: PixelFormat, shape: tuple[int, int]) -> Samples:
    """Decode, and flip the lowest bit of one sample."""
    samples = np.array(codec.decode(code, form, shape))
    samples.flat[samples.size // 2] ^= 1
    return samples


def test_one_bit_between_decoder_and_measures_makes_the_run_invalid_on_every_page(
    hospital: Hospital, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(treatment, "decode", flip_one_bit)
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, limit(0.001))
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert (record.exit_code, codes_of(record), record.controls_held) == (4, [4, 10], False)
    reversible = next(entry for entry in record.controls if (entry.control, entry.not_held) == ("reversible", 3))
    assert reversible.first_not_held is not None
    pages = pages_of(tmp_path / "d")
    assert len(pages) > 3
    assert [number for number, page in enumerate(pages, 1) if "RUN INVALID" not in page] == []
    assert "RUN INVALID" in (tmp_path / "d" / "summary.txt").read_text(encoding="utf-8")


def key_that_draws(request: AssessRequest, instance_number: int, folder: Path) -> Path:
    """A site key under which the one frame with full controls is that of this instance."""
    for number in range(200):
        key = folder / f"{number}.key"
        key.write_text(f"{number:064x}", encoding="utf-8")
        key.chmod(0o600)
        tasks = prepare_run(dataclasses.replace(request, key_file=key), lambda _: None).tasks
        drawn = [each.instance.instance_number for task in tasks for each in task.frames if each.full_controls]
        if drawn == [instance_number]:
            return key
    raise AssertionError("no key draws that instance")


def test_a_refused_frame_that_was_to_carry_the_controls_does_not_make_the_run_invalid(
    hospital: Hospital, tmp_path: Path
) -> None:
    header = dcmread(sorted(hospital.ct.iterdir())[0])
    header.SOPInstanceUID, header.InstanceNumber, header.RescaleSlope = "2.25.99", 99, "0"
    header.file_meta.MediaStorageSOPInstanceUID = header.SOPInstanceUID
    header.save_as(tmp_path / "doubtful.dcm", enforce_file_format=True)
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES, "[allowed]\nrefused_percent = 25\n")
    request = hospital.request(tmp_path / "d", hospital.ct, tmp_path / "doubtful.dcm", plan=plan)
    key = key_that_draws(request, 99, tmp_path)
    record = assess_here(dataclasses.replace(request, key_file=key))
    assert (record.inputs.assessed, record.inputs.refused) == (3, 1)
    assert {control.control for control in record.controls} >= {"repeat", "over-compressed", "planted"}
    assert (record.exit_code, record.controls_held) == (0, True)


def test_no_page_says_invalid_where_controls_held(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES)
    assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    assert [page for page in pages_of(tmp_path / "d") if "RUN INVALID" in page] == []


def stop_at(parts: int) -> Callable[[Progress], None]:
    """A report that is stopped as by Ctrl-C once so many parts are done."""

    def report(progress: Progress) -> None:
        if progress.done >= parts:
            raise KeyboardInterrupt

    return report


@pytest.fixture(scope="module")
def stopped(hospital: Hospital, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A run over the CT that was stopped after its first part."""
    out = tmp_path_factory.mktemp("stopped") / "d"
    with pytest.raises(Interrupted, match=r"stopped with 1 of \d+ parts done; the same command resumes"):
        assess_here(hospital.request(out, hospital.studies), stop_at(1))
    return out


def another_plan(hospital: Hospital, folder: Path) -> list[str | Path]:
    path = hospital.folder / "another.toml"
    path.write_text(PLAN.replace("CHANGE-17", "CHANGE-18"), encoding="utf-8")
    return [hospital.studies, "--plan", path, "--key", hospital.key]


def another_key(hospital: Hospital, folder: Path) -> list[str | Path]:
    return [hospital.studies, "--plan", hospital.plan, "--key", folder / "another.key"]


def another_input(hospital: Hospital, folder: Path) -> list[str | Path]:
    return [hospital.ct, "--plan", hospital.plan, "--key", hospital.key]


@pytest.mark.parametrize(
    ("call", "named"),
    [(another_plan, "plan"), (another_key, "site key"), (another_input, "inputs")],
    ids=["plan", "key", "input"],
)
def test_resuming_with_anything_else_ends_with_2_and_says_what(
    hospital: Hospital, stopped: Path, tmp_path: Path, call: Callable[[Hospital, Path], list[str | Path]], named: str
) -> None:
    ended = run("assess", *call(hospital, tmp_path), "--out", stopped, folder=tmp_path)
    assert (ended.code, f"begun with other values of: {named}" in ended.err) == (2, True), ended.err


def test_resuming_with_another_version_is_refused(
    hospital: Hospital, stopped: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(assess_module, "versions", lambda: {"safecheck": "9.9.9"})
    with pytest.raises(ResumeMismatch, match=r"version of safecheck \(0\.1\.0 then, 9\.9\.9 now\)"):
        assess_here(hospital.request(stopped, hospital.studies))


def test_a_finished_dossier_is_never_written_over(hospital: Hospital, tmp_path: Path) -> None:
    plan = write_plan(tmp_path, CHOSEN, CANDIDATES)
    arguments: Sequence[str | Path] = ["assess", hospital.ct, "--plan", plan, "--key", hospital.key, "--out", "d"]
    assess_here(hospital.request(tmp_path / "d", hospital.ct, plan=plan))
    before = (tmp_path / "d" / "SHA256SUMS").read_bytes()
    ended = run(*arguments, folder=tmp_path)
    assert (ended.code, "holds a finished dossier" in ended.err) == (2, True)
    assert (tmp_path / "d" / "SHA256SUMS").read_bytes() == before


@pytest.mark.slow
def test_ctrl_c_ends_with_5_and_the_same_command_gives_the_tables_of_an_undisturbed_run(tmp_path: Path) -> None:
    ct_body(tmp_path / "in", seed=5, rows=128, columns=128, slices=32)
    arguments = ["assess", "in", "--codecs", "jpeg2000", "--ratios", "5,10", "--key", "key", "--out"]
    process = subprocess.Popen(
        command_line(*arguments, "d"), cwd=tmp_path, env=environment_of(), stderr=subprocess.PIPE, text=True
    )
    while not list(tmp_path.glob("d/work/shards/*")) and process.poll() is None:
        time.sleep(0.02)
    process.send_signal(signal.SIGINT)
    said = process.communicate(timeout=60)[1]
    assert process.returncode == 5, said
    assert "the same command resumes" in said.splitlines()[-1]
    assert "Traceback" not in said
    assert not (tmp_path / "d" / "record.json").exists()
    resumed = run(*arguments, "d", "--workers", "1", folder=tmp_path)
    assert (resumed.code, "parts were done before" in resumed.err) == (0, True), resumed.err
    request = AssessRequest((tmp_path / "in",), tmp_path / "e", ratios=(5.0, 10.0), codecs=("jpeg2000",))
    assess_here(dataclasses.replace(request, key_file=tmp_path / "key"))
    names = ["record.json", *(f"{table}.parquet" for table in ("inputs", "measures", "regions", "windows"))]
    for name in names:
        assert (tmp_path / "d" / name).read_bytes() == (tmp_path / "e" / name).read_bytes(), name
    assert json.loads((tmp_path / "d" / "run.json").read_bytes())["sessions"] == 2
