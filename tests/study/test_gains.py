"""Coding gains against published figures.

Table: gains in dB of a first-order Markov process by arithmetic over geometric mean of the variances; those of the
cosine transform at 0.95 to two decimals are in Jayant and Noll (1984) and Malvar (1992), the others were computed from
the definition apart from this program.
"""

from __future__ import annotations

import numpy as np
import pytest

from safecheck.study.gains import (
    LEAST_TILES,
    complex_variances,
    gain_db,
    markov_gain_db,
    neighbour_correlation,
    variances,
)
from safecheck.study.tiles import SIZES, TRANSFORMS, basis, forward
from tests.study.frames import markov_field

TABLE = {
    "cosine": (5.0550, 7.5701, 8.8259, 9.4555, 9.7736, 9.9366),
    "walsh-hadamard": (5.0550, 7.1744, 7.9461, 8.1941, 8.2693, 8.2959),
    "fourier": (5.0550, 6.8968, 7.7040, 8.1424, 8.5894, 9.1072),
    "fourier, complex": (5.0550, 6.8968, 7.5873, 7.9991, 8.4802, 9.0527),
}
AT_EIGHT = {
    ("cosine", 0.90): 6.2761,
    ("cosine", 0.91): 6.6590,
    ("cosine", 0.98): 12.2612,
    ("walsh-hadamard", 0.90): 5.5018,
    ("walsh-hadamard", 0.91): 5.8640,
    ("walsh-hadamard", 0.98): 11.3160,
}


@pytest.mark.parametrize("transform", TABLE)
def test_gains_at_a_correlation_of_095_are_the_published_ones(transform: str) -> None:
    found = [markov_gain_db(transform, size, 0.95) for size in SIZES]
    assert found == pytest.approx(TABLE[transform], abs=5.1e-5)


@pytest.mark.parametrize(("transform", "correlation"), AT_EIGHT, ids=str)
def test_gains_at_other_correlations_are_the_published_ones(transform: str, correlation: float) -> None:
    expected = AT_EIGHT[transform, correlation]
    assert markov_gain_db(transform, 8, correlation) == pytest.approx(expected, abs=5.1e-5)


def test_variances_of_the_cosine_transform_are_the_published_ones() -> None:
    # For 8 coefficients at 0.95 (Jayant and Noll 1984; six decimals computed from the definition).
    apart = np.abs(np.subtract.outer(np.arange(8), np.arange(8)))
    table = basis("cosine", 8)
    found = np.diag(table @ 0.95**apart @ table.T)
    expected = (7.024941, 0.574906, 0.173328, 0.081962, 0.051193, 0.036990, 0.030031, 0.026649)
    np.testing.assert_allclose(found, expected, atol=5.1e-7)


@pytest.mark.parametrize("correlation", [0.0, 1e-9])
@pytest.mark.parametrize("transform", TABLE)
def test_without_correlation_no_transform_gains(transform: str, correlation: float) -> None:
    assert markov_gain_db(transform, 8, correlation) == pytest.approx(0, abs=1e-6)


@pytest.mark.parametrize("correlation", [1.0, -1.0])
def test_a_correlation_of_one_has_no_gain(correlation: float) -> None:
    assert markov_gain_db("cosine", 8, correlation) is None


@pytest.mark.parametrize("transform", TRANSFORMS)
@pytest.mark.parametrize("size", [2, 4, 8, 16])
def test_tiles_of_a_markov_field_have_its_gain_within_sampling_error(transform: str, size: int) -> None:
    # Independent tiles of separable covariance; the gain of both directions is the sum. Over n tiles a variance has a
    # relative standard deviation of sqrt(2 / n), and the arithmetic mean rests on few of them: 4.34 sqrt(2 / n) dB at
    # most, of which three are allowed.
    tiles = 6000
    apart = np.abs(np.subtract.outer(np.arange(size), np.arange(size)))
    root = np.linalg.cholesky(0.95**apart)
    noise = np.random.default_rng(size).normal(size=(tiles, size, size))
    pixels = (root @ noise @ root.T).reshape(tiles, -1)
    spread = variances(forward(pixels, basis(transform, size)))
    assert spread is not None
    expected = 2 * TABLE[transform][SIZES.index(size)]
    assert gain_db(spread) == pytest.approx(expected, abs=3 * 4.34 * np.sqrt(2 / tiles))
    if transform == "fourier":
        spread = complex_variances(pixels, size)
        assert spread is not None
        expected = 2 * TABLE["fourier, complex"][SIZES.index(size)]
        assert gain_db(spread) == pytest.approx(expected, abs=3 * 4.34 * np.sqrt(2 / tiles))


def test_too_few_tiles_have_no_variances() -> None:
    tiles = np.random.default_rng(1).normal(size=(LEAST_TILES, 4))
    assert variances(tiles) is not None
    assert variances(tiles[1:]) is None
    assert complex_variances(tiles[1:], 2) is None


def test_a_coefficient_that_does_not_vary_leaves_no_gain() -> None:
    assert gain_db(np.array([1.0, 0.0])) is None
    assert gain_db(np.array([])) is None
    assert gain_db(np.array([2.0, 2.0])) == pytest.approx(0)


@pytest.mark.parametrize("axis", [0, 1])
def test_the_correlation_of_neighbours_is_that_of_numpy(axis: int) -> None:
    values = markov_field((60, 50), 0.9, 4)
    mask = np.random.default_rng(1).random(values.shape) < 0.7
    pairs = [
        (values[r, c], values[r + (axis == 0), c + (axis == 1)])
        for r in range(60 - (axis == 0))
        for c in range(50 - (axis == 1))
        if mask[r, c] and mask[r + (axis == 0), c + (axis == 1)]
    ]
    first, second = zip(*pairs, strict=True)
    assert neighbour_correlation(values, mask, axis) == pytest.approx(np.corrcoef(first, second)[0, 1], rel=1e-10)


def test_where_nothing_varies_there_is_no_correlation() -> None:
    assert neighbour_correlation(np.ones((4, 4)), np.ones((4, 4), np.bool_), 0) is None
    assert neighbour_correlation(np.ones((4, 4)), np.zeros((4, 4), np.bool_), 1) is None
