from __future__ import annotations

import csv
from pathlib import Path

import pydicom
import pytest

from safecheck.errors import UsageError
from safecheck.jobs.transforms import (
    CAUTIONS_FILE,
    PAGES_FILE,
    TABLE_FILE,
    TransformRequest,
    lines_of,
    study_transforms,
)
from safecheck.wording import lint
from synthetic_studies import ct_body, mr_head


@pytest.fixture(scope="module")
def studies(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("studies")
    ct_body(folder / "ct", seed=1, rows=64, columns=64, slices=3)
    mr_head(folder / "mr", seed=2, rows=64, columns=64, slices=2)
    (folder / "letter.txt").write_text("no image", encoding="utf-8")
    return folder


def request(studies: Path, out: Path, **more: object) -> TransformRequest:
    return TransformRequest((studies,), out, key_file=out.parent / "key", **more)  # type: ignore[arg-type]


def test_one_frame_of_each_series_is_studied_and_the_rest_is_counted(studies: Path, tmp_path: Path) -> None:
    study = study_transforms(request(studies, tmp_path / "out"), lambda _: None)
    assert [frame.modality for frame in study.frames].count("CT") == 1
    assert len(study.frames) == study.series == 2
    assert study.files == 6
    assert [(item.what, item.reason, item.number) for item in study.left_aside] == [("file", "not-dicom", 1)]
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted([CAUTIONS_FILE, PAGES_FILE, TABLE_FILE])
    assert [word for line in lines_of(study) for word in lint(line)] == []
    assert "1 file: not a DICOM file" in lines_of(study)


def test_every_figure_stands_in_the_table(studies: Path, tmp_path: Path) -> None:
    study = study_transforms(request(studies, tmp_path / "out"), lambda _: None)
    with (tmp_path / "out" / TABLE_FILE).open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    findings = [finding for frame in study.frames for finding in frame.findings]
    assert [float(row["value"]) for row in rows] == [finding.value for finding in findings]


def test_the_same_call_gives_the_same_bytes(studies: Path, tmp_path: Path) -> None:
    for name in ("one", "other"):
        study_transforms(request(studies, tmp_path / name, with_images=True, basis_functions=True), lambda _: None)
    for name in (CAUTIONS_FILE, PAGES_FILE, TABLE_FILE):
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "other" / name).read_bytes()


def test_no_more_frames_are_studied_than_asked_for(studies: Path, tmp_path: Path) -> None:
    study = study_transforms(request(studies, tmp_path / "out", most_frames=1), lambda _: None)
    assert (len(study.frames), study.series) == (1, 2)


def test_where_nothing_can_be_studied_nothing_is_written(studies: Path, tmp_path: Path) -> None:
    asked = TransformRequest((studies / "letter.txt",), tmp_path / "out", key_file=tmp_path / "key")
    study = study_transforms(asked, lambda _: None)
    assert study.frames == ()
    assert not (tmp_path / "out").exists()


def test_where_the_middle_frame_is_refused_the_next_nearest_is_studied_and_it_is_counted(tmp_path: Path) -> None:
    truth = ct_body(tmp_path / "in", seed=1, rows=64, columns=64, slices=3)
    broken = truth.files[1]
    dataset = pydicom.dcmread(broken)
    dataset.RescaleSlope = 0
    dataset.save_as(broken)
    study = study_transforms(request(tmp_path / "in", tmp_path / "out"), lambda _: None)
    assert [frame.key.instance_number for frame in study.frames] == [1]
    assert [(item.what, item.reason, item.number) for item in study.left_aside] == [("frame", "rescale", 1)]


def test_a_file_that_is_refused_is_named_and_the_next_series_is_studied(tmp_path: Path) -> None:
    truth = ct_body(tmp_path / "in" / "ct", seed=1, rows=64, columns=64, slices=1)
    mr_head(tmp_path / "in" / "mr", seed=2, rows=64, columns=64, slices=1)
    content = truth.files[0].read_bytes()
    truth.files[0].write_bytes(content[:-3000])
    study = study_transforms(request(tmp_path / "in", tmp_path / "out"), lambda _: None)
    assert [frame.modality for frame in study.frames] == ["MR"]
    assert sum(item.number for item in study.left_aside) == 1


def test_a_folder_that_may_not_be_written_to_is_refused_first(studies: Path, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("x", encoding="utf-8")
    with pytest.raises(UsageError, match="the folder of --out cannot be used"):
        study_transforms(request(studies, tmp_path / "file" / "out"), lambda _: None)
