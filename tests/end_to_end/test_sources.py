"""Sources that are lossy already, copies that match nothing, and a census of many real files."""

from __future__ import annotations

import dataclasses
import json
import re
import shutil
from pathlib import Path

import pydicom.data
import pypdf
import pytest

from safecheck.jobs.plans import load_plan
from safecheck.policy.plan import Scope
from synthetic_studies import Manner, already_lossy, ct_body, deliver
from tests.end_to_end.command import run
from tests.end_to_end.hospital import Hospital, assess_here, rows_of


@pytest.fixture(scope="module")
def lossy(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("lossy")
    already_lossy(folder, seed=7, rows=96, columns=96, slices=2)
    return folder


def test_a_lossy_source_is_excluded_with_its_history(hospital: Hospital, lossy: Path, tmp_path: Path) -> None:
    record = assess_here(hospital.request(tmp_path / "d", hospital.ct, lossy))
    assert (record.inputs.assessed, record.inputs.excluded) == (3, 2)
    assert [(entry.reason, entry.files) for entry in record.left_out] == [("already-lossy", 2)]
    rows = [row for row in rows_of(tmp_path / "d", "inputs") if row["status"] == "excluded"]
    assert {(row["lossy"], row["lossy_declared"], row["lossy_method"]) for row in rows} == {
        ("true", "01", "ISO_10918_1")
    }
    assert all(row["lossy_ratio"] and row["lossy_evidence"] for row in rows)


def test_allowed_a_lossy_source_is_second_generation_on_every_row_and_page(lossy: Path, tmp_path: Path) -> None:
    arguments = ("assess", lossy, "--codecs", "jpeg2000", "--ratios", "5", "--key", "key", "--out", "d")
    ended = run(*arguments, "--allow-lossy-source", folder=tmp_path)
    assert ended.code == 0, ended.err
    rows = rows_of(tmp_path / "d", "measures")
    assert {(row["generation"], row["source_lossy"]) for row in rows} == {("second", "true")}
    pages = [re.sub(r"\s+", " ", page.extract_text()) for page in pypdf.PdfReader(tmp_path / "d" / "report.pdf").pages]
    assert [number for number, page in enumerate(pages, 1) if "second generation" not in page.lower()] == []
    record = json.loads((tmp_path / "d" / "record.json").read_bytes())
    assert "second generation" in record["candidates"][0]["note"]
    assert any(caution.startswith("Some sources were already lossy") for caution in record["cautions"])


def test_without_it_nothing_is_assessed(lossy: Path, tmp_path: Path) -> None:
    arguments = ("assess", lossy, "--codecs", "jpeg2000", "--ratios", "5", "--key", "key", "--out", "d")
    ended = run(*arguments, folder=tmp_path)
    assert (ended.code, "2 files excluded" in ended.out) == (3, True)


def test_copies_and_originals_without_the_other_side_are_counted(hospital: Hospital, tmp_path: Path) -> None:
    original = ct_body(tmp_path / "original", seed=11, rows=96, columns=96, slices=3)
    other = ct_body(tmp_path / "other", seed=12, rows=96, columns=96, slices=1)
    copies = deliver(original, tmp_path / "delivered", step=24.0, manner=Manner(ratio=False))
    deliver(other, tmp_path / "delivered" / "stray", step=24.0)
    copies.files[0].unlink()
    (tmp_path / "delivered" / "note.txt").write_text("none", encoding="utf-8")
    request = hospital.request(tmp_path / "d", tmp_path / "original")
    record = assess_here(dataclasses.replace(request, delivered=(tmp_path / "delivered",)))
    delivered = record.delivered
    assert delivered is not None
    assert (delivered.pairs, delivered.originals_without_copy, delivered.copies_without_original) == (2, 1, 1)
    counts = record.inputs
    # Two measured; the stray one has no original, and the note is no image.
    assert (counts.delivered_files, counts.delivered_assessed, counts.delivered_excluded) == (4, 2, 2)
    assert counts.files == counts.assessed + counts.excluded + counts.refused == 3
    ratio = next(entry for entry in delivered.expectations if "Ratio" in entry.attribute)
    assert (ratio.as_asked, ratio.not_as_asked) == (0, 2)
    # What was planted comes back: computed when the copies were made.
    rows = [row for row in rows_of(tmp_path / "d", "measures") if row["role"] == "delivered"]
    planted = sorted((pair.rmse_frame, abs(pair.maximum)) for pair in copies.pairs[1:])
    assert sorted(float(row["rmse_frame"]) for row in rows) == pytest.approx([rmse for rmse, _ in planted], rel=1e-9)
    sides = [(row["side"], row["matched"]) for row in rows_of(tmp_path / "d", "inputs")]
    assert sides.count(("original", "unmatched")) == 1
    assert sides.count(("delivered", "unmatched")) == 1


def real_folders() -> list[Path]:
    """The folders of all files of pydicom and pydicom-data, as somebody would hand them over."""
    names = ("CT_small.dcm", "693_UNCR.dcm")
    return [Path(str(pydicom.data.get_testdata_file(name, download=False))).parent for name in names]


def number_in(pattern: str, text: str) -> int:
    found = re.search(pattern, text)
    assert found is not None, text
    return int(found.group(1))


@pytest.mark.slow
def test_the_sums_of_a_census_of_many_real_files_agree_and_its_draft_can_be_filled_in(tmp_path: Path) -> None:
    folders = real_folders()
    ended = run("census", *folders, "--draft-plan", "draft.toml", "--key", "key", folder=tmp_path)
    assert ended.code == 0, ended.err
    files = number_in(r"^(\d+) files: ", ended.out)
    assessed, left = number_in(r": (\d+) images that could", ended.out), number_in(r"(\d+) left out", ended.out)
    assert files == assessed + left > 200
    assert left == sum(map(int, re.findall(r"^(?:excluded|refused): (\d+) - ", ended.out, re.MULTILINE)))
    assert assessed == sum(map(int, re.findall(r"(\d+) instances?, ", ended.out)))
    assert number_in(r"Already lossy: (\d+)", ended.out) > 20
    assert files >= sum(1 for folder in folders for path in folder.rglob("*") if path.is_file())
    plan = tmp_path / "draft.toml"
    text = plan.read_text(encoding="utf-8").replace('"to be filled in', '"filled in')
    plan.write_text(text.replace("2000-01-01 # to be filled in", "2026-01-15"), encoding="utf-8")
    loaded = load_plan(plan)
    assert {"CT", "MR", "US"} <= set(loaded.plan.scope.modalities)
    assert loaded.plan.scope == Scope(modalities=loaded.plan.scope.modalities)
    shutil.copytree(folders[0].parent / "test_files" / "dicomdirtests", tmp_path / "again")
    repeated = run("census", "again", "--draft-plan", "draft.toml", "--key", "key", folder=tmp_path)
    assert (repeated.code, "exists already" in repeated.err) == (2, True)
