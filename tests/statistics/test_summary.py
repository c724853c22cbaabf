"""The record from the tables: counts that agree, figures with their tails, outcomes, controls, exit conditions."""

from __future__ import annotations

import dataclasses
import datetime
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from safecheck.documents import from_mapping
from safecheck.policy.plan import Plan
from safecheck.record.document import RecordDocument
from safecheck.statistics.summary import Surroundings, summarise
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, NO_BOUND
from tests.statistics.tables import measured, reader, reversible, row

AROUND = Surroundings("file", "key", {"safecheck": "0"}, (), (), {})
ONE = "jpeg2000 10:1"


def plan(**changes: Any) -> Plan:
    known: dict[str, Any] = {
        "version": 1,
        "change": {
            "title": "t",
            "declared_by": "r",
            "declared_on": datetime.date(2026, 1, 1),
            "compressed_copy": "c",
            "compressed_when": "w",
        },
        "sample": {"drawn": "chosen"},
        "candidates": [{"codec": "jpeg2000", "ratio": 10}],
    }
    return from_mapping(Plan, known | changes)


def limit(**changes: Any) -> dict[str, Any]:
    known = {
        "name": "RMSE",
        "measure": "rmse_content",
        "unit": "HU",
        "at_most": 5,
        "declared_by": "r",
        "declared_on": datetime.date(2026, 1, 1),
    }
    return known | changes


def inputs(studies: list[str]) -> list[Any]:
    return [
        row(
            "inputs",
            input=f"F of {study}",
            side="original",
            status="assessed",
            study=study,
            patient=f"P of {study}",
            series=f"R of {study}",
            instance=f"I of {study}",
            frames_assessed=1,
            frames_refused=0,
        )
        for study in studies
    ]


def owed(rows: list[Any]) -> list[Any]:
    """The controls that a codec owes once it was run, unless they are among the rows."""
    made = []
    for codec in sorted({each.codec for each in rows if each.role == "candidate"}):
        for role in ("repeat", "over-compressed"):
            if not any((each.role, each.codec) == (role, codec) for each in rows):
                name = f"{role}, {codec}"
                made.append(measured(name, role=role, codec=codec, control_held=True, study=rows[0].study))
    return made


Summed = Callable[..., RecordDocument]


@pytest.fixture
def summed(tmp_path: Path) -> Summed:
    def of(
        measures: list[Any],
        made: Plan | None = None,
        *,
        windows: list[Any] | None = None,
        regions: list[Any] | None = None,
        files: list[Any] | None = None,
    ) -> RecordDocument:
        measures = measures + owed(measures)
        studies = sorted({each.study for each in measures})
        tables = {
            "measures": reader(tmp_path, "measures", measures),
            "windows": reader(tmp_path, "windows", windows or []),
            "regions": reader(tmp_path, "regions", regions or []),
            "inputs": reader(tmp_path, "inputs", inputs(studies) if files is None else files),
        }
        return summarise(made or plan(), tables, AROUND)

    return of


def frames(values: list[float], **given: Any) -> list[Any]:
    """A candidate row and its reversible control for each value of RMSE in content, each frame a study."""
    made = []
    for number, value in enumerate(values):
        study = f"S-{number}"
        made += [measured(ONE, study=study, rmse_content=value, **given), reversible(study=study)]
    return made


def test_figures_hold_the_middle_and_both_tails_with_the_place_of_the_worst(summed: Summed) -> None:
    values = [1.0, 9.0, 4.0, 2.5]
    record = summed(frames(values))
    (figure,) = [each for each in record.figures if each.measure == "rmse_content"]
    # numpy.percentile with its default, linear interpolation, as the definitions state.
    assert figure.median == np.median(values)
    assert figure.p05 == pytest.approx(np.percentile(values, 5))
    assert figure.p95 == pytest.approx(np.percentile(values, 95))
    assert (figure.least, figure.largest, figure.frames) == (1.0, 9.0, 4)
    assert figure.worst is not None
    assert figure.worst.study == "S-1"
    assert figure.unit == "HU"


