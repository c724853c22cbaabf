"""Exit codes: of several, the first of 2, 8, 5, 4, 6, 3, 10, 7 wins."""

from __future__ import annotations

import itertools

import pytest

from safecheck.policy.conditions import CONDITION_TEXTS, ExitCondition, in_order, winning

ORDER = (2, 8, 5, 4, 6, 3, 10, 7)


@pytest.mark.parametrize("pair", list(itertools.combinations(ORDER, 2)), ids=str)
def test_of_two_conditions_the_earlier_of_the_order_wins(pair: tuple[int, int]) -> None:
    assert winning([ExitCondition(pair[1]), ExitCondition(pair[0])]) == pair[0]


def test_no_condition_ends_with_zero() -> None:
    assert winning([]) == 0


def test_all_conditions_stand_in_order_and_once() -> None:
    assert in_order([*ExitCondition, *ExitCondition]) == ORDER


def test_every_condition_has_its_words_and_none_has_code_one() -> None:
    assert set(CONDITION_TEXTS) == set(ExitCondition)
    assert 1 not in set(ExitCondition)
