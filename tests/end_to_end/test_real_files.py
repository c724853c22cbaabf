"""Real originals with the copies that archives delivered, and an independent script that computes the figures again."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from pydicom.data import get_testdata_file

from tests.end_to_end import independent
from tests.end_to_end.command import run
from tests.end_to_end.drawn import write_regions
from tests.end_to_end.hospital import rows_of
from tests.end_to_end.independent_image import read_image
from tests.end_to_end.independent_regions import coverage_of_ellipse, read_regions

pytestmark = pytest.mark.slow


@dataclass(frozen=True, slots=True)
class Twins:
    """An original and what was delivered for it, both of pydicom-data.

    Figures: computed once with pydicom, pylibjpeg-openjpeg and NumPy over the whole frame, in modality units; colour
    over all samples. Ratios against the header of the copy and against its bytes.
    """

    original: str
    delivered: str
    maximum: float
    rmse: float
    ratio_allocated: float
    ratio_stored: float
    header_ratio: str


TWINS = (
    Twins("693_UNCR.dcm", "693_J2KI.dcm", 2080.0, 121.042, 338.7, 296.4, "338.6873"),
    Twins("RG1_UNCR.dcm", "RG1_J2KI.dcm", 403.0, 63.333, 10.67, 10.00, "10"),
    Twins("RG3_UNCR.dcm", "RG3_J2KI.dcm", 9.0, 1.311, 30.15, 18.85, "30"),
    Twins("MR2_UNCR.dcm", "MR2_J2KI.dcm", 120.8, 20.929, 18.82, 14.12, "18"),
    Twins("US1_UNCR.dcm", "US1_J2KI.dcm", 124.0, 3.788, 16.0, 16.0, "16"),
    Twins("JPEG-LL.dcm", "JPEG2000.dcm", 101.0, 7.141, 2097.0, 2097.0, "2097"),
)


FIRST_FIGURES = {"measures": "code_bytes", "windows": "centre", "regions": "label"}
"""Table -> the first of its columns that hold what was measured."""
NOT_COMPUTED = {
    "outside_flattened_max",  # another codec's
    "control_held",
    "control_found",
    "planted_size",
    "planted_row",
    "planted_column",
}
"""Columns behind them that no candidate of JPEG 2000 and no delivered copy fills."""


def real_file(name: str) -> Path:
    found = get_testdata_file(name, download=False)
    assert isinstance(found, str), name
    return Path(found)


@pytest.fixture(scope="module")
def dossier(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("real")
    arguments: list[str | Path] = ["assess", *(real_file(twins.original) for twins in TWINS)]
    for twins in TWINS:
        arguments += ["--delivered", real_file(twins.delivered)]
    arguments += ["--secondary-captures", "--codecs", "jpeg2000", "--ratios", "10", "--key", "key", "--out", "d"]
    arguments += ["--regions", write_regions(folder / "regions.json")]
    ended = run(*arguments, folder=folder)
    assert ended.code == 0, ended.err
    return folder / "d"


@pytest.fixture(scope="module")
def computed_again(dossier: Path) -> list[independent.Difference]:
    originals = [real_file(twins.original) for twins in TWINS]
    copies = [real_file(twins.delivered) for twins in TWINS]
    return list(independent.compare(dossier, originals, copies, dossier.parent / "regions.json"))


def test_an_independent_script_computes_the_same_figures(computed_again: list[independent.Difference]) -> None:
    assert [each for each in computed_again if not each.agrees] == []


def test_a_region_drawn_on_the_worst_patch_is_named_and_another_patch_is_the_worst_outside(dossier: Path) -> None:
    rows = [row for row in rows_of(dossier, "measures") if row["worst_patch_region"] == "label of ct-changed"]
    assert [row["role"] for row in rows] == ["delivered"]
    assert float(rows[0]["worst_outside_rmse"]) < float(rows[0]["worst_patch_rmse"])


def test_the_polygon_that_stands_for_an_ellipse_covers_what_the_ellipse_covers(dossier: Path) -> None:
    path = dossier.parent / "regions.json"
    region = next(
        each for each in json.loads(path.read_text(encoding="utf-8"))["regions"] if each["name"] == "ct-ellipse"
    )
    ellipse = coverage_of_ellipse(region["parts"][0]["shape"], (512, 512))
    # Computed from the definition: pi times the half axes.
    assert ellipse.sum() == pytest.approx(math.pi * 20.6 * 13.3, rel=1e-12)
    # The outline lies within 2e-6 of the half axis of 20.6 pixels, and meets a pixel on a length below 1.5.
    assert np.abs(ellipse - read_regions(path, (512, 512))["ct-ellipse"].coverage).max() < 2e-6 * 20.6 * 1.5
    recorded = {float(row["area_pixels"]) for row in rows_of(dossier, "regions") if row["region"] == "ct-ellipse"}
    assert list(recorded) == pytest.approx([ellipse.sum()], rel=1e-9)


def test_the_independent_script_leaves_no_figure_of_an_image_out(
    dossier: Path, computed_again: list[independent.Difference]
) -> None:
    for table, first in FIRST_FIGURES.items():
        computed = {each.column for each in computed_again if each.table == table and each.computed is not None}
        columns = list(rows_of(dossier, table)[0])
        figures = set(columns[columns.index(first) :]) - NOT_COMPUTED
        assert figures - computed == set(), table


@pytest.mark.parametrize("twins", TWINS, ids=[twins.original for twins in TWINS])
def test_delivered_copies_are_matched_and_measured(dossier: Path, twins: Twins) -> None:
    image = read_image(real_file(twins.original))
    shape = [str(length) for length in image.values.shape]
    row = next(
        row
        for row in rows_of(dossier, "measures")
        if row["role"] == "delivered" and [row["rows"], row["columns"]] == shape
    )
    maximum, rmse = ("max_channels", "rmse_channels") if image.is_colour else ("max_frame", "rmse_frame")
    assert float(row[maximum]) == pytest.approx(twins.maximum, abs=0.05)
    assert float(row[rmse]) == pytest.approx(twins.rmse, abs=5e-4)
    # A copy of 1.5 kB ends in a pad byte, which the header's ratio counts and the code stream does not.
    assert float(row["ratio_bits_allocated"]) == pytest.approx(twins.ratio_allocated, rel=1e-3)
    assert float(row["ratio_bits_stored"]) == pytest.approx(twins.ratio_stored, rel=1e-3)
    copy = next(
        each
        for each in rows_of(dossier, "inputs")
        if each["side"] == "delivered" and [each["rows"], each["columns"]] == shape
    )
    assert copy["matched"] not in ("", "unmatched")
    assert copy["lossy_ratio"].startswith(twins.header_ratio)


def test_every_ratio_asked_was_reached_and_every_control_held(dossier: Path) -> None:
    rows = rows_of(dossier, "measures")
    candidates = [row for row in rows if row["role"] == "candidate"]
    assert [row["reached"] for row in candidates] == ["asked"] * len(TWINS)
    assert [float(row["ratio_bits_stored"]) for row in candidates] == pytest.approx([10.0] * len(TWINS), rel=0.01)
    controls = [row for row in rows if row["role"] not in ("candidate", "delivered")]
    assert {row["role"] for row in controls} == {"reversible", "repeat", "over-compressed", "planted"}
    assert {row["control_held"] for row in controls} == {"true"}
    reversible = [row for row in rows if row["role"] == "reversible"]
    assert {float(row["max_frame"]) for row in reversible} == {0.0}