def test_frames_of_other_units_are_never_pooled(summed: Summed) -> None:
    rows = [
        *frames([1.0, 2.0]),
        measured(ONE, study="S-9", rmse_content=50.0, unit="stored value"),
        reversible(study="S-9", unit="stored value"),
    ]
    found = {each.unit: each.largest for each in summed(rows).figures if each.measure == "rmse_content"}
    assert found == {"HU": 2.0, "stored value": 50.0}


def test_psnr_without_a_value_says_that_nothing_changed(summed: Summed) -> None:
    record = summed(frames([0.0], psnr_peak_bits_db=None))
    (figure,) = [each for each in record.figures if each.measure == "psnr_peak_bits_db"]
    assert (figure.median, figure.frames, figure.without_value) == (None, 0, 1)
    assert figure.reason == "infinite: nothing changed"


def test_controls_are_no_candidates(summed: Summed) -> None:
    rows = [
        *frames([1.0]),
        measured("repeat, jpeg2000", role="repeat", codec="jpeg2000", control_held=True, study="S-0"),
        measured(
            "over-compressed, jpeg2000",
            role="over-compressed",
            codec="jpeg2000",
            control_held=True,
            study="S-0",
            rmse_content=99.0,
        ),
    ]
    record = summed(rows)
    assert [each.candidate for each in record.candidates] == [ONE]
    assert {each.candidate for each in record.figures} == {ONE}
    assert {(each.control, each.held, each.not_held) for each in record.controls} == {
        ("reversible", 1, 0),
        ("repeat", 1, 0),
        ("over-compressed", 1, 0),
    }


def test_the_ledger_takes_ratios_of_totals(summed: Summed) -> None:
    rows = [
        measured(ONE, study="S-0", code_bytes=20, ratio_bits_stored=15.0),
        reversible(study="S-0"),
        measured(ONE, study="S-1", code_bytes=60, ratio_bits_stored=5.0),
        reversible(study="S-1"),
    ]
    (entry,) = summed(rows).ledger
    # 2 frames of 10 x 20 pixels at 12 bits: 600 bytes, over 80 bytes of code.
    assert entry.ratio_bits_stored == 7.5
    assert entry.ratio_bits_allocated == 10.0
    assert entry.ratio_content == pytest.approx(300 / 80)
    assert entry.times_smaller_than_lossless == pytest.approx(300 / 80)
    assert entry.times_smaller_than_now == 10.0
    assert (entry.ratio_bits_stored_least, entry.ratio_bits_stored_largest) == (5.0, 15.0)
    assert entry.lossless_codecs == {"jpegls-reversible": 2}


@pytest.mark.parametrize(
    ("made", "values", "code"),
    [
        pytest.param(plan(), [1.0], 0, id="no limits"),
        pytest.param(plan(limits=[limit()]), [1.0, 5.0], 0, id="within"),
        pytest.param(plan(limits=[limit()]), [1.0, 5.1], 10, id="outside"),
        pytest.param(plan(limits=[limit(unit="OD")]), [1.0], 3, id="nothing evaluated"),
        pytest.param(
            plan(claim={"exceeding_at_most_percent": 5}, sample={"drawn": "random"}, limits=[limit()]),
            [1.0] * 58,
            7,
            id="58 patients for 95/95",
        ),
        pytest.param(
            plan(claim={"exceeding_at_most_percent": 5}, sample={"drawn": "random"}, limits=[limit()]),
            [1.0] * 59,
            0,
            id="59 patients for 95/95",
        ),
        pytest.param(
            plan(claim={"exceeding_at_most_percent": 5}, sample={"drawn": "consecutive"}, limits=[limit()]),
            [1.0] * 59,
            7,
            id="not drawn at random",
        ),
    ],
)
def test_the_exit_code_follows_from_limits_and_claim(
    summed: Summed, made: Plan, values: list[float], code: int
) -> None:
    assert summed(frames(values), made).exit_code == code


