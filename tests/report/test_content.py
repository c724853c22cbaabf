from __future__ import annotations

from typing import Any

import pytest

from safecheck.errors import DossierError
from safecheck.measures.catalogue import MEASURES
from safecheck.record.document import RecordDocument
from safecheck.report.blocks import (
    Block,
    Chart,
    Charts,
    Facts,
    Heading,
    Numbered,
    Places,
    Prose,
    Report,
    Table,
    Title,
)
from safecheck.report.content import report_of
from safecheck.report.formulas import FORMULAS
from safecheck.report.sections.view import View, view_of, window_words
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, SHORT_CAUTION, lint
from tests.report.made_records import CR, CT, make_record, make_run, outcomes, stratum_of

FURTHER = "Further measures, all groups"


def view(record: RecordDocument | None = None, **run: Any) -> View:
    return view_of(record or make_record(), "ab" * 32, make_run(**run), None)


def report(record: RecordDocument | None = None, **run: Any) -> Report:
    return report_of(view(record, **run))


def words(blocks: tuple[Block, ...]) -> str:
    """All text of some blocks."""
    parts: list[str] = []
    for block in blocks:
        match block:
            case Prose() | Heading():
                parts.append(block.text)
            case Numbered():
                parts += block.items
            case Facts():
                parts += [line for _, lines in block.pairs for line in lines]
            case Table():
                parts += [block.caption, block.note, *(cell for row in block.rows for cell in row.cells)]
                parts += [f"{column.head} {column.unit}" for column in block.columns]
            case _:
                pass
    return "\n".join(parts)


def section(made: Report, title: str) -> tuple[Block, ...]:
    return next(item.blocks for item in made.sections if item.title == title)


def tables(blocks: tuple[Block, ...]) -> list[Table]:
    return [block for block in blocks if isinstance(block, Table)]


def test_every_measure_of_the_catalogue_has_a_formula_and_a_source() -> None:
    assert set(FORMULAS) == set(MEASURES)
    assert all(all(parts) for parts in FORMULAS.values())
    assert len({label for label, _, _ in FORMULAS.values()}) == len(FORMULAS)


def test_no_formula_uses_a_forbidden_word() -> None:
    assert [found for parts in FORMULAS.values() for text in parts for found in lint(text)] == []


def test_outcomes_outside_come_first_and_codecs_of_archives_before_the_analysis_codec() -> None:
    found = view().outcomes("proposed")
    order = [item.outcome for item in found]
    assert order == sorted(order, key=("outside declared limits", "not evaluated", "within declared limits").index)
    first = [item.candidate for item in found if item.limit == "error inside the head"]
    assert first == [f"{codec} {ratio}:1" for codec in ("jpeg2000", "tiled") for ratio in (10, 15, 20)]


def test_the_first_page_has_a_line_for_each_limit_and_proposed_candidate() -> None:
    table = tables(report().front)[0]
    lines = [row.cells[0] for row in table.rows if not row.group]
    assert len(lines) == 2 * 6
    assert table.note == ""


def test_a_long_first_page_cuts_no_outside_for_a_within_and_says_how_many_it_cut() -> None:
    limits = [item.model_copy(update={"limit": f"limit {n}"}) for n in range(20) for item in outcomes()]
    table = tables(report(make_record(limits=limits)).front)[0]
    lines = [row.cells for row in table.rows if not row.group]
    total = sum(item.status == "proposed" for item in limits)
    assert {cells[1].split(";")[0] for cells in lines} == {"outside declared limits"}
    assert table.note.startswith(f"and {total - len(lines)} more (")
    assert "Limits and outcomes" in table.note


def test_without_limits_the_words_are_no_limits_declared() -> None:
    made = report(make_record(limits=[]))
    assert "No limits declared." in words(made.front)
    assert "No limits declared." in words(section(made, "Limits and outcomes"))


def test_a_limit_that_the_over_compressed_control_meets_is_marked() -> None:
    made = report()
    for blocks in (made.front, section(made, "Limits and outcomes")):
        assert "does not tell the over-compressed control apart" in words(blocks)


