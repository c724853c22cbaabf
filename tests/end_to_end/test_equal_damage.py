"""Equal damage on images: the ratio told is run, and does the damage told."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
import rfc8785

from safecheck.jobs.assess import AssessRequest
from safecheck.jobs.verify import verify
from safecheck.record.document import RecordDocument
from safecheck.report.seal import write_seal
from synthetic_studies import ct_body
from tests.end_to_end.command import run
from tests.end_to_end.hospital import CHANGE, CHOSEN, assess_here, rows_of
from tests.report.pages import page_texts

RATIOS = (6, 9, 15, 21)
ONE = "jpeg2000 9:1"
SHAPE = """\
[[limits]]
name = "likeness"
measure = "ssim"
unit = "1"
at_least = 0.5
declared_by = "medical physicist"
declared_on = 2026-01-15
"""


def candidate(codec: str, ratio: float) -> str:
    return f'[[candidates]]\ncodec = "{codec}"\nratio = {ratio}\n\n'


def plan_of(candidates: str, *, reference: str = "") -> str:
    return f'reference = "{reference}"\n{CHANGE}{CHOSEN}{candidates}{SHAPE}'


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A CT study of three frames."""
    made = tmp_path_factory.mktemp("equal")
    ct_body(made / "ct", seed=5, rows=256, columns=256, slices=3)
    return made


def assessed(folder: Path, name: str, plan: str) -> RecordDocument:
    """Run a plan over the study."""
    (folder / f"{name}.toml").write_text(plan, encoding="utf-8")
    request = AssessRequest((folder / "ct",), folder / name, plan_file=folder / f"{name}.toml", key_file=folder / "key")
    return assess_here(request)


@pytest.fixture(scope="module")
def record(folder: Path) -> RecordDocument:
    """Two codecs at four ratios each."""
    candidates = "".join(candidate(codec, ratio) for codec in ("jpeg2000", "tiled") for ratio in RATIOS)
    return assessed(folder, "first", plan_of(candidates, reference=ONE))


def test_the_record_holds_the_entries_and_the_pdf_says_them(folder: Path, record: RecordDocument) -> None:
    kinds = [(entry.measure, bool(entry.window), entry.limits) for entry in record.equal_damage]
    assert kinds[0] == ("rmse_content", False, ())
    assert set(kinds[1:]) == {("ssim", True, ("likeness",))}
    assert {(entry.reference, entry.codec) for entry in record.equal_damage} == {(ONE, "tiled")}
    text = " ".join(" ".join(page_texts((folder / "first" / "report.pdf").read_bytes())).split())
    assert "Equal damage" in text
    assert f"{ONE} (median" in text
    assert "is reached by tiled" in text


@pytest.mark.slow
@pytest.mark.parametrize(
    ("table", "measure", "within"),
    [("measures", "rmse_content", 0.02), ("windows", "ssim", 0.06)],
    ids=["RMSE in content", "what is missing to an SSIM of 1"],
)
def test_the_ratio_told_does_the_damage_of_the_reference_when_it_is_run(
    folder: Path, record: RecordDocument, table: str, measure: str, within: float
) -> None:
    entry = next(each for each in record.equal_damage if each.measure == measure)
    ratio = entry.ratio_median.least
    assert ratio is not None
    assert (entry.frames, entry.frames_below, entry.frames_above) == (3, 0, 0)
    assert ratio not in RATIOS
    assessed(folder, f"again-{measure}", plan_of(candidate("tiled", round(ratio, 4)) + candidate("jpeg2000", 9)))
    rows = [each for each in rows_of(folder / f"again-{measure}", table) if each["role"] == "candidate"]
    rows = [each for each in rows if each.get("window", "") == entry.window]
    values = {
        codec: sorted(float(each[measure]) for each in rows if each["candidate"].startswith(codec))
        for codec in ("tiled", "jpeg2000")
    }
    damage = {codec: 1 - each[1] if measure == "ssim" else each[1] for codec, each in values.items()}
    # Ratios a factor of up to 1.67 apart: what is missing to an SSIM of 1 bends more between them than the RMSE does.
    assert damage["tiled"] == pytest.approx(damage["jpeg2000"], rel=within)


def altered(folder: Path, copy: Path, factor: float) -> tuple[str, ...]:
    """Change a ratio of the record, seal it again, and verify with the images."""
    shutil.copytree(folder / "first", copy)
    document = json.loads((copy / "record.json").read_bytes())
    document["equal_damage"][0]["ratio_median"]["least"] *= factor
    (copy / "record.json").write_bytes(rfc8785.dumps(document))
    write_seal(copy)
    images = (folder / "ct",)
    found = verify(copy, images=images, delivered=(), key_file=folder / "key", regions_file=None, frames=1, seed=1)
    return found.differences


@pytest.mark.usefixtures("record")
def test_verification_tells_another_processors_last_digit_from_an_altered_ratio(folder: Path, tmp_path: Path) -> None:
    assert altered(folder, tmp_path / "digit", 1 + 1e-12) == ()
    (_, found) = altered(folder, tmp_path / "ratio", 1.001)
    assert found == "record.json: equal_damage does not follow from the tables"


def test_a_reference_that_is_no_candidate_is_named_by_its_path(folder: Path) -> None:
    (folder / "wrong.toml").write_text(plan_of(candidate("tiled", 10), reference="tiled 11:1"), encoding="utf-8")
    ended = run("assess", folder / "ct", "--plan", folder / "wrong.toml", "--out", folder / "none", folder=folder)
    assert ended.code == 2
    assert "reference: no candidate is named 'tiled 11:1'; expected one of 'tiled 10:1'" in ended.text
