"""A small CT series under candidates by setting, per series, and by ratio with codecs whose dial is a whole number.

Codes are written again here from the frames themselves, by the codec alone, outside the pipe.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pydicom
import pypdf
import pytest

from safecheck.codecs import registry
from safecheck.frames import PixelFormat, Raster, SizeBasis
from synthetic_studies import ct_body
from tests.end_to_end.command import run
from tests.end_to_end.hospital import CHANGE, CHOSEN, rows_of

SLICES = 5
RATIO = 6.0
FORM = PixelFormat(16, 12, False, "MONOCHROME2")
CANDIDATES = f"""\
[[candidates]]
codec = "jpeg"
settings = {{ quality = 85 }}

[[candidates]]
codec = "jpegls"
settings = {{ near = 3 }}

[[candidates]]
codec = "jpegls"
ratio = {RATIO}

[[candidates]]
codec = "jpeg2000"
ratio = {RATIO}
per = "series"
"""
SETTING, BOUND, BRACKETED, SERIES = "jpeg, quality 85", "jpegls, near 3", "jpegls 6:1", "jpeg2000 6:1 per series"
NEEDED = {"jpeg", "jpegls", "jpeg2000"}

pytestmark = pytest.mark.skipif(
    not set(registry.rated_names()) >= NEEDED or not all(map(registry.available, NEEDED)),
    reason="a codec of the plan is not available here",
)


class Run:
    """A dossier of the series with what it was made of."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        ct_body(folder / "ct", seed=7, rows=192, columns=192, slices=SLICES, storage="unsigned-12")
        (folder / "plan.toml").write_text(CHANGE + CHOSEN + CANDIDATES, encoding="utf-8")

    def call(self, command: str, *more: str | Path) -> Any:
        return run(command, *more, "--key", self.folder / "key", folder=self.folder)

    def assess(self, out: str, workers: int) -> Path:
        ended = self.call(
            "assess", "ct", "--plan", "plan.toml", "--out", out, "--workers", str(workers), "--with-images", "--quiet"
        )
        assert ended.code == 0, ended.text
        return self.folder / out

    def rasters(self) -> dict[int, Raster]:
        """Instance number -> samples as the file holds them."""
        found = {}
        for path in (self.folder / "ct").iterdir():
            dataset = pydicom.dcmread(path)
            samples = np.frombuffer(dataset.PixelData, np.uint16).reshape(dataset.Rows, dataset.Columns)
            found[int(dataset.InstanceNumber)] = Raster(samples, FORM)
        return found


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Run:
    folder = Run(tmp_path_factory.mktemp("settings"))
    folder.assess("one", workers=1)
    return folder


def rows(made: Run, candidate: str, role: str = "candidate") -> list[dict[str, str]]:
    every = rows_of(made.folder / "one", "measures")
    return [row for row in every if (row["candidate"], row["role"]) == (candidate, role)]


def test_each_setting_wrote_the_code_that_its_codec_writes_alone(made: Run) -> None:
    rasters = made.rasters()
    for candidate, codec in ((SETTING, registry.rated("jpeg", quality=85)), (BOUND, registry.rated("jpegls", near=3))):
        found = rows(made, candidate)
        assert len(found) == SLICES
        for row in found:
            raster = rasters[int(row["instance_number"])]
            code = codec.encode(raster)
            assert (row["asked"], row["reached"]) == ("setting", "setting")
            assert int(row["code_bytes"]) == len(code)
            error = codec.decode(code, FORM, raster.shape).astype(float) - raster.samples
            assert float(row["rmse_frame"]) == pytest.approx(np.sqrt(np.mean(error**2)), rel=1e-9)


def test_near_lossless_keeps_its_promise_and_a_row_says_so(made: Run) -> None:
    for row in rows(made, BOUND):
        assert float(row["max_frame"]) <= 3
        assert row["control_held"] == "true"
        assert row["control_found"].endswith("in stored values, at most 3 promised")
    record = json.loads((made.folder / "one" / "record.json").read_bytes())
    promised = {
        entry["codec"]: entry["not_held"] for entry in record["controls"] if entry["control"] == "promised error"
    }
    assert promised == {"jpegls": 0}


def test_two_settings_bracket_the_ratio_on_every_frame(made: Run) -> None:
    own, beside = rows(made, BRACKETED), rows(made, BRACKETED, "bracket")
    assert len(own) == len(beside) == SLICES
    for above, below in zip(own, beside, strict=True):
        assert float(below["ratio_bits_stored"]) < RATIO <= float(above["ratio_bits_stored"])
        assert float(above["dial_value"]) - float(below["dial_value"]) == 1
        assert above["reached"] == below["reached"] == "bracket"


def test_one_setting_found_on_the_middle_slice_serves_the_series(made: Run) -> None:
    rasters = made.rasters()
    positions = {
        int(dataset.InstanceNumber): float(dataset.ImagePositionPatient[2])
        for dataset in (pydicom.dcmread(path, stop_before_pixels=True) for path in (made.folder / "ct").iterdir())
    }
    middle = sorted(positions, key=lambda number: positions[number])[SLICES // 2]
    reference = rasters[middle]
    target = reference.size_bytes(SizeBasis.BITS_STORED) / RATIO
    found = registry.rated("jpeg2000").encode_to_size(reference, target)
    assert {float(row["dial_value"]) for row in rows(made, SERIES)} == {found.settings["ratio"]}
    for row in rows(made, SERIES):
        code = registry.rated("jpeg2000", **found.settings).encode(rasters[int(row["instance_number"])])
        assert int(row["code_bytes"]) == len(code)
        assert (row["asked"], row["reached"], float(row["ratio_asked"])) == ("ratio per series", "setting", RATIO)


def test_the_record_shows_what_was_left_open_and_every_reversible_codec(made: Run) -> None:
    record = json.loads((made.folder / "one" / "record.json").read_bytes())
    left_open = {entry["candidate"]: [each["figure"] for each in entry["spread"]] for entry in record["candidates"]}
    assert left_open == {
        SETTING: ["ratio_bits_stored", "rmse_content"],
        BOUND: ["ratio_bits_stored", "rmse_content"],
        BRACKETED: ["rmse_content", "dial_value"],
        SERIES: ["ratio_bits_stored", "rmse_content", "dial_value"],
    }
    ratios = [float(row["ratio_bits_stored"]) for row in rows(made, SETTING)]
    (spread,) = [entry["spread"][0] for entry in record["candidates"] if entry["candidate"] == SETTING]
    assert [spread["least"], spread["largest"]] == pytest.approx([min(ratios), max(ratios)])
    assert [spread["p05"], spread["median"], spread["p95"]] == pytest.approx(np.percentile(ratios, (5, 50, 95)))
    here = {name for name in registry.reversible_names() if registry.available(name)}
    assert {entry["codec"] for entry in record["reversible"]} == here
    text = " ".join(page.extract_text() for page in pypdf.PdfReader(made.folder / "one" / "report.pdf").pages)
    for words in ("what was left open", "beside it: near", *here):
        assert words in text


def test_two_workers_write_the_same_tables_and_record(made: Run) -> None:
    two = made.assess("two", workers=2)
    for name in ("measures.parquet", "windows.parquet", "regions.parquet", "inputs.parquet", "record.json"):
        assert (two / name).read_bytes() == (made.folder / "one" / name).read_bytes()


def test_rows_by_setting_and_per_series_are_computed_again_and_agree(made: Run) -> None:
    ended = made.call("verify", "one", "--images", "ct", "--frames", "2")
    assert ended.code == 0, ended.text
    assert "2 of 5 frames were computed again" in ended.out