@pytest.mark.parametrize(
    ("declared", "says"),
    [
        ("before the first results", "declared before the first results"),
        ("after the first results", "FIRST SEEN AFTER RESULTS OF THE SAME INPUTS"),
        ("not known", "declared at a time that is not known"),
    ],
)
def test_the_first_page_says_when_the_plan_was_declared(declared: str, says: str) -> None:
    assert says in words(report(plan_declared=declared).front)


def test_cautions_are_numbered_and_those_of_this_run_follow() -> None:
    numbered = [block for block in report().front if isinstance(block, Numbered)]
    assert numbered[0] == Numbered(CAUTIONS)
    assert numbered[1] == Numbered((CAUTIONS_WHEN["many_limits"],), first=len(CAUTIONS) + 1)


def test_the_short_caution_stands_above_every_table_of_outcomes_and_figures() -> None:
    made = report()
    for title in ("Limits and outcomes", f"Figures: {CT}", f"Figures: {CR}"):
        kinds = [
            "caution" if isinstance(block, Prose) and block.text == SHORT_CAUTION else type(block).__name__
            for block in section(made, title)
        ]
        assert kinds.index("caution") < kinds.index("Table")


def test_sums_that_agree_are_shown_and_sums_that_do_not_are_called_out() -> None:
    good = words(section(report(), "Files left out, and what was noticed"))
    assert "Originals: 327 files = 312 assessed + 12 excluded + 3 refused." in good
    assert "DO NOT" not in good
    record = make_record()
    wrong = record.model_copy(update={"inputs": record.inputs.model_copy(update={"excluded": 13})})
    bad = words(section(report(wrong), "Files left out, and what was noticed"))
    assert "THE SUMS DO NOT AGREE" in bad
    assert "THE REASONS DO NOT ADD UP" in bad


def test_controls_not_held_are_named_with_their_place() -> None:
    made = report(make_record(held=False))
    text = words(section(made, "Controls"))
    assert "No figure of this run may be relied on" in text
    assert "not held on 1 frame. First at patient P-0009c2a9" in text
    assert "Found: largest error 1 HU at row 203, column 318." in text
    assert made.across
    assert not report().across


def test_every_ledger_has_all_bases_and_marks_the_analysis_codec() -> None:
    blocks = section(report(), "Ratio ledger")
    table = tables(blocks)[1]
    heads = {f"{column.over} {column.head}".strip() for column in table.columns}
    assert {"Bits stored total", "Bits allocated", "Content", "Smaller than lossless", "Smaller than now"} <= heads
    names = [row.cells[0] for row in table.rows]
    assert names == sorted(names, key=lambda name: name.endswith("*"))
    assert all(name.endswith("*") == name.startswith("tiled") for name in names)
    assert "* analysis codec, not an archive encoder" in words(blocks)


def test_every_column_of_figures_names_its_unit() -> None:
    for table in tables(section(report(), f"Figures: {CT}"))[:2]:
        numbers = [column for column in table.columns if column.number and column.head != "Frames"]
        assert [column.head for column in numbers if not column.unit] == []
    for table in tables(section(report(), f"Figures: {CR}"))[:2]:
        numbers = [column for column in table.columns if column.number and column.head != "Frames"]
        assert [column.head for column in numbers if not column.unit and "; stored value" not in column.over] == []


def test_a_mean_of_contrast_never_stands_without_the_noise_removed() -> None:
    table = tables(section(report(), "Regions"))[1]
    overs = [column.over for column in table.columns]
    assert overs.count("CNR") == 3
    assert overs[overs.index("CNR") + 3 :] == ["Noise removed", "Noise removed"]


def test_curves_carry_spread_and_largest_of_each_candidate() -> None:
    charts = next(block for block in section(report(), f"Figures: {CT}") if isinstance(block, Charts))
    first: Chart = charts.charts[0]
    assert [item.name for item in first.series] == ["jpeg2000", "tiled"]
    for series in first.series:
        assert [point.x for point in series.points] == sorted(point.x for point in series.points)
        for point in series.points:
            assert point.low is not None
            assert point.low <= point.y
            assert point.high is not None
            assert point.y <= point.high
            assert point.worst is not None
            assert point.high <= point.worst
    assert [bound.value for bound in first.bounds] == [5.0]


