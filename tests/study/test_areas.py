from __future__ import annotations

import numpy as np
import pytest

from safecheck.study.areas import Area, tile_areas
from safecheck.study.tiles import SIZES, as_tiles, in_whole_tiles

RNG = np.random.default_rng(8)
SHAPE = (90, 70)


def areas() -> tuple[Area, ...]:
    content = np.ones(SHAPE)
    content[:20] = 0
    content[20:, 60:] = 0
    partly = np.zeros(SHAPE)
    partly[30:50, 17:41] = np.random.default_rng(9).random((20, 24))
    return Area("content", content), Area("region ring", partly)


@pytest.mark.parametrize("size", SIZES)
def test_an_error_by_tiles_is_that_of_the_pixels(size: int) -> None:
    # Computed from the stated definition: root of the weighted mean of squares.
    error = RNG.normal(size=SHAPE)
    tiles = as_tiles(in_whole_tiles(error, size), size)
    found = tile_areas(areas(), size).root_mean_squares((tiles**2).sum(axis=1), lambda chosen: tiles[chosen])
    for area in areas():
        expected = np.sqrt(np.average(error**2, weights=area.weights))
        assert found[area.name] == pytest.approx(expected, rel=1e-12)
        assert area.root_mean_square(error) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("size", SIZES)
def test_inner_tiles_lie_in_the_frame_and_in_the_first_area_with_every_pixel(size: int) -> None:
    first = areas()[0].weights
    inner = tile_areas(areas(), size).inner
    across = -(-SHAPE[1] // size)
    for tile, found in enumerate(inner):
        row, column = tile // across * size, tile % across * size
        part = first[row : row + size, column : column + size]
        assert found == (part.shape == (size, size) and part.all())


def test_pixels_are_asked_for_only_where_a_weight_varies() -> None:
    found = tile_areas((Area("content", np.ones((64, 64))),), 8)
    assert found.uneven.size == 0
    assert found.inner.all()
