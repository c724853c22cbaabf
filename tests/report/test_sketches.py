from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from safecheck.report.blocks import Pictures, PlaceCard
from safecheck.report.sketches import cards_flowables
from safecheck.report.theme import BOTTOM, PAGE_HEIGHT, TEXT_WIDTH, TOP


def card(**changes: Any) -> PlaceCard:
    made = PlaceCard(
        head="CT, HEAD: jpeg2000 10:1, place 1", value="7.49", unit="rescaled, unit unspecified",
        measure="RMSE, worst patch 8×8", lines=(("Patient", "P-1"),) * 5, rows=512, columns=512, row=8, column=16,
        size_rows=8, size_columns=8,
    )  # fmt: skip
    return replace(made, **changes)


def pictures() -> Pictures:
    grey = np.full((64, 64), 128, np.uint8)
    return Pictures(grey, grey, grey, 12.5, "HU", "brain (centre 40, width 80 HU)", (24, 24, 8, 8))


def heights(cards: tuple[PlaceCard, ...]) -> list[float]:
    return [item.wrap(TEXT_WIDTH, PAGE_HEIGHT)[1] for item in cards_flowables(cards)]


def test_cards_with_and_without_pictures_have_one_size_and_five_fit_a_page() -> None:
    found = heights((card(pictures=pictures()), card(without_pictures="No picture: the frame may carry text.")))
    assert len(set(found)) == 1
    assert 5 * found[0] <= PAGE_HEIGHT - TOP - BOTTOM


def test_a_card_never_parts_over_pages() -> None:
    (made,) = cards_flowables((card(pictures=pictures()),))
    made.wrap(TEXT_WIDTH, 60)
    assert made.split(TEXT_WIDTH, 60) == []


@pytest.mark.parametrize("number", [1, 2, 3])
def test_cards_without_any_picture_stand_two_by_two(number: int) -> None:
    assert len(cards_flowables((card(),) * number)) == (number + 1) // 2