def test_cut_lists_of_worst_places_keep_the_worst_of_every_candidate_and_group() -> None:
    blocks = section(report(), "Worst places")
    cards = next(block for block in blocks if isinstance(block, Places)).cards
    record = make_record()
    ranks = [int(card.head.rpartition("\u00a0")[2]) for card in cards]
    assert ranks.count(1) == len(record.candidates) * len(record.strata)
    assert f"and {len(record.worst_places) - len(cards)} more" in words(blocks)
    assert all(card.pictures is None for card in cards)


def test_missing_parts_are_said_to_be_missing() -> None:
    record = make_record(
        strata=(stratum_of(CT, "CT", 1),), worst_places=(), regions=(), regions_without_frame=(), delivered=None
    )
    made = report(record)
    assert "No worst place is recorded" in words(section(made, "Worst places"))
    assert "No region was drawn." in words(section(made, "Regions"))
    assert "No delivered copies were handed in." in words(section(made, "Delivered copies"))
    assert "These regions lie on no frame" in words(section(report(), "Regions"))


def test_the_plan_stands_as_read_and_the_key_by_its_short_hash() -> None:
    made = report()
    plan = words(section(made, "Plan as read"))
    assert "change.reference" in plan
    assert "codec tiled; ratio 5; basis bits-stored; status proposed" in plan
    assert "7f3a90c1" in words(section(made, "What to keep, and review"))


@pytest.mark.parametrize(
    ("window", "shown"),
    [
        ("brain (centre 40, width 80)", "brain (centre 40, width 80 HU)"),
        ("file window 1 (a table)", "file window 1 (a table)"),
        ("file window 1", "file window 1"),
    ],
)
def test_the_setting_of_a_window_stands_with_its_unit(window: str, shown: str) -> None:
    assert window_words(window, "HU") == shown


def test_two_figures_of_one_name_are_an_error_and_hide_nothing() -> None:
    record = make_record()
    twice = record.model_copy(update={"figures": (*record.figures, record.figures[0])})
    with pytest.raises(DossierError, match="two entries for one candidate"):
        view(twice)


def further_tables(made: Report, stratum: str = CT) -> list[Table]:
    """Tables of further measures of one group, at the end of the record."""
    blocks = section(made, FURTHER)
    start = blocks.index(Heading(f"Further measures: {stratum}"))
    ends = [index for index, block in enumerate(blocks) if isinstance(block, Heading) and index > start]
    return tables(blocks[start : ends[0] if ends else None])


def test_further_measures_stand_at_the_end_in_groups_of_one_unit() -> None:
    made = report()
    assert made.sections[-1].title == FURTHER
    found = further_tables(made)
    assert len(found) == 2
    for table in found:
        heads = [row.cells[0] for row in table.rows if row.group]
        assert heads == ["in HU", "noise: SD kept in %, RMSE in times the noise SD", "in dB", "in pixels"]
        assert {len(row.cells) for row in table.rows if not row.group} == {len(table.columns)}


def test_noise_kept_and_rmse_over_noise_stand_in_adjacent_rows() -> None:
    for table in further_tables(report()):
        names = [row.cells[0] for row in table.rows]
        assert names.index("RMSE over noise SD") == names.index("Noise SD kept") + 1


def test_no_head_names_a_unit_1_or_cuts_a_word() -> None:
    made = report()
    heads = [
        f"{column.over}|{column.head}|{column.unit}"
        for part in made.sections
        for table in tables(part.blocks)
        for column in table.columns
    ]
    groups = [
        row.cells[0] for part in made.sections for table in tables(part.blocks) for row in table.rows if row.group
    ]
    assert [head for head in heads if head.endswith("|1") or "pct." in head] == []
    assert [head for head in groups if head in ("plain numbers", "in times", "in 1")] == []


