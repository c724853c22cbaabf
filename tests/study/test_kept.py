from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.codecs.tile.transform import scan_order
from safecheck.study.kept import SHARES_PERCENT, keep, kept_count
from safecheck.study.tiles import SIZES, TRANSFORMS, Reals, as_tiles, basis, forward

EVERY = np.arange(12)


def tiles_of(size: int, seed: int = 3, tiles: int = 12) -> Reals:
    return np.rint(np.random.default_rng(seed).normal(500, 200, (tiles, size * size)))


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_dropped_energy_equals_the_squared_error_of_the_pixels(transform: str, size: int) -> None:
    # Parseval's theorem.
    table = basis(transform, size)
    counts = [count for share in SHARES_PERCENT if (count := kept_count(size, share))]
    for kept in keep(forward(tiles_of(size), table), table, counts):
        np.testing.assert_allclose((kept.errors(EVERY) ** 2).sum(axis=1), kept.dropped_energies, rtol=1e-10, atol=1e-6)


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_with_all_coefficients_kept_nothing_is_lost(transform: str, size: int) -> None:
    table = basis(transform, size)
    (kept,) = keep(forward(tiles_of(size), table), table, [size * size])
    assert not kept.dropped_energies.any()
    assert not kept.errors(EVERY).any()


@pytest.mark.parametrize("transform", TRANSFORMS)
def test_no_other_choice_of_as_many_coefficients_with_the_constant_loses_less(transform: str) -> None:
    # Of orthonormal coefficients the largest carry most: sorted here by another route.
    size, count = 8, 16
    table = basis(transform, size)
    coefficients = forward(tiles_of(size), table)
    (kept,) = keep(coefficients, table, [count])
    others = np.sort(coefficients[:, 1:] ** 2, axis=1)
    np.testing.assert_allclose(kept.dropped_energies, others[:, : size * size - count].sum(axis=1), rtol=1e-12)


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_every_transform_keeps_equally_many_real_numbers(transform: str, size: int) -> None:
    table = basis(transform, size)
    coefficients = forward(np.random.default_rng(1).normal(size=(5, size * size)), table)
    for share in SHARES_PERCENT:
        if count := kept_count(size, share):
            (kept,) = keep(coefficients, table, [count])
            assert ((kept.keys >= kept.least[:, None]).sum(axis=1) == count).all()


def test_of_equal_magnitudes_those_of_lower_frequency_are_kept() -> None:
    # A single bright pixel has equally large Walsh-Hadamard coefficients throughout.
    tile = np.zeros((1, 16))
    tile[0, 5] = 100
    table = basis("walsh-hadamard", 4)
    coefficients = forward(tile, table)
    np.testing.assert_allclose(np.abs(coefficients), 25.0, rtol=1e-12)
    (kept,) = keep(coefficients, table, [6])
    assert sorted(np.flatnonzero(kept.keys[0] >= kept.least[0])) == sorted(scan_order(4)[:6])


@pytest.mark.parametrize("transform", TRANSFORMS)
def test_one_of_four_coefficients_kept_leaves_the_mean_of_each_tile(transform: str) -> None:
    # Facts of the trade: common practice, no source. The mean is always kept, whatever the sign of the samples.
    samples = np.random.default_rng(2).integers(-900, 100, (8, 8)).astype(np.float64)
    tiles, table = as_tiles(samples, 2), basis(transform, 2)
    (kept,) = keep(forward(tiles, table), table, [kept_count(2, 25)])
    np.testing.assert_allclose(tiles + kept.errors(np.arange(16)), np.repeat(tiles.mean(axis=1), 4).reshape(-1, 4))


@pytest.mark.parametrize(
    ("size", "share", "count"),
    [(2, 50, 2), (2, 25, 1), (2, 10, 0), (2, 5, 0), (4, 10, 1), (4, 5, 0), (8, 10, 6), (8, 5, 3), (64, 5, 204)],
)
def test_a_share_is_rounded_down_and_below_one_coefficient_does_not_exist(size: int, share: float, count: int) -> None:
    # Computed from the stated definition.
    assert kept_count(size, share) == count


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 2**32 - 1), st.sampled_from(TRANSFORMS), st.sampled_from([2, 4, 8]), st.floats(-1e5, 1e5))
def test_a_constant_added_to_all_pixels_changes_nothing(seed: int, transform: str, size: int, offset: float) -> None:
    table, tiles = basis(transform, size), tiles_of(size, seed)
    count = max(1, size * size // 4)
    (one,) = keep(forward(tiles, table), table, [count])
    (other,) = keep(forward(tiles + offset, table), table, [count])
    np.testing.assert_allclose(one.dropped_energies, other.dropped_energies, rtol=1e-6, atol=1e-3)


@settings(deadline=None, max_examples=40)
@given(st.integers(0, 2**32 - 1), st.sampled_from(TRANSFORMS), st.sampled_from([2, 4, 8, 16]))
def test_the_more_is_kept_the_less_is_lost(seed: int, transform: str, size: int) -> None:
    table = basis(transform, size)
    counts = list(range(1, size * size + 1, max(1, size * size // 8)))
    losses = [kept.dropped_energies for kept in keep(forward(tiles_of(size, seed), table), table, counts)]
    for more, less in zip(losses[1:], losses, strict=False):
        assert (more <= less).all()
