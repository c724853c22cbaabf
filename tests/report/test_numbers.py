from __future__ import annotations

import pytest

from safecheck.report.numbers import NONE, aligned, bytes_text, count, figure, joined, percent, plural, rounded_time


@pytest.mark.parametrize(
    ("values", "texts"),
    [
        ((3.56, 12.4, None), ("3.6", "12.4", NONE)),
        ((0.52, 1.314), ("0.52", "1.31")),
        ((0.004, -0.31), ("0.0040", "\u22120.3100")),
        ((1234.5, 7.0), ("1,234.5", "7.0")),
        ((0.0, 0.0), ("0", "0")),
        ((), ()),
        ((1e-9, 5000.0), ("< 0.1", "5,000.0")),
        ((-1e-9, 5000.0), ("> \u22120.1", "5,000.0")),
    ],
    ids=["usual", "small", "signed", "thousands", "zeros", "none", "vanishing", "vanishing below"],
)
def test_figures_of_a_column_have_equal_decimals(
    values: tuple[float | None, ...], texts: tuple[str, ...]
) -> None:  # computed from the stated definition
    assert aligned(values) == texts


def test_a_value_that_is_not_zero_never_stands_as_zero() -> None:
    for value in (1e-3, -1e-3, 1e-12):
        assert float(aligned((value, 1e6))[0].strip("<> ").replace("\u2212", "-")) != 0


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, NONE), (0.0, "0"), (5.0, "5"), (12345.0, "12,345"), (3.14159, "3.14"), (-0.0512, "\u22120.0512"),
        (2080.4, "2,080"), (0.5, "0.5"),
    ],
    ids=str,
)  # fmt: skip
def test_a_figure_on_its_own_has_three_digits(value: float | None, text: str) -> None:
    assert figure(value) == text


@pytest.mark.parametrize(
    ("size", "text"),
    [(None, NONE), (0, "0 bytes"), (999, "999 bytes"), (1000, "1 kB"), (75_500_000, "75.5 MB"), (1.2e9, "1.2 GB")],
    ids=str,
)
def test_sizes_stand_in_decimal_units(size: float | None, text: str) -> None:
    assert bytes_text(size) == text


def test_words_for_lists_counts_and_times() -> None:
    assert joined(["a", "b", "c"]) == "a, b and c"
    assert joined(["a"]) == "a"
    assert joined([]) == ""
    assert (plural(1, "study", "studies"), plural(1200, "study", "studies")) == ("1 study", "1,200 studies")
    assert (count(None), count(1234)) == (NONE, "1,234")
    assert percent(46.04) == "46 %"
    assert (rounded_time(3.14), rounded_time(744), rounded_time(7200)) == ("3.1 s", "12 min", "2 h")
