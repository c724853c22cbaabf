"""What the section Equal damage says, and what it must not say."""

from __future__ import annotations

from typing import Any

import pytest

from safecheck.record.equal_damage import Between, EqualDamageEntry
from safecheck.wording import lint
from tests.report.made_records import CT, make_record
from tests.report.test_content import report, section, tables, words

TITLE = "Equal damage"

ENTRY = EqualDamageEntry(
    reference="jpeg2000 10:1",
    codec="tiled",
    stratum=CT,
    measure="rmse_content",
    unit="HU",
    worse="higher",
    candidates=5,
    frames=40,
    frames_above=2,
    reference_value=4.213,
    reference_ratio=10.08,
    reference_bits_per_pixel=1.19,
    ratio_median=Between(least=12.31, most=12.31),
    ratio_p05=Between(least=11.8, most=11.8),
    ratio_p95=Between(least=13.04, most=13.04),
    bits_per_pixel_median=Between(least=0.975, most=0.975),
)


def sentence(**changes: Any) -> str:
    """The first cell of the row of an entry."""
    made = report(make_record(equal_damage=(ENTRY.model_copy(update=changes),)))
    (table,) = tables(section(made, TITLE))
    return table.rows[1].cells[0]


def test_a_row_is_one_sentence_with_its_spread_and_the_frames_beyond() -> None:
    assert sentence() == (
        "jpeg2000 10:1 (median 4.21 HU at 10.1:1) is reached by tiled at a median of 12.3:1 (5th to 95th percentile "
        "11.8:1 to 13.0:1; 2 frames beyond what was run)"
    )


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"ratio_median": Between(least=20.04)}, "at a median beyond what was run, above 20.0:1 (5th"),
        ({"ratio_median": Between(most=5.03)}, "at a median beyond what was run, below 5.03:1 (5th"),
        ({"ratio_median": Between()}, "at no known median: most frames lie beyond what was run, on both sides"),
        ({"ratio_median": Between(least=8.0, most=9.5)}, "at a median between 8.00 and 9.50:1"),
        ({"codec": "tiled, size 16"}, "is reached by tiled (size 16) at a median of 12.3:1"),
        ({"ratio_p05": Between(most=5.03)}, "5th to 95th percentile below 5.03:1 to 13.0:1"),
        (
            {"frames_above": 40, "ratio_median": Between(least=20.04)},
            "is reached by tiled beyond what was run on every frame, at a median above 20.0:1",
        ),
        (
            {"frames_above": 30, "frames_below": 10, "ratio_median": Between(least=20.04)},
            "is reached by tiled beyond what was run on every frame, below on some and above on others",
        ),
        ({"frames": 1, "frames_above": 0}, "jpeg2000 10:1 (4.21 HU at 10.1:1) is reached by tiled at 12.3:1"),
        (
            {"frames": 1, "frames_above": 1, "ratio_median": Between(least=20.5)},
            "is reached by tiled beyond what was run, above 20.5:1",
        ),
        (
            {"frames": 0, "frames_unchanged": 3, "frames_without": 1},
            "tiled: no frame to compare; not counted: on 3 frames the reference changed nothing and 1 frame without a "
            "value of both",
        ),
    ],
    ids=[
        "above",
        "below",
        "both sides",
        "between",
        "settings",
        "a percentile",
        "every frame above",
        "every frame beyond",
        "one frame",
        "one beyond",
        "no frame",
    ],
)
def test_what_lies_beyond_the_run_is_said_in_words(changes: dict[str, Any], words: str) -> None:
    assert words in sentence(**changes)


def test_measures_group_the_rows_and_name_place_and_limits() -> None:
    (first, *_) = tables(section(report(), TITLE))
    groups = [row.cells[0] for row in first.rows if row.group]
    assert groups == [
        "RMSE, content",
        "Largest error, region left basal ganglia (target); in the declared limit largest error in the target",
    ]


def test_the_section_follows_the_ledger_and_warns_that_figures_are_equal_alone() -> None:
    made = report()
    titles = [item.title for item in made.sections]
    assert titles[titles.index("Ratio ledger") + 1] == TITLE
    text = words(section(made, TITLE))
    assert "Equal by the figure named only" in text
    assert "Nothing is extrapolated" in text
    assert list(lint(text)) == []
    assert not [word for word in ("better", "best", "superior", "wins", "recommended") if word in text]


def test_a_declared_reference_that_took_no_frame_is_said_in_a_sentence() -> None:
    record = make_record(equal_damage=())
    idle = tuple(
        item.model_copy(update={"frames": 0} if item.candidate == "jpeg2000 10:1" else {}) for item in record.candidates
    )
    content = record.plan.model_copy(update={"content": {**record.plan.content, "reference": "jpeg2000 10:1"}})
    text = words(section(report(record.model_copy(update={"candidates": idle, "plan": content})), TITLE))
    assert "jpeg2000 10:1, the reference candidate that the plan names: it took no frame." in text


def test_without_a_second_codec_there_is_no_section() -> None:
    assert TITLE not in [item.title for item in report(make_record(equal_damage=())).sections]
