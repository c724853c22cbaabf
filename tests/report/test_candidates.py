"""What was asked of a codec and what was left open, neighbours in the ledger, reversible codecs, carriage."""

from __future__ import annotations

from typing import Any

import pytest

from safecheck.record.candidates import (
    CandidateEntry,
    CarriageEntry,
    NeighbourEntry,
    ReversibleEntry,
    SeriesMissedEntry,
    SpreadEntry,
)
from safecheck.report.blocks import Charts, Table
from tests.report.made_records import CT, make_record
from tests.report.test_content import report, section, tables, words

TITLE = "Candidates: what was asked, and what was left open"


def spread(figure: Any, unit: str, middle: float, frames: int = 312) -> SpreadEntry:
    tails = {"least": middle * 0.5, "p05": middle * 0.75, "p95": middle * 1.25, "largest": middle * 1.5}
    return SpreadEntry(figure=figure, unit=unit, frames=frames, median=middle, **tails)


def asked(changes: dict[str, dict[str, Any]]) -> tuple[CandidateEntry, ...]:
    """The candidates of the made record, some of them changed."""
    return tuple(item.model_copy(update=changes.get(item.candidate, {})) for item in make_record().candidates)


CHANGED = asked(
    {
        "jpeg2000 10:1": {
            "asked": "ratio per series",
            "dial": "ratio",
            "spread": (spread("ratio_bits_stored", "to 1", 10.0), spread("rmse_content", "HU", 4.0)),
        },
        "jpeg2000 20:1": {"asked": "setting", "dial": "ratio", "spread": (spread("rmse_content", "HU", 8.0),)},
        "tiled 10:1": {
            "asked": "ratio per frame",
            "dial": "step",
            "reached": {"bracket": 312},
            "spread": (spread("rmse_content", "OD", 0.5), spread("dial_value", "", 24.0)),
        },
    }
)


def table_of(blocks: Any) -> Table:
    return tables(blocks)[0]


def test_what_was_left_open_stands_by_figure_and_unit_from_least_to_largest() -> None:
    table = table_of(section(report(make_record(candidates=CHANGED)), TITLE))
    assert [column.head for column in table.columns[3:]] == [
        "Least",
        "5th percentile",
        "Median",
        "95th percentile",
        "Largest",
    ]
    assert [row.cells[0] if row.group else row.cells for row in table.rows] == [
        "Achieved ratio, bits stored, to 1",
        ("jpeg2000 10:1", "ratio per series", "312", "5.00", "7.50", "10.00", "12.50", "15.00"),
        "RMSE, content, in HU",
        ("jpeg2000 10:1", "ratio per series", "312", "2.0", "3.0", "4.0", "5.0", "6.0"),
        ("jpeg2000 20:1", "setting", "312", "4.0", "6.0", "8.0", "10.0", "12.0"),
        "RMSE, content, in OD",
        ("tiled 10:1", "ratio per frame", "312", "0.250", "0.375", "0.500", "0.625", "0.750"),
        "Setting found: step of tiled",
        ("tiled 10:1", "ratio per frame", "312", "12", "18", "24", "30", "36"),
    ]


def test_where_each_candidate_ran_on_one_frame_there_is_no_spread() -> None:
    one = asked({"jpeg2000 10:1": {"spread": (spread("rmse_content", "HU", 4.0, frames=1),)}})
    assert TITLE not in [item.title for item in report(make_record(candidates=one)).sections]


def test_the_neighbour_stands_below_its_candidate_in_the_ledger() -> None:
    neighbour = NeighbourEntry(
        frames=280,
        dial_least=3,
        dial_largest=5,
        code_bytes=9_000_000,
        ratio_bits_stored=8.765,
        ratio_bits_stored_least=8.1,
        ratio_bits_stored_median=8.7,
        ratio_bits_stored_largest=9.4,
    )
    bracketed = {"neighbour": neighbour, "dial_least": 4.0, "dial_largest": 6.0}
    ledger = tuple(
        item.model_copy(update=bracketed if (item.candidate, item.stratum) == ("tiled 10:1", CT) else {})
        for item in make_record().ledger
    )
    blocks = section(report(make_record(candidates=CHANGED, ledger=ledger)), "Ratio ledger")
    rows = next(
        table for table in tables(blocks) if table.columns[0].head == "Candidate" and len(table.columns) > 9
    ).rows
    names = [row.cells[0] for row in rows]
    at = names.index("tiled 10:1 *: step 4 to 6")
    assert names[at + 1] == "beside it: step 3 to 5"
    assert rows[at + 1].cells[1:8] == ("280", "9.0", "–", "8.77", "8.10", "–", "8.70")
    assert len(names) == 11
    assert "whose ratio is not below the one asked for" in words(blocks)


