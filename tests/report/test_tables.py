from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.report.blocks import Column, Row, Table
from safecheck.report.tables import column_widths, least_room, table_flowable
from safecheck.report.theme import MEDIUM, REGULAR, TEXT_WIDTH, fit_text, markup, printable, text_width


@settings(max_examples=40, deadline=None)
@given(st.lists(st.tuples(st.text(max_size=60), st.integers(0, 10**9)), min_size=1, max_size=6), st.integers(1, 5))
def test_widths_fill_the_line_and_are_never_negative(rows: list[tuple[str, int]], numbers: int) -> None:
    columns = (Column("Group"), *(Column(f"Number {n}", "HU", number=True) for n in range(numbers)))
    table = Table(columns, tuple(Row((text, *[f"{value:,}"] * numbers)) for text, value in rows))
    widths = column_widths(table)
    assert sum(widths) == pytest.approx(TEXT_WIDTH)
    assert min(widths) > 0


def test_figures_get_the_width_that_they_need_however_long_the_words() -> None:
    number = "1,338,687,338,501.292"
    columns = (Column("Group"), *(Column("Largest", "HU", number=True) for _ in range(3)))
    table = Table(columns, (Row(("a very long name of a group of like images " * 9, *[number] * 3)),))
    assert min(column_widths(table)[1:]) >= text_width(number, REGULAR, 7.6) + 6


def test_a_long_column_gives_way_before_short_ones_wrap() -> None:
    columns = (Column("Candidate"), Column("Outcome"), Column("Place"))
    outcome = "outside declared limits"
    table = Table(columns, (Row(("jpeg2000 20:1", outcome, "patient, study, series and image " * 9)),))
    widths = column_widths(table)
    assert widths[1] >= text_width(outcome, MEDIUM, 7.6) + 6
    assert widths[2] == max(widths)


def long_table(rows: int) -> Table:
    columns = (Column("Candidate"), Column("RMSE", "HU", number=True))
    body = tuple(Row((f"group {n}",), group=True) if n % 7 == 0 else Row((f"row {n}", f"{n}")) for n in range(rows))
    return Table(columns, body, caption="Errors", note="A note.")


@pytest.mark.parametrize("height", range(90, 640, 23))
def test_a_table_that_parts_leaves_three_rows_on_each_page_under_its_caption_and_head(height: int) -> None:
    table = table_flowable(long_table(40))
    table.wrap(TEXT_WIDTH, height)
    parts = table.split(TEXT_WIDTH, height)
    for part in parts:
        assert len(part._cellvalues) - part.repeatRows >= 3
        assert part._cellvalues[0][0][0].getPlainText() == "Errors"
    assert sum(len(part._cellvalues) - part.repeatRows for part in parts) in (0, 41)


def test_the_least_room_of_a_table_is_enough_for_its_first_rows() -> None:
    table = table_flowable(long_table(40))
    room = least_room(table)
    assert table.split(TEXT_WIDTH, room + 0.1)
    assert not table.split(TEXT_WIDTH, room - 1)


def test_a_cut_text_fits_and_ends_in_an_ellipsis() -> None:
    text = fit_text("Recompress archive copies of head CT " * 9, MEDIUM, 8, 100)
    assert text.endswith("…")
    assert text_width(text, MEDIUM, 8) <= 100
    assert fit_text("short", MEDIUM, 8, 100) == "short"


def test_the_fonts_have_every_sign_that_the_record_uses() -> None:
    signs = "≤≥×–—²µμΔσ·÷√Σ−±…“”’•₁₀|%éüñçøåßÄłžěőşığΩ"
    assert printable(signs) == signs


def test_digits_have_one_width_so_that_figures_align() -> None:
    assert len({round(text_width(digit, font, 8), 6) for digit in "0123456789" for font in (REGULAR,)}) == 1
    assert len({round(text_width(digit, MEDIUM, 8), 6) for digit in "0123456789"}) == 1


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("a <b> & c", "a &lt;b&gt; &amp; c"),
        ("two\nlines\tand  more", "two lines and more"),
        ("頭", "\ufffd"),
        ("bell\x07", "bell\ufffd"),
    ],
    ids=["markup", "white space", "missing glyph", "control character"],
)
def test_text_is_never_read_as_markup(text: str, shown: str) -> None:
    assert markup(text) == shown