def test_a_group_of_one_frame_has_one_value_of_each() -> None:
    made = report(make_record(strata=(stratum_of(CT, "CT", 1),), limits=[]))
    heads = [column.head for table in tables(section(made, f"Figures: {CT}")) for column in table.columns]
    heads += [column.head for table in further_tables(made) for column in table.columns]
    ledger = tables(section(made, "Ratio ledger"))[-1]
    heads += [column.head for column in ledger.columns]
    assert [head for head in heads if head in ("median", "95th percentile", "largest", "least", "worst")] == []
    assert {len(row.cells) for row in ledger.rows} == {len(ledger.columns)}


def test_the_worst_of_a_signed_measure_is_the_one_farther_from_zero() -> None:
    record = make_record(strata=(stratum_of(CT, "CT", 9),))
    moved = [
        item.model_copy(update={"least": -0.5, "largest": 0.2}) if item.measure == "bias_content" else item
        for item in record.figures
    ]
    made = report(record.model_copy(update={"figures": tuple(moved)}))
    row = next(row for row in further_tables(made)[0].rows if row.cells[0] == "Mean error, content")
    assert all(float(cell.replace("\u2212", "-")) == -0.5 for cell in row.cells[2::2])


def test_second_generation_stands_beside_each_candidate_and_on_each_page() -> None:
    record = make_record(cautions=(*CAUTIONS, CAUTIONS_WHEN["already_lossy"]))
    note = "second generation: some sources were already lossy"
    lossy = tuple(item.model_copy(update={"note": note}) for item in record.candidates)
    made = report(record.model_copy(update={"candidates": lossy}))
    assert made.marks == ("SECOND GENERATION: sources were already lossy",)
    names = [row.cells[0] for row in tables(section(made, f"Figures: {CT}"))[0].rows]
    assert all("second generation" in name for name in names)


@pytest.mark.parametrize(("ratio", "drawn"), [(25.0, True), (300.0, False)], ids=["near", "far beyond"])
def test_delivered_copies_far_beyond_the_candidates_are_named_and_not_drawn(ratio: float, drawn: bool) -> None:
    record = make_record(strata=(stratum_of(CT, "CT", 9),))
    name = {"candidate": "delivered copies"}
    copies = record.candidates[0].model_copy(update=name | {"role": "delivered", "ratio_asked": None})
    figures = [item.model_copy(update=name) for item in record.figures if item.candidate == "tiled 20:1"]
    ledger = record.ledger[0].model_copy(update=name | {"ratio_bits_stored_median": ratio})
    more = {
        "candidates": (*record.candidates, copies),
        "figures": (*record.figures, *figures),
        "ledger": (*record.ledger, ledger),
    }
    blocks = section(report(record.model_copy(update=more)), f"Figures: {CT}")
    charts = next(block for block in blocks if isinstance(block, Charts))
    assert ("delivered copies" in {item.name for item in charts.charts[0].series}) == drawn
    assert ("delivered copies lie beyond the charts, at 300 to 1" in charts.caption) == (not drawn)


def test_a_plan_from_the_command_line_is_named_as_such() -> None:
    record = make_record()
    change = {"title": "Candidates given on the command line", "declared_by": "no plan declared", "declared_on": None}
    content = {"change": change, "sample": {"drawn": "chosen"}}
    plan = record.plan.model_copy(update={"source": "command line", "content": content})
    made = report(record.model_copy(update={"plan": plan}), plan_declared="not known")
    text = words(made.front)
    assert "Candidates were given on the command line, without a plan file" in text
    assert "None" not in text
    assert isinstance(made.front[0], Title)
    assert dict(made.front[0].facts)["Plan declared on"] == "not stated"


def test_frames_without_a_value_are_named_with_the_reason() -> None:
    record = make_record(strata=(stratum_of(CT, "CT", 9),))
    reason = {"without_value": 2, "reason": "infinite: nothing changed"}
    some = [
        item.model_copy(update=reason) if item.measure == "psnr_peak_bits_content_db" else item
        for item in record.figures
    ]
    notes = [table.note for table in further_tables(report(record.model_copy(update={"figures": tuple(some)})))]
    says = "Some frames have no value of: PSNR, content, peak of stored bits (infinite: nothing changed)."
    assert sum(says in note for note in notes) == 2
