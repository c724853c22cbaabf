"""What a plan's document alone cannot tell: codecs, their dials, and whether they are here."""

from __future__ import annotations

import dataclasses
import re
from pathlib import Path
from types import MappingProxyType
from typing import get_args

import pytest

from safecheck.codecs import registry
from safecheck.errors import DocumentError, UsageError
from safecheck.jobs.assess import AssessRequest, prepare_run
from safecheck.jobs.dry_run import dry_run
from safecheck.jobs.plans import check_available, is_available, load_plan
from safecheck.options import Codecs
from synthetic_studies import ct_body
from tests.end_to_end.hospital import CHANGE, CHOSEN, assess_here


def plan(folder: Path, *candidates: str) -> Path:
    path = folder / "plan.toml"
    tables = "\n".join(f"[[candidates]]\n{candidate}\n" for candidate in candidates)
    path.write_text(CHANGE + CHOSEN + tables, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("candidate", "message"),
    [
        (
            'codec = "jpeg2000"',
            r"candidates\[0\]\.settings\.ratio: is missing; without a ratio jpeg2000 is set by its ratio, expected",
        ),
        (
            'codec = "tiled"\nsettings = { size = 16 }',
            r"candidates\[0\]\.settings\.step: is missing; without a ratio tiled is set by its step, expected a num",
        ),
        (
            'codec = "tiled"\nratio = 10\nsettings = { step = 4.0 }',
            r"\.settings\.step: is what the ratio of 10:1 sets; expected either ratio or settings\.step, not both",
        ),
        (
            'codec = "tiled"\nsettings = { step = -4.0 }',
            r"^candidates\[0\]\.settings\.step: codec tiled: step is -4, expected a number from 0\.125 to 4194304$",
        ),
        (
            'codec = "jpegxl"\nsettings = { distance = "1.0" }',
            r'^candidates\[0\]\.settings\.distance: .*distance is "1\.0", expected a number from 0\.01 to 25$',
        ),
        ('codec = "tiled"\nsettings = { step = nan }', r"settings\.step: is not a number, expected a finite number$"),
        ('codec = "tiled"\nsettings = { step = inf }', r"settings\.step: is infinite, expected a finite number$"),
        ('codec = "tiled"\nsettings = { step = [8] }', r"step: is a list, expected a text, a number, true or false$"),
        ('codec = "tiled"\nratio = -10', r"^candidates\[0\]\.ratio: Input should be greater than 1$"),
        ('codec = "jpeg"\nsettings = { effort = 4 }', r"settings\.effort: .* is unknown, expected one of quality$"),
        ('codec = "jpegls-reversible"', r"candidates\[0\]\.codec: codec jpegls-reversible cannot be asked"),
    ],
    ids=[
        "no dial",
        "a setting that is no dial",
        "dial and ratio",
        "dial out of range",
        "a text for a number",
        "not a number",
        "infinite",
        "a list",
        "ratio out of range",
        "unknown setting",
        "no dial at all",
    ],
)
def test_a_candidate_has_a_ratio_or_its_codecs_dial(tmp_path: Path, candidate: str, message: str) -> None:
    with pytest.raises(DocumentError, match=message):
        load_plan(plan(tmp_path, candidate))


def test_two_candidates_that_a_codec_takes_for_one_are_refused(tmp_path: Path) -> None:
    near = [f'codec = "tiled"\nsettings = {{ step = {step} }}' for step in (8.3, 8.31)]
    message = r"candidates\[1\]\.settings: is the same as that of candidates\[0\] to tiled: size 8, step 8\.309"
    with pytest.raises(DocumentError, match=message):
        load_plan(plan(tmp_path, *near))
    apart = [f'codec = "tiled"\nratio = 10\nsettings = {{ size = {size} }}' for size in (8, 16)]
    assert len(load_plan(plan(tmp_path, *apart)).plan.candidates) == 2