@pytest.mark.parametrize(
    ("made", "text"),
    [
        (plan(limits=[limit(unit="OD")]), f"a proposed candidate without a value for any limit: {ONE} gave none"),
        (plan(allowed={"refused_percent": 1}), "more files refused than the plan allows: 1 of 2, at most 1 %"),
    ],
    ids=["without a value", "refused"],
)
def test_what_left_too_little_is_named(summed: Summed, made: Plan, text: str) -> None:
    refused = row("inputs", input="F", side="original", status="refused", reason="range", frames_refused=1)
    files = [*inputs(["S-0"]), refused] if "refused" in text else None
    record = summed(frames([1.0]), made, files=files)
    assert record.exit_code == 3
    assert record.exit_text.startswith(text)
    assert [item.text for item in record.conditions if item.code == 3] == [record.exit_text]


def test_a_proposed_candidate_that_took_no_frame_is_named_with_the_reason(tmp_path: Path) -> None:
    rows = frames([1.0])
    tables = {
        "measures": reader(tmp_path, "measures", rows + owed(rows)),
        "windows": reader(tmp_path, "windows", []),
        "regions": reader(tmp_path, "regions", []),
        "inputs": reader(tmp_path, "inputs", inputs(["S-0"])),
    }
    made = plan(limits=[limit()], candidates=[{"codec": "jpeg2000", "ratio": 10}, {"codec": "jpeg", "ratio": 10}])
    notes = {"jpeg 10:1 not run: jpeg: 14 bits stored, expected at most 12": 1}
    record = summarise(made, tables, dataclasses.replace(AROUND, notes=notes))
    assert (record.exit_code, record.exit_text) == (
        3,
        "a proposed candidate without a value for any limit: jpeg 10:1 took no frame "
        "(14 bits stored, expected at most 12)",
    )


def test_a_candidate_for_context_does_not_decide(summed: Summed) -> None:
    made = plan(limits=[limit()], candidates=[{"codec": "jpeg2000", "ratio": 10, "status": "context"}])
    record = summed(frames([9.0]), made)
    assert record.outcomes[0].outcome == "outside declared limits"
    assert record.exit_code == 0


def test_controls_not_held_make_the_run_invalid_and_win_over_limits(summed: Summed) -> None:
    rows = [measured(ONE, rmse_content=9.0), reversible(max_frame=1.0, control_held=False, control_found="error 1 HU")]
    record = summed(rows, plan(limits=[limit()]))
    assert not record.controls_held
    assert record.exit_code == 4
    assert [each.code for each in record.conditions] == [4, 10]
    (control,) = [each for each in record.controls if each.control == "reversible"]
    assert (control.not_held, control.found) == (1, "error 1 HU")
    assert CAUTIONS_WHEN["controls"] in record.cautions


def test_a_run_without_any_reversible_control_is_invalid(summed: Summed) -> None:
    assert summed([measured(ONE, rmse_content=1.0)]).exit_code == 4


def test_refused_files_beyond_what_the_plan_allows_are_said(summed: Summed) -> None:
    files = [
        *inputs(["S-0"]),
        row("inputs", input="bad", side="original", status="refused", reason="truncated", frames_assessed=0),
    ]
    record = summed(frames([1.0]), files=files)
    assert record.exit_code == 3
    assert (record.inputs.files, record.inputs.assessed, record.inputs.refused) == (2, 1, 1)
    assert [(each.reason, each.files) for each in record.left_out] == [("truncated", 1)]
    assert summed(frames([1.0]), plan(allowed={"refused_percent": 50}), files=files).exit_code == 0


def test_the_bound_stands_only_with_a_random_sample(summed: Summed) -> None:
    chosen = summed(frames([1.0] * 30), plan(limits=[limit()])).outcomes[0]
    assert (chosen.upper_bound_percent, chosen.bound_text) == (None, NO_BOUND)
    drawn = summed(frames([1.0] * 30), plan(limits=[limit()], sample={"drawn": "random"})).outcomes[0]
    # One-sided 95 % bound at 0 of 30: 9.5034 %, computed from the stated definition.
    assert drawn.upper_bound_percent == pytest.approx(9.5034, abs=5e-4)


