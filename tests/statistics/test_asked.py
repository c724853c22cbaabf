"""What a candidate's asking leaves open, the neighbouring setting, promised errors, reversible codecs, carriage."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from safecheck.policy.plan import Plan
from safecheck.record.document import RecordDocument
from safecheck.statistics.summary import summarise
from tests.statistics.tables import measured, reader, reversible
from tests.statistics.test_summary import AROUND, inputs, limit, owed, plan

RATIOS, ERRORS = [6.0, 9.0, 7.5, 30.0], [1.0, 4.0, 2.0, 0.5]


def record_of(folder: Path, rows: list[Any], made: Plan) -> RecordDocument:
    rows = rows + owed(rows)
    tables = {
        "measures": reader(folder, "measures", rows),
        "windows": reader(folder, "windows", []),
        "regions": reader(folder, "regions", []),
        "inputs": reader(folder, "inputs", inputs(sorted({row.study for row in rows}))),
    }
    return summarise(made, tables, AROUND)


def four_frames(name: str, **given: Any) -> list[Any]:
    """A candidate on four frames, each a study, the dial turned from 10 to 13."""
    rows = []
    for number, (ratio, error) in enumerate(zip(RATIOS, ERRORS, strict=True)):
        study = f"S-{number}"
        known: dict[str, Any] = {
            "ratio_bits_stored": ratio,
            "rmse_content": error,
            "dial": "near",
            "dial_value": 10.0 + number,
        }
        rows += [measured(name, study=study, codec="near", **(known | given)), reversible(study=study)]
    return rows


@pytest.mark.parametrize(
    ("candidate", "name", "left_open"),
    [
        ({"ratio": 8}, "near 8:1", ["rmse_content", "dial_value"]),
        ({"ratio": 8, "per": "series"}, "near 8:1 per series", ["ratio_bits_stored", "rmse_content", "dial_value"]),
        ({"settings": {"near": 10}}, "near, near 10", ["ratio_bits_stored", "rmse_content"]),
    ],
    ids=["ratio per frame", "ratio per series", "setting"],
)
def test_what_is_not_fixed_stands_with_its_spread(
    tmp_path: Path, candidate: dict[str, Any], name: str, left_open: list[str]
) -> None:
    made = plan(candidates=[{"codec": "near"} | candidate])
    (entry,) = record_of(tmp_path, four_frames(name), made).candidates
    assert entry.dial == "near"
    assert [each.figure for each in entry.spread] == left_open
    values = {"ratio_bits_stored": RATIOS, "rmse_content": ERRORS, "dial_value": [10.0, 11.0, 12.0, 13.0]}
    for each in entry.spread:
        found = values[each.figure]
        # numpy.percentile with its default, linear interpolation, as the definitions state.
        middle = [float(part) for part in np.percentile(found, (50, 5, 95))]
        assert [each.median, each.p05, each.p95] == pytest.approx(middle)
        assert (each.least, each.largest, each.frames) == (min(found), max(found), 4)
        assert each.unit == {"ratio_bits_stored": "to 1", "rmse_content": "HU", "dial_value": ""}[each.figure]


@pytest.mark.parametrize(
    ("basis", "ratios", "told"),
    [("bits-stored", [8.05, 7.95], None), ("bits-stored", [8.0, 6.0], (2, 1, 6.0)), ("now", [8.0, 8.0], (2, 2, 4.0))],
    ids=["all within 1 %", "one series of two", "another basis"],
)
def test_series_that_miss_the_ratio_in_all_are_counted(
    tmp_path: Path, basis: str, ratios: list[float], told: tuple[int, int, float] | None
) -> None:
    made = plan(candidates=[{"codec": "near", "ratio": 8, "per": "series", "basis": basis}])
    rows: list[Any] = []
    for number, ratio in enumerate(ratios):
        study = f"S-{number}"
        # Two frames of equal size before: of codes of 30 and 60 bytes the total has the weighted mean of their ratios.
        for frame, (code, own) in enumerate(((30, ratio + 0.2), (60, ratio - 0.1)), start=1):
            known: dict[str, Any] = {"ratio_bits_stored": own, "times_smaller_than_now": own / 2, "code_bytes": code}
            rows.append(measured(made.candidates[0].name, study=study, frame=frame, codec="near", **known))
        rows.append(reversible(study=study))
    (entry,) = record_of(tmp_path, rows, made).candidates
    if told is None:
        assert entry.series_missed is None
        return
    missed = entry.series_missed
    assert missed is not None
    assert (missed.of_series, missed.series, missed.frames) == (told[0], told[1], 2 * told[1])
    assert missed.ratio_least == pytest.approx(told[2])


def test_errors_of_other_units_are_spread_apart(tmp_path: Path) -> None:
    rows = four_frames("near, near 10")
    rows += [
        measured("near, near 10", study="S-9", codec="near", unit="OD", rmse_content=90.0),
        reversible(study="S-9"),
    ]
    (entry,) = record_of(tmp_path, rows, plan(candidates=[{"codec": "near", "settings": {"near": 10}}])).candidates
    errors = {each.unit: each.largest for each in entry.spread if each.figure == "rmse_content"}
    assert errors == {"HU": 4.0, "OD": 90.0}


def bracketed(**of_neighbour: Any) -> list[Any]:
    """A candidate on four frames, three of them with a neighbour of half the ratio and far more error."""
    own = four_frames("near 8:1", reached="bracket", code_bytes=30)
    beside = [
        measured(
            "near 8:1",
            role="bracket",
            study=row.study,
            codec="near",
            reached="bracket",
            dial="near",
            dial_value=row.dial_value - 1,
            ratio_bits_stored=row.ratio_bits_stored / 2,
            rmse_content=1000.0,
            worst_patch_rmse=1000.0,
            code_bytes=60,
            **of_neighbour,
        )
        for row in own[::2][:3]
    ]
    return [*own, *beside]


def test_the_neighbour_stands_beside_and_speaks_for_the_candidate_nowhere(tmp_path: Path) -> None:
    made = plan(candidates=[{"codec": "near", "ratio": 8}], limits=[limit()])
    record = record_of(tmp_path, bracketed(), made)
    (entry,), (ledger,), (outcome,) = record.candidates, record.ledger, record.outcomes
    assert (entry.frames, entry.reached) == (4, {"bracket": 4})
    assert (ledger.frames, ledger.code_bytes) == (4, 120)
    assert (ledger.dial_least, ledger.dial_largest) == (10.0, 13.0)
    assert ledger.neighbour is not None
    assert (ledger.neighbour.frames, ledger.neighbour.code_bytes) == (3, 180)
    assert (ledger.neighbour.dial_least, ledger.neighbour.dial_largest) == (9.0, 11.0)
    # 3 frames of 10 x 20 pixels at 12 bits, over 180 bytes of code.
    assert ledger.neighbour.ratio_bits_stored == 5.0
    assert (ledger.neighbour.ratio_bits_stored_least, ledger.neighbour.ratio_bits_stored_largest) == (3.0, 4.5)
    assert outcome.outcome == "within declared limits"
    assert (outcome.values, outcome.worst_value) == (4, 4.0)
    assert {each.largest for each in record.figures if each.measure == "rmse_content"} == {4.0}
    assert [each.largest for each in record.worst_studies] == [4.0, 2.0, 1.0]
    assert not record.worst_places
    assert record.exit_code == 0


@pytest.mark.parametrize(
    ("own", "beside", "held"),
    [(True, True, True), (False, True, False), (True, False, False)],
    ids=["kept", "broken by the candidate", "broken by the neighbour"],
)
def test_a_promised_error_that_is_not_kept_makes_the_run_invalid(
    tmp_path: Path, own: bool, beside: bool, held: bool
) -> None:
    rows = [
        row if row.role != "candidate" else measured("near 8:1", codec="near", study=row.study, control_held=own)
        for row in bracketed(control_held=beside)
    ]
    record = record_of(tmp_path, rows, plan(candidates=[{"codec": "near", "ratio": 8}]))
    (entry,) = [each for each in record.controls if each.control == "promised error"]
    assert (entry.codec, entry.frames, entry.not_held) == ("near", 7, (0 if own else 4) + (0 if beside else 3))
    assert record.controls_held is held
    assert record.exit_code == (0 if held else 4)


def test_candidates_without_a_promise_are_no_control(tmp_path: Path) -> None:
    record = record_of(tmp_path, four_frames("near 8:1"), plan(candidates=[{"codec": "near", "ratio": 8}]))
    assert "promised error" not in {each.control for each in record.controls}


def test_reversible_codecs_are_counted_on_the_frames_that_carry_them_all(tmp_path: Path) -> None:
    def exact(codec: str, study: str, code_bytes: int, **given: Any) -> Any:
        known: dict[str, Any] = {"role": "reversible", "codec": codec, "control_held": True, "code_bytes": code_bytes}
        return measured(f"reversible, {codec}", study=study, **(known | given))

    rows = four_frames("near 8:1")
    rows = [row if row.role == "candidate" else reversible(study=row.study, code_bytes=160) for row in rows]
    rows += [exact("b-reversible", "S-0", 150), exact("b-reversible", "S-1", 150), exact("a-reversible", "S-0", 200)]
    rows += [exact("tiled", "S-0", 250, dial="step")]
    record = record_of(tmp_path, rows, plan(candidates=[{"codec": "near", "ratio": 8}]))
    # 10 x 20 pixels at 12 bits are 300 bytes; the pipe's codec stands on all four frames and counts on two of them.
    assert [(each.codec, each.frames, each.code_bytes, each.ratio_bits_stored) for each in record.reversible] == [
        ("b-reversible", 2, 300, 2.0),
        ("jpegls-reversible", 2, 320, 1.875),
        ("a-reversible", 1, 200, 1.5),
    ]
    assert [each.smallest_bytes for each in record.reversible] == [300, 300, 150]


def test_only_samples_carried_otherwise_than_they_are_stored_are_named(tmp_path: Path) -> None:
    plain: dict[str, Any] = {
        "code_precision": 12,
        "sample_offset": 0,
        "sample_scale": 1.0,
        "clipped_on_reading": False,
    }
    sixteen = {"code_precision": 16, "clipped_on_reading": True}
    rows = [
        measured("near 8:1", codec="near", study="S-0", signed=True, **(plain | sixteen)),
        measured("near 8:1", codec="near", study="S-1", signed=True, **(plain | sixteen)),
        measured("near 8:1", codec="near", study="S-2", **(plain | {"sample_offset": 2048})),
        measured("far 8:1", codec="far", study="S-0", **plain),
        measured("delivered copies", codec="delivered", role="delivered", study="S-0"),
        *(reversible(study=f"S-{number}", **(plain | {"sample_scale": 16.0})) for number in range(3)),
    ]
    made = plan(candidates=[{"codec": codec, "ratio": 8} for codec in ("near", "far")])
    found = [
        (
            each.codec,
            each.signed,
            each.code_precision,
            each.sample_offset,
            each.sample_scale,
            each.clipped_on_reading,
            each.rows,
        )
        for each in record_of(tmp_path, rows, made).carriage
    ]
    assert sorted(found) == [
        ("jpegls-reversible", False, 12, 0, 16.0, False, 3),
        ("near", False, 12, 2048, 1.0, False, 1),
        ("near", True, 16, 0, 1.0, True, 2),
    ]
