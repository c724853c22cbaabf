"""What a reader of the first pages must not be led to think."""

from __future__ import annotations

from typing import Any

import pytest

from safecheck.record.document import RecordDocument
from safecheck.record.inputs import CountEntry
from safecheck.record.outcomes import Condition
from safecheck.report.blocks import Chart, Charts, Facts, Places, Prose, Table
from safecheck.report.content import report_of
from safecheck.report.formulas import FORMULAS
from safecheck.report.numbers import aligned_beside, header_ratio
from safecheck.report.sections.checks import not_run
from safecheck.report.sections.view import view_of
from safecheck.report.summary import summary_text
from safecheck.wording import NO_LIMITS, sentence_of
from tests.report.made_records import CT, make_record, make_run, outcomes, stratum_of
from tests.report.pages import squeezed
from tests.report.test_content import report, section, tables, words


def summary(record: RecordDocument) -> str:
    return squeezed(summary_text(record, "ab" * 32, make_run()))


def box(record: RecordDocument) -> str:
    return next(item.text for item in report(record).front if isinstance(item, Prose) and item.style == "outcome")


@pytest.mark.parametrize(
    "text",
    [f"ran, controls held, {NO_LIMITS}", "ran, controls held, no proposed candidate outside a declared limit"],
    ids=["said so by the record", "as older records have it"],
)
def test_without_limits_the_box_says_so_first_and_names_no_limit_after_it(text: str) -> None:
    record = make_record(limits=[], exit_text=text)
    assert box(record) == "No limits declared. Exit 0: ran, controls held"
    assert "outside a declared limit" not in summary(record)


def nothing_assessed() -> RecordDocument:
    record = make_record(strata=(), limits=[], figures=(), ledger=(), controls=(), worst_places=(), regions=())
    idle = tuple(item.model_copy(update={"frames": 0, "reached": {}}) for item in record.candidates)
    inputs = record.inputs.model_copy(update={"frames_assessed": 0, "assessed": 0})
    condition = Condition(code=3, text="more input refused or excluded than the plan allows, or nothing evaluated")
    exits = {"exit_code": 3, "exit_text": condition.text, "conditions": (condition,)}
    return record.model_copy(update={"candidates": idle, "inputs": inputs, **exits})


def test_with_no_frame_nothing_is_said_to_have_held_been_reached_or_been_run() -> None:
    record = nothing_assessed()
    made = report(record)
    text = words(made.front) + "".join(words(part.blocks) for part in made.sections) + summary(record)
    assert "controls held" not in text.lower()
    assert "Every frame reached" not in text
    assert "Proposed: jpeg2000" not in text
    assert "In the plan, but run on no frame: jpeg2000 at 5, 8, 10, 15 and 20:1" in text
    assert "No frame was assessed" in text


def changed_outcomes(**changes: Any) -> RecordDocument:
    return make_record(limits=[item.model_copy(update=changes) for item in outcomes()[:1]])


def test_denominators_name_what_was_not_evaluated_and_not_taken() -> None:
    counts = {"studies": 30, "studies_within": 27, "studies_not_evaluated": 2, "frames_not_run": 5}
    made = report(changed_outcomes(status="proposed", **counts))
    says = "within in 27 of 30 studies, 2 not evaluated, 5 frames not taken by the codec"
    assert says in words(made.front)
    (table, *_) = tables(section(made, "Limits and outcomes"))
    at = [column.head for column in table.columns].index("studies")
    assert table.rows[1].cells[at] == "27 of 30"
    assert table.rows[1].cells[-1].endswith("Not evaluated: 2 studies. 5 frames not taken by the codec.")
    assert says in summary(changed_outcomes(status="proposed", **counts))


def test_the_worst_value_stands_with_region_row_column_and_position() -> None:
    text = words(section(report(changed_outcomes(worst_region="target 1")), "Limits and outcomes"))
    assert "Region target 1, P-0005c2a9, S-000571fe, series 4, image 22" in text
    assert "row 203, column 318, slice at −100 mm" in text


@pytest.mark.parametrize(("told_apart", "marked"), [(True, True), (False, False), (None, False)])
def test_only_a_limit_that_the_control_meets_is_said_to_tell_nothing_apart(
    told_apart: bool | None, marked: bool
) -> None:
    text = words(section(report(changed_outcomes(over_compressed_also_within=told_apart)), "Limits and outcomes"))
    assert ("does not tell the over-compressed control apart" in text) == marked


@pytest.mark.parametrize(
    ("value", "bound", "shown"),
    [
        (5.0004, 5.0, "5.0004"),
        (4.99996, 5.0, "4.99996"),
        (5.0, 5.0, "5.00"),
        (-2.001, 2.0, "−2.001"),
        (0.98, 0.98, "0.98"),
    ],
)
def test_a_value_is_never_rounded_onto_or_over_its_limit(value: float, bound: float, shown: str) -> None:
    (text,) = aligned_beside([value], bound)
    assert float(text.replace("−", "-")) == float(shown.replace("−", "-"))