def test_a_limit_that_over_compression_also_meets_is_marked(summed: Summed) -> None:
    over = measured(
        "over-compressed, jpeg2000",
        role="over-compressed",
        codec="jpeg2000",
        control_held=True,
        study="S-0",
        rmse_content=4.0,
    )
    loose = summed([*frames([1.0]), over], plan(limits=[limit()])).outcomes[0]
    assert loose.over_compressed_also_within is True
    tight = summed([*frames([1.0]), over], plan(limits=[limit(at_most=3)])).outcomes[0]
    assert tight.over_compressed_also_within is False


def test_limits_on_regions_and_windows_are_held_in_their_scope(summed: Summed) -> None:
    shared = {
        "role": "candidate",
        "candidate": ONE,
        "study": "S-0",
        "patient": "P of S-0",
        "stratum": "CT, HEAD",
        "modality": "CT",
        "unit": "HU",
    }
    regions = [
        row("regions", **shared, region="a", label="disc", region_role="target", rmse=2.0),
        row("regions", **shared, region="b", label="liver", region_role="background", rmse=8.0),
    ]
    windows = [row("windows", **shared, window="brain", ssim=0.8), row("windows", **shared, window="bone", ssim=0.99)]
    made = plan(
        limits=[
            limit(name="target", measure="region_rmse", region_role="target"),
            limit(name="liver", measure="region_rmse", region="liver"),
            limit(name="ssim", measure="ssim", unit="1", at_most=None, at_least=0.9, window="brain"),
            limit(name="head", body_part="HEAD"),
            limit(name="chest", body_part="CHEST"),
            limit(name="mr", modality="MR"),
        ]
    )
    record = summed(frames([1.0]), made, regions=regions, windows=windows)
    assert {each.limit: each.outcome.split(" ")[0] for each in record.outcomes} == {
        "target": "within",
        "liver": "outside",
        "ssim": "outside",
        "head": "within",
        "chest": "not",
        "mr": "not",
    }


def test_the_worst_studies_stand_with_their_worst_series(summed: Summed) -> None:
    rows = []
    for study, values in (("S-a", [1.0, 9.0]), ("S-b", [5.0, 6.0]), ("S-c", [2.0]), ("S-d", [3.0])):
        for number, value in enumerate(values, start=1):
            rows += [
                measured(ONE, study=study, frame=number, rmse_content=value, series=f"{study}/{number}"),
                reversible(study=study, frame=number),
            ]
    found = [(each.rank, each.worst.study, each.worst.series, each.largest) for each in summed(rows).worst_studies]
    assert found == [(1, "S-a", "S-a/2", 9.0), (2, "S-b", "S-b/2", 6.0), (3, "S-d", "S-d/1", 3.0)]


def test_worst_places_are_the_frames_with_the_worst_patch(summed: Summed) -> None:
    rows = []
    for number, value in enumerate([3.0, 7.0, 5.0, 1.0]):
        study = f"S-{number}"
        rows += [
            measured(ONE, study=study, worst_patch_rmse=value, worst_patch_row=8 * number, worst_patch_column=16),
            reversible(study=study),
        ]
    found = [(each.rank, each.value, each.place.row, each.place.column) for each in summed(rows).worst_places]
    assert found == [(1, 7.0, 8, 16), (2, 5.0, 16, 16), (3, 3.0, 0, 16)]


def test_the_standing_cautions_come_first_and_others_where_they_apply(summed: Summed) -> None:
    plain = summed(frames([1.0], modality="US")).cautions
    assert plain[: len(CAUTIONS)] == CAUTIONS
    lossy = summed(frames([1.0], source_lossy=True, under_18=True, may_show_text=True)).cautions
    for name in ("already_lossy", "paediatric", "burned_in_text"):
        assert CAUTIONS_WHEN[name] in lossy
        assert CAUTIONS_WHEN[name] not in plain


