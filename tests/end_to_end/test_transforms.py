"""The transform study from the command line: synthetic studies, a planted one, and a real CT."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pydicom
import pytest
import scipy.fft
from pydicom.data import get_testdata_file

from synthetic_studies import canary_study
from tests.end_to_end.command import run
from tests.end_to_end.hospital import Hospital
from tests.end_to_end.leaks import contents_of, find
from tests.report.pages import page_texts

CANARY = "QXZJCANARY78"


def rows_of(folder: Path) -> list[dict[str, str]]:
    with (folder / "transforms.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@pytest.mark.slow
def test_the_middle_frame_of_each_series_is_studied_with_regions_and_pictures(
    hospital: Hospital, tmp_path: Path
) -> None:
    ended = run(
        *("transforms", hospital.studies, "--out", tmp_path / "out", "--key", hospital.key, "--with-images"),
        *("--regions", hospital.folder / "regions.json", "--basis"),
        folder=tmp_path,
    )
    assert ended.code == 0, ended.text
    assert "4 frames studied" in ended.out
    rows = rows_of(tmp_path / "out")
    assert len({row["series"] for row in rows}) == 4
    # The region lies on frames of one size: of three slices of CT the second, of two of MR the first.
    within = {(row["modality"], row["instance_number"]) for row in rows if row["area"] == "region circle"}
    assert within == {("CT", "2"), ("MR", "1")}
    texts = page_texts((tmp_path / "out" / "transforms.pdf").read_bytes())
    assert sum("Cosine, by tile size" in text for text in texts) == 4


@pytest.mark.slow
def test_no_identifier_leaves_the_input(tmp_path: Path) -> None:
    inputs, folder = tmp_path / "in", tmp_path / "out"
    inputs.mkdir()
    folder.mkdir()
    truth = canary_study(inputs, CANARY)
    temporary = folder / "tmp"
    temporary.mkdir()
    ended = run(
        *("transforms", inputs, "--out", folder / "study", "--key", folder / "site.key", "--with-images", "--basis"),
        folder=folder,
        TMPDIR=temporary,
        HOME=folder,
    )
    assert ended.code == 0, ended.text
    needles = (*truth.needles, truth.study.study_uid, truth.study.series_uid, *truth.study.instance_uids)
    assert find(needles, contents_of(folder)) == []
    assert find(needles, [("said", ended.text.encode())]) == []
    assert list(temporary.iterdir()) == []


@pytest.mark.slow
def test_a_real_ct_has_the_figures_of_an_independent_computation(tmp_path: Path) -> None:
    # pydicom and scipy.fft alone: cosine transform, tiles of 8, the mean and the largest others kept, errors in HU over
    # pixels that are not surrounding air: here those of tiles well inside the body, drawn as a region.
    path = get_testdata_file("CT_small.dcm", download=False)
    assert isinstance(path, str)
    box = (
        '{"version": 1, "regions": [{"name": "box", "label": "box", "role": "other", "background": "", "parts": '
        '[{"placement": {"kind": "frames", "rows": 128, "columns": 128}, "shape": {"kind": "rectangle", '
        '"centre": [63.5, 63.5], "height": 64.0, "width": 64.0}}]}]}'
    )
    (tmp_path / "box.json").write_text(box, encoding="utf-8")
    ended = run(
        *("transforms", path, "--out", "out", "--key", "key", "--regions", "box.json"),
        folder=tmp_path,
    )
    assert ended.code == 0, ended.text
    dataset = pydicom.dcmread(path)
    part = dataset.pixel_array.astype(np.float64)[32:96, 32:96] * float(dataset.RescaleSlope)
    tiles = part.reshape(8, 8, 8, 8).transpose(0, 2, 1, 3)
    flat = scipy.fft.dctn(tiles, axes=(2, 3), norm="ortho").reshape(64, 64)
    for share, count in ((50, 32), (25, 16), (10, 6), (5, 3)):
        others = np.sort(flat[:, 1:] ** 2, axis=1)
        expected = np.sqrt(others[:, : 64 - count].sum() / part.size)
        (row,) = [
            row
            for row in rows_of(tmp_path / "out")
            if (row["area"], row["transform"], row["tile_size"], row["fixed"], row["measure"])
            == ("region box", "cosine", "8", "kept share", "rmse")
            and float(row["fixed_at"]) == share
        ]
        assert float(row["value"]) == pytest.approx(expected, rel=1e-9)
        assert row["unit"] == "HU"


@pytest.mark.slow
def test_where_nothing_can_be_studied_the_command_ends_with_3(tmp_path: Path) -> None:
    (tmp_path / "letter.txt").write_text("no image", encoding="utf-8")
    ended = run("transforms", "letter.txt", "--out", "out", "--key", "key", folder=tmp_path)
    assert ended.code == 3
    assert "not a DICOM file" in ended.out
    assert not (tmp_path / "out").exists()