def charts_of(record: RecordDocument, stratum: str = CT) -> tuple[Chart, ...]:
    found = [item for item in section(report(record), f"Figures: {stratum}") if isinstance(item, Charts)]
    return found[0].charts if found else ()


def with_scope(**scope: str) -> RecordDocument:
    """One limit of 5 HU on RMSE, with a scope."""
    record = make_record(strata=(stratum_of(CT, "CT", 9),))
    limit = record.plan.content["limits"][0] | scope
    plan = record.plan.model_copy(update={"content": record.plan.content | {"limits": [limit]}})
    return record.model_copy(update={"plan": plan})


@pytest.mark.parametrize(
    ("scope", "drawn"),
    [
        ({"modality": "CT"}, True),
        ({"modality": "", "body_part": "HEAD"}, True),
        ({"modality": "MR"}, False),
        ({"modality": "CT", "body_part": "CHEST"}, False),
    ],
    ids=["its modality", "its body part", "another modality", "another body part"],
)
def test_a_limit_is_drawn_only_where_it_speaks_of_the_group(scope: dict[str, str], drawn: bool) -> None:
    assert [bound.value for bound in charts_of(with_scope(**scope))[0].bounds] == [5.0] * drawn


def test_all_limits_on_a_measure_are_drawn_and_those_too_high_are_named() -> None:
    record = with_scope()
    names = (("second", 4.0), ("far", 900.0))
    limit = record.plan.content["limits"][0]
    content = record.plan.content | {"limits": [limit, *(limit | {"name": name} for name, _ in names)]}
    more = [record.outcomes[0].model_copy(update={"limit": name, "bound": bound}) for name, bound in names]
    plan = record.plan.model_copy(update={"content": content})
    both = record.model_copy(update={"plan": plan, "outcomes": (*record.outcomes, *more)})
    assert [bound.value for bound in charts_of(both)[0].near_bounds] == [5.0, 4.0]
    found = next(item for item in section(report(both), f"Figures: {CT}") if isinstance(item, Charts))
    assert "Above the charts: declared limit 900: far of RMSE, content." in found.caption


def test_charts_of_nothing_but_zeros_are_one_sentence() -> None:
    record = make_record(strata=(stratum_of(CT, "CT", 9),))
    zero = dict.fromkeys(("median", "p05", "p95", "least", "largest"), 0.0)
    still = record.model_copy(update={"figures": tuple(item.model_copy(update=zero) for item in record.figures)})
    assert charts_of(still) == ()
    text = words(section(report(still), f"Figures: {CT}"))
    assert "No chart of RMSE, content and RMSE, worst patch 8×8: it is 0 with every candidate." in text


def frames_refused() -> RecordDocument:
    record = make_record()
    inside = CountEntry(
        side="original", status="refused", reason="decode", sentence=sentence_of("decode"), files=0, frames=5
    )
    inputs = record.inputs.model_copy(update={"frames_refused": 8})
    return record.model_copy(update={"inputs": inputs, "left_out": (*record.left_out, inside)})


def test_frames_refused_inside_files_stand_by_reason_and_add_up() -> None:
    record = frames_refused()
    blocks = section(report(record), "Files left out, and what was noticed")
    assert "312 assessed, 8 refused = 5 inside files otherwise assessed + 3 of files refused whole." in words(blocks)
    rows = tables(blocks)[0].rows
    assert [row.cells[4:] for row in rows if row.cells[2] == "decode"] == [("0", "5")]
    assert rows[-1].cells == ("Sum", "", "", "", "16", "5")
    assert "8 frames refused" in words(report(record).front)
    assert "8 frames refused" in summary(record)
    assert "frames refused" not in words(report().front)


def test_frames_that_do_not_add_up_are_called_out() -> None:
    record = frames_refused()
    few = record.model_copy(update={"inputs": record.inputs.model_copy(update={"frames_refused": 4})})
    assert "THE SUMS DO NOT AGREE" in words(section(report(few), "Files left out, and what was noticed"))


def test_delivered_pairs_add_up_and_unchanged_ones_are_named() -> None:
    blocks = section(report(), "Delivered copies")
    text = words(blocks)
    assert "61 pairs = 56 measured + 4 whose original the plan's scope leaves out + 1 not measured." in text
    assert "2 unchanged: every sample of the copy equals the original's" in text
    assert "and 51 more pairs; all stand in the tables" in text