def test_the_order_of_limits_does_not_matter(summed: Summed) -> None:
    one, two = limit(name="a"), limit(name="b", at_most=0.5)
    forth = summed(frames([1.0, 4.0]), plan(limits=[one, two]))
    back = summed(frames([1.0, 4.0]), plan(limits=[two, one]))
    assert {each.limit: each for each in forth.outcomes} == {each.limit: each for each in back.outcomes}
    assert forth.exit_code == back.exit_code


def test_permuting_studies_changes_no_count(summed: Summed) -> None:
    values = [1.0, 6.0, 2.0, 8.0]
    made = plan(limits=[limit()], sample={"drawn": "random"})
    forth, back = summed(frames(values), made).outcomes[0], summed(frames(values[::-1]), made).outcomes[0]
    same = ("outcome", "studies", "studies_within", "patients_within", "upper_bound_percent", "worst_value")
    assert [getattr(forth, name) for name in same] == [getattr(back, name) for name in same]


def test_a_run_whose_codec_lacks_its_controls_is_invalid(summed: Summed) -> None:
    lacking = [*frames([1.0]), measured("tiled 10:1", study="S-0", codec="tiled")]
    made = plan(candidates=[{"codec": "jpeg2000", "ratio": 10}, {"codec": "tiled", "ratio": 10}])
    assert summed(lacking, made).controls_held
    only_one = [*lacking, measured("repeat, tiled", role="repeat", codec="tiled", control_held=False, study="S-0")]
    assert not summed(only_one, made).controls_held


def test_within_stands_only_where_every_study_in_scope_gave_a_value(summed: Summed) -> None:
    rows = [*frames([1.0, 2.0]), measured(ONE, study="S-8", rmse_content=None), reversible(study="S-8")]
    random = {"drawn": "random"}
    (entry,) = summed(rows, plan(limits=[limit()], sample=random)).outcomes
    assert (entry.outcome, entry.reason) == (
        "not evaluated",
        "1 of 3 studies gave no value; the others are within",
    )
    assert (entry.studies, entry.studies_within, entry.studies_not_evaluated) == (3, 2, 1)
    assert entry.upper_bound_percent is None
    assert entry.bound_text == "no bound: 1 of 3 patients not evaluated"


def test_a_frame_that_the_codec_did_not_take_is_missed(summed: Summed) -> None:
    rows = [*frames([1.0, 2.0]), reversible(study="S-8")]
    (entry,) = summed(rows, plan(limits=[limit()])).outcomes
    assert entry.outcome == "not evaluated"
    assert (entry.studies_not_evaluated, entry.frames_not_run) == (1, 1)


def test_an_exceedance_is_outside_whatever_else_is_missing(summed: Summed) -> None:
    rows = [*frames([9.0]), reversible(study="S-8")]
    assert summed(rows, plan(limits=[limit()])).outcomes[0].outcome == "outside declared limits"


def test_a_ratio_in_decibels_of_an_unchanged_frame_is_infinite_and_within(summed: Summed) -> None:
    floor = limit(measure="psnr_peak_bits_db", unit="dB", at_most=None, at_least=60.0)
    rows = frames([0.0], psnr_peak_bits_db=None, rmse_frame=0.0)
    assert summed(rows, plan(limits=[floor])).outcomes[0].outcome == "within declared limits"


def test_over_compression_of_another_codec_tells_nothing_of_a_limit(summed: Summed) -> None:
    other = measured(
        "over-compressed, tiled",
        role="over-compressed",
        codec="tiled",
        control_held=True,
        study="S-0",
        rmse_content=1.0,
    )
    own = measured(
        "over-compressed, jpeg2000", role="over-compressed", codec="jpeg2000", control_held=True, rmse_content=50.0
    )
    (entry,) = summed([*frames([1.0]), other, own], plan(limits=[limit()])).outcomes
    assert entry.over_compressed_also_within is False