@pytest.mark.parametrize(
    ("reached", "said"),
    [({"setting": 312}, False), ({"bracket": 312}, False), ({"codec floor": 5, "bracket": 307}, True)],
    ids=["one setting for a series", "two settings around the ratio", "the floor"],
)
def test_only_a_ratio_that_was_asked_of_the_frame_is_said_to_be_missed(reached: dict[str, int], said: bool) -> None:
    per_series = "ratio per series" if "setting" in reached else "ratio per frame"
    everything = {item.candidate: {"reached": reached, "asked": per_series} for item in make_record().candidates}
    text = words(section(report(make_record(candidates=asked(everything))), "Ratio ledger"))
    assert ("Ratios not reached" in text) is said
    assert "Every frame reached" not in text


def test_a_ratio_per_series_that_the_series_miss_in_all_is_said_to_be_missed() -> None:
    missed = SeriesMissedEntry(series=2, of_series=33, frames=19, ratio_least=7.1, ratio_largest=8.25)
    per_series = {"asked": "ratio per series", "reached": {"setting": 312}, "series_missed": missed}
    notes = {"jpeg2000 10:1: codec floor on the reference frame of the series": 19}
    record = make_record(candidates=asked({"jpeg2000 10:1": per_series}), notes=notes)
    (table,) = [each for each in tables(section(report(record), "Ratio ledger")) if each.columns[-1].head == "of"]
    assert [row.cells for row in table.rows if row.cells[0] == "jpeg2000 10:1"] == [
        (
            "jpeg2000 10:1",
            "total of the series 7.10 to 8.25:1, by more than 1 % other than asked, in 2 of 33 series",
            "19",
            "312",
        ),
        ("jpeg2000 10:1", "codec floor on the reference frame of the series", "19", "312"),
    ]


def test_a_setting_that_is_no_whole_number_has_three_digits_that_count() -> None:
    found = spread("dial_value", "", 0.0004)
    record = make_record(candidates=asked({"jpeg2000 10:1": {"asked": "ratio per frame", "spread": (found,)}}))
    row = table_of(section(report(record), TITLE)).rows[1]
    assert row.cells[3:] == ("0.000200", "0.000300", "0.000400", "0.000500", "0.000600")


def test_every_reversible_codec_stands_beside_the_smallest() -> None:
    entries = tuple(
        ReversibleEntry(
            stratum=CT,
            codec=codec,
            frames=15,
            bits_stored_bytes=6e6,
            code_bytes=size,
            ratio_bits_stored=6e6 / size,
            smallest_bytes=2_000_000,
        )
        for codec, size in (("jpegxl-reversible", 1_900_000), ("rle-reversible", 4_000_000))
    )
    blocks = section(report(make_record(reversible=entries)), "Ratio ledger")
    (table,) = [table for table in tables(blocks) if table.columns[0].head == "Reversible codec"]
    assert [row.cells for row in table.rows] == [
        ("jpegxl-reversible", "15", "1.90", "3.16", "2.00", "0.950"),
        ("rle-reversible", "15", "4.00", "1.50", "2.00", "2.000"),
    ]


def test_samples_carried_otherwise_than_stored_are_named_with_the_versions() -> None:
    entry = CarriageEntry(
        codec="htj2k",
        bits_stored=12,
        signed=True,
        code_precision=16,
        sample_offset=2048,
        sample_scale=1.0,
        clipped_on_reading=True,
        rows=312,
    )
    blocks = section(report(make_record(carriage=(entry,))), "Versions and selftest")
    (table,) = [table for table in tables(blocks) if "Code stream says" in [column.head for column in table.columns]]
    assert table.rows[0].cells == ("htj2k", "12", "signed", "16", "2048", "1", "yes", "312")
    assert "Code stream says" not in words(section(report(), "Versions and selftest"))


def test_a_codec_has_one_curve_however_it_was_asked() -> None:
    named = {item.candidate: item.candidate for item in CHANGED} | {"jpeg2000 20:1": "jpeg2000, ratio 21, layers 2"}
    changed = tuple(item.model_copy(update={"candidate": named[item.candidate]}) for item in CHANGED)
    found = make_record()
    entries: dict[str, Any] = {
        name: tuple(item.model_copy(update={"candidate": named[item.candidate]}) for item in getattr(found, name))
        for name in ("figures", "ledger")
    }
    blocks = section(report(make_record(candidates=changed, **entries)), f"Figures: {CT}")
    charts = next(block for block in blocks if isinstance(block, Charts))
    points = {series.name: len(series.points) for series in charts.charts[0].series}
    assert points == {"jpeg2000": 4, "jpeg2000, layers 2": 1, "tiled": 5}