def test_copies_handed_in_of_which_none_was_measured_are_called_out_everywhere() -> None:
    record = make_record()
    assert record.delivered is not None
    none = record.delivered.model_copy(update={"pairs_measured": 0, "shown": ()})
    record = record.model_copy(update={"delivered": none})
    made = report(record)
    facts = next(block for block in made.front if isinstance(block, Facts))
    for text in (words((facts,)), words(section(made, "Delivered copies")), summary(record)):
        assert "NONE WAS MEASURED" in text


@pytest.mark.parametrize(
    ("text", "shown"),
    [("338.687312345", "338.687"), ("10", "10"), ("10.00000001\\18.5", "10\\18.5"), ("", "")],
)
def test_a_header_ratio_has_six_significant_digits(text: str, shown: str) -> None:
    assert header_ratio(text) == shown


def test_regions_name_background_by_label_units_in_heads_and_the_place_of_the_largest_error() -> None:
    blocks = section(report(), "Regions")
    errors, contrast = tables(blocks)[:2]
    assert errors.columns[-1].head == "Place of the largest error"
    assert all(column.unit == "HU" for column in errors.columns[2:-1])
    assert "background: white matter" in contrast.rows[0].cells[0]
    kept = [column for column in contrast.columns if column.over == "Contrast kept"]
    assert [column.head for column in kept] == ["median", "5th perc.", "least"]
    assert len(contrast.columns) == len(contrast.rows[1].cells)


def test_definitions_explain_regions_the_noise_estimator_and_the_content_rules() -> None:
    text = words(section(report(), "Definitions"))
    for part in ("Region: CNR", "Region: contrast kept", "Region: noise removed"):
        assert part in text
    assert "s² = Σ r² ÷ 61" in FORMULAS["noise_sd"][1]
    assert "ct-air-1" in text
    assert "below −500 HU" in text
    reasons = words(section(report(), "Files left out, and what was noticed"))
    assert "ct-air-1 leaves under 5 % of the frame\n2" in reasons


def test_what_was_not_run_is_pooled_by_reason_and_not_said_to_be_set_right() -> None:
    notes = {
        "jpeg2000 5:1 not run: jpeg2000: 10 x 12 pixels, expected 32 to 65535 on each side": 1,
        "jpeg2000 5:1 not run: jpeg2000: 8 x 9 pixels, expected 32 to 65535 on each side": 2,
        "jpeg2000 10:1 not run: jpeg2000: 8 x 9 pixels, expected 32 to 65535 on each side": 3,
        "overlay bits cleared from the unused high bits": 3,
    }
    reason = "jpeg2000: size of the frame, expected 32 to 65535 on each side"
    assert not_run(notes, ["jpeg2000 5:1", "jpeg2000 10:1"]) == [(reason, ["jpeg2000 5:1", "jpeg2000 10:1"], 3)]
    blocks = section(report(make_record(notes=notes)), "Files left out, and what was noticed")
    noticed = next(item for item in tables(blocks) if item.columns[0].head == "What was noticed")
    assert [row.cells for row in noticed.rows] == [("overlay bits cleared from the unused high bits", "3")]


def test_a_planted_displacement_has_no_codec() -> None:
    record = make_record()
    named = [item.model_copy(update={"codec": "none"}) if not item.codec else item for item in record.controls]
    table = tables(section(report(record.model_copy(update={"controls": tuple(named)})), "Controls"))[0]
    assert [row.cells[1] for row in table.rows if row.cells[0] == "planted"] == ["–"]


def test_the_selftest_shows_a_dash_for_lossy_syntaxes_and_the_runs_control_of_tiled() -> None:
    record = make_record()
    checks = tuple(item.model_copy(update={"reversible_exact": None}) for item in record.selftest)
    blocks = section(report(record.model_copy(update={"selftest": checks})), "Versions and selftest")
    table = next(item for item in tables(blocks) if item.columns[0].head == "Codec")
    assert {row.cells[0]: row.cells[3] for row in table.rows} == {
        "jpeg2000": "–",
        "tiled": "yes, in this run's control",
        "jpeg-xl": "–",
    }


def test_the_plan_as_read_leaves_empty_keys_out() -> None:
    record = make_record()
    content = record.plan.content | {"windows": [], "claim": None, "regions": {"file": ""}}
    plan = record.plan.model_copy(update={"content": content})
    keys = [row.cells[0] for row in plan_table(record.model_copy(update={"plan": plan})).rows]
    assert not {"windows", "claim", "regions", "regions.file"} & set(keys)
    assert "change.reference" in keys


def plan_table(record: RecordDocument) -> Table:
    return tables(section(report_of(view_of(record, "ab" * 32, make_run(), None)), "Plan as read"))[0]


def test_the_head_of_a_card_names_its_group() -> None:
    cards = next(item for item in section(report(), "Worst places") if isinstance(item, Places)).cards
    assert {card.head.partition(": ")[0] for card in cards} == {item.stratum for item in make_record().strata}