def test_frames_refused_inside_a_file_are_counted_with_their_reason(summed: Summed) -> None:
    files = [
        row(
            "inputs",
            input="F",
            side="original",
            status="assessed",
            reason="decode",
            study="S-0",
            frames_assessed=1,
            frames_refused=19,
        )
    ]
    record = summed(frames([1.0]), files=files)
    assert record.inputs.frames_refused == 19
    assert [(each.reason, each.files, each.frames) for each in record.left_out] == [("decode", 0, 19)]
    assert record.exit_code == 3


def test_windows_of_other_settings_are_never_pooled(summed: Summed) -> None:
    shared = {"role": "candidate", "candidate": ONE, "study": "S-0", "stratum": "CT, HEAD", "window": "file window 1"}
    rows = [
        row("windows", **shared, centre=40.0, width=80.0, ssim=0.5),
        row("windows", **shared, centre=40.0, width=400.0, ssim=0.9),
    ]
    found = {each.window: each.median for each in summed(frames([1.0]), windows=rows).figures if each.window}
    assert found == {
        "file window 1 (centre 40, width 80)": 0.5,
        "file window 1 (centre 40, width 400)": 0.9,
    }


def test_contrast_kept_stands_with_its_tail(summed: Summed) -> None:
    shared = {
        "role": "candidate",
        "candidate": ONE,
        "study": "S-0",
        "stratum": "CT, HEAD",
        "unit": "HU",
        "region": "a",
        "label": "disc",
        "region_role": "target",
        "max": 1.0,
    }
    kept = [100.0, 90.0, 95.0, 40.0]
    rows = [row("regions", **shared, contrast_before=-20.0, contrast_after=-20.0 * part / 100) for part in kept]
    (entry,) = summed(frames([1.0]), regions=rows).regions
    assert entry.contrast_kept_percent == pytest.approx(92.5)
    assert entry.contrast_kept_percent_p05 == pytest.approx(np.percentile(kept, 5))
    assert entry.contrast_kept_percent_least == pytest.approx(40.0)


def delivered_files(**changes: Any) -> list[Any]:
    known = {
        "input": "D",
        "side": "delivered",
        "status": "assessed",
        "instance": "I of copy",
        "matched": "same instance UID",
        "pair": "F of S-0",
        "lossy_declared": "01",
        "new_uid": False,
        "derived": True,
    }
    return [*inputs(["S-0"]), row("inputs", **(known | changes))]


@pytest.mark.parametrize(
    ("unchanged", "not_as_asked", "pairs_unchanged"), [(False, 3, 0), (True, None, 1)], ids=["lossy", "unchanged"]
)
def test_headers_are_held_against_the_standard_only_where_pixels_changed(
    summed: Summed, unchanged: bool, not_as_asked: int | None, pairs_unchanged: int
) -> None:
    copy = measured(
        "delivered copies",
        role="delivered",
        study="S-0",
        max_frame=0.0 if unchanged else 3.0,
        rmse_frame=0.0,
        unchanged=unchanged,
    )
    found = summed([*frames([1.0]), copy], files=delivered_files()).delivered
    assert found is not None
    assert (found.pairs, found.pairs_measured, found.pairs_unchanged) == (1, 1, pairs_unchanged)
    # Ratio and method absent, and the UID not new: three of the five that PS3.3 C.7.6.1.1.5 speaks of.
    failing = sum(each.not_as_asked for each in found.expectations) if found.expectations else None
    assert failing == not_as_asked


def test_copies_that_gave_no_measured_pair_end_the_run_with_a_word(summed: Summed) -> None:
    files = delivered_files(status="excluded", reason="no-original", matched="unmatched", pair="")
    record = summed(frames([1.0]), files=files)
    assert record.exit_code == 3
    assert record.delivered is not None
    assert (record.delivered.pairs, record.delivered.copies_without_original) == (0, 1)