def test_candidates_by_setting_and_per_series_are_read(tmp_path: Path) -> None:
    by_setting = 'codec = "tiled"\nsettings = { size = 16, step = 4.0 }'
    per_series = 'codec = "jpeg2000"\nratio = 10\nper = "series"'
    found = load_plan(plan(tmp_path, by_setting, per_series)).plan.candidates
    assert [each.name for each in found] == ["tiled, size 16, step 4", "jpeg2000 10:1 per series"]


def lacking(monkeypatch: pytest.MonkeyPatch, codec: str) -> None:
    """Let a codec need a library that is nowhere."""
    entry = dataclasses.replace(registry.ENTRIES[codec], needs="no_such_library")
    monkeypatch.setattr(registry, "ENTRIES", MappingProxyType({**registry.ENTRIES, codec: entry}))


def test_a_run_without_the_codecs_of_its_controls_is_refused(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    lacking(monkeypatch, "jpegls-reversible")
    with pytest.raises(UsageError, match="jpegls-reversible is not available here, and every run needs it"):
        check_available(load_plan(plan(tmp_path, 'codec = "tiled"\nratio = 10')).plan)


def test_a_run_without_its_codec_is_refused_before_it_begins(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    lacking(monkeypatch, "jpeg2000")
    assert not is_available("jpeg2000")
    path = plan(tmp_path, 'codec = "tiled"\nratio = 10', 'codec = "jpeg2000"\nratio = 10')
    message = r"candidates\[1\]\.codec: jpeg2000 is not available here, expected pylibjpeg-openjpeg"
    with pytest.raises(DocumentError, match=message):
        check_available(load_plan(path).plan)
    request = AssessRequest((tmp_path,), tmp_path / "out", plan_file=path, key_file=tmp_path / "key")
    with pytest.raises(DocumentError, match=message):
        assess_here(request)
    assert not (tmp_path / "out").exists()
    assert not (tmp_path / "key").exists()


@pytest.mark.parametrize("lacks", [True, False], ids=["lacking", "there"])
def test_a_dry_run_says_which_codec_is_missing_and_how_many_rows_there_will_be(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, lacks: bool
) -> None:
    ct_body(tmp_path / "ct", seed=1, rows=96, columns=96, slices=3)
    path = plan(
        tmp_path, 'codec = "jpeg2000"\nratio = 10\nper = "series"', 'codec = "tiled"\nsettings = { step = 4.0 }'
    )
    if lacks:
        lacking(monkeypatch, "jpeg2000")
    request = AssessRequest((tmp_path / "ct",), None, plan_file=path, key_file=tmp_path / "key")
    lines = list(dry_run(prepare_run(request, lambda _: None)))
    named = dataclasses.replace(request, out=tmp_path / "dossier", dry_run=True)
    assert [line for line in dry_run(prepare_run(named, lambda _: None)) if "available" in line] == [
        line for line in lines if "available" in line
    ]
    assert not (tmp_path / "dossier").exists()
    assert f"  jpeg2000: {'not available here' if lacks else 'available'}" in lines
    assert "  tiled: available" in lines
    if lacks:
        assert "Time and rows: not known, and the run is refused, while jpeg2000 is not available here" in lines
        return
    (said,) = re.findall(r"Rows: about (\d+) of measures, (\d+) of windows, 0 of regions", "\n".join(lines))
    record = assess_here(dataclasses.replace(request, out=tmp_path / "out"))
    rows = {table.table: table.rows for table in record.tables}
    # A codec may not take the frame that carries all controls, and over-compression has window rows of its own.
    assert abs(int(said[0]) - rows["measures"]) <= 2
    assert int(said[1]) <= rows["windows"] <= int(said[1]) + 2 * 2


def test_the_help_names_every_codec_that_can_be_asked_for_a_ratio() -> None:
    _, option = get_args(Codecs)
    named = option.help.partition("any of ")[2].partition(";")[0].split(", ")
    assert tuple(named) == registry.rated_names()
