from __future__ import annotations

import numpy as np
import pytest

from safecheck.frames import SizeBasis
from safecheck.study.coded import CODED_SIZES, RATIOS, Coded, code_at, split_error
from safecheck.study.subject import subject_of
from safecheck.study.tiles import SIZES, TRANSFORMS, as_tiles, basis, forward, inverse
from tests.study.frames import markov_frame


def test_sizes_of_codes_are_among_those_studied() -> None:
    assert set(CODED_SIZES) == set(SIZES) - {2}


@pytest.mark.parametrize("transform", TRANSFORMS)
@pytest.mark.parametrize("ratio", RATIOS)
def test_a_code_is_written_at_the_ratio_and_read_back(transform: str, ratio: float) -> None:
    subject = subject_of(markov_frame(256, 0.9), None)
    assert subject is not None
    coded = code_at(subject, transform, 8, ratio)
    assert subject.raster.size_bytes(SizeBasis.BITS_STORED) / coded.code_bytes == pytest.approx(ratio, rel=0.011)
    assert np.array_equal(coded.error, np.rint(coded.error))
    assert coded.error.any()


@pytest.mark.parametrize("transform", TRANSFORMS)
@pytest.mark.parametrize("size", [4, 8, 16])
def test_the_squared_error_is_told_apart_as_it_was_made(transform: str, size: int) -> None:
    # A plain quantiser of this test's own: levels by rounding, read as level times step, without whole samples.
    step, table = 40.0, basis(transform, size)
    side = 8 * size
    plane = np.random.default_rng(size).laplace(scale=60, size=(side, side))
    coefficients = forward(as_tiles(plane, size), table)
    levels = np.rint(coefficients / step)
    error = inverse(levels * step - coefficients, table)
    whole = error.reshape(8, 8, size, size).transpose(0, 2, 1, 3).reshape(side, side)
    split = split_error(coefficients, np.ones(64, np.bool_), Coded(transform, size, 10.0, 1, step, whole))
    squares = (levels * step - coefficients) ** 2
    assert split is not None
    assert split.kept_share == pytest.approx(np.mean(levels != 0))
    assert split.dropped == pytest.approx(squares[levels == 0].sum() / squares.sum())
    assert split.rounding_over_law == pytest.approx(squares[levels != 0].mean() / (step**2 / 12))


@pytest.mark.parametrize("transform", TRANSFORMS)
@pytest.mark.parametrize("size", CODED_SIZES)
def test_at_a_fine_step_rounding_follows_the_law(transform: str, size: int) -> None:
    # Mean squared error of a fine uniform quantiser: step squared over 12 (Gish and Pierce 1968), and 1/12 of a stored
    # value squared for whole samples. The codec's steps are finer here than the spread of nearly all coefficients.
    subject = subject_of(markov_frame(256, 0.0), None)
    assert subject is not None
    coded = code_at(subject, transform, size, 2.0)
    tiles = subject.tiles(size)
    split = split_error(forward(tiles, basis(transform, size)), np.ones(len(tiles), np.bool_), coded)
    assert split is not None
    assert coded.step < 25
    assert split.rounding_over_law == pytest.approx(1 + 1 / coded.step**2, rel=0.02)
    assert split.kept_share > 0.9


def test_without_inner_tiles_nothing_is_told_apart() -> None:
    coded = Coded("cosine", 8, 10.0, 1, 1.0, np.zeros((16, 16)))
    assert split_error(np.empty((0, 64)), np.zeros(4, np.bool_), coded) is None


def test_without_an_error_no_part_has_any() -> None:
    coded = Coded("cosine", 8, 10.0, 1, 1.0, np.zeros((16, 16)))
    split = split_error(np.full((4, 64), 5.0), np.ones(4, np.bool_), coded)
    assert split is not None
    assert (split.kept_share, split.dropped, split.rounding_over_law) == (1.0, None, 0.0)
