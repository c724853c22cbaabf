import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.measures.noise import choose_noise_places, half_sample_mode, measure_noise
from safecheck.measures.planes import Mask, Plane


def _everywhere(plane: Plane) -> Mask:
    return np.ones(plane.shape, np.bool_)


@pytest.mark.parametrize("sigma", [2.0, 10.0, 45.0], ids=str)
def test_the_sd_of_white_noise_is_found_although_edges_and_slopes_lie_about(sigma: float) -> None:
    rng = np.random.default_rng(5)
    plain = np.add.outer(np.arange(256.0), 0.5 * np.arange(256.0))
    plain[60:130, 70:140] += 900
    plain[:, 200] += 400
    before = plain + rng.normal(0, sigma, plain.shape)
    places = choose_noise_places(before, _everywhere(before), 1.0)
    assert places is not None
    # 800 patches of 61 degrees of freedom: one SD of the estimate is 0.3 %; 2 % allows for the bound at 1.5 modes.
    assert places.noise_sd == pytest.approx(sigma, rel=0.02)
    assert 600 < len(places.rows) < 1024


def test_no_place_lies_across_an_edge() -> None:
    rng = np.random.default_rng(6)
    before = rng.normal(0, 5, (128, 128))
    before[:, 68:] += 60
    places = choose_noise_places(before, _everywhere(before), 1.0)
    assert places is not None
    assert 64 not in places.columns
    assert {56, 72} <= set(places.columns.tolist())


def test_the_same_places_give_the_original_its_own_noise_and_a_smoothed_copy_less() -> None:
    rng = np.random.default_rng(7)
    before = rng.normal(100, 8, (96, 96))
    places = choose_noise_places(before, _everywhere(before), 1.0)
    assert places is not None
    assert measure_noise(places, before) == places.noise_sd
    assert measure_noise(places, 0.5 * before) == pytest.approx(places.noise_sd / 2, rel=1e-12)
    assert measure_noise(places, before + 1000) == pytest.approx(places.noise_sd, rel=1e-12)


def test_residuals_are_those_of_least_squares(ct_pair: tuple[Plane, Plane]) -> None:
    # Reference: numpy.linalg.lstsq on each place.
    before, after = ct_pair
    places = choose_noise_places(before, before > -500, 1.0)
    assert places is not None
    rows, columns = np.mgrid[0:8, 0:8]
    design = np.column_stack([np.ones(64), rows.ravel(), columns.ravel()])
    total = 0.0
    for row, column in zip(places.rows, places.columns, strict=True):
        values = after[row : row + 8, column : column + 8].ravel()
        fitted = design @ np.linalg.lstsq(design, values, rcond=None)[0]
        total += float(np.sum((values - fitted) ** 2)) / 61
    assert measure_noise(places, after) == pytest.approx(np.sqrt(total / len(places.rows)), rel=1e-9)


@pytest.mark.parametrize(
    ("before", "content"),
    [
        pytest.param(np.zeros((64, 64)), np.ones((64, 64), np.bool_), id="constant"),
        pytest.param(np.add.outer(np.arange(64.0), np.arange(64.0)), np.ones((64, 64), np.bool_), id="a slope only"),
        pytest.param(
            np.random.default_rng(1).normal(0, 0.4, (64, 64)), np.ones((64, 64), np.bool_), id="under one step"
        ),
        pytest.param(np.random.default_rng(1).normal(0, 9, (64, 64)), np.zeros((64, 64), np.bool_), id="no content"),
        pytest.param(np.random.default_rng(1).normal(0, 9, (24, 24)), np.ones((24, 24), np.bool_), id="too few places"),
        pytest.param(np.random.default_rng(1).normal(0, 9, (7, 900)), np.ones((7, 900), np.bool_), id="too narrow"),
    ],
)
def test_noise_is_not_evaluated_without_ground(before: Plane, content: Mask) -> None:
    assert choose_noise_places(before, content, 1.0) is None


def test_noise_below_one_stored_step_is_not_evaluated() -> None:
    before = np.random.default_rng(2).normal(0, 3, (96, 96))
    assert choose_noise_places(before, _everywhere(before), 2.5) is not None
    assert choose_noise_places(before, _everywhere(before), 3.5) is None


def test_places_in_another_frame_are_refused() -> None:
    before = np.random.default_rng(2).normal(0, 3, (96, 96))
    places = choose_noise_places(before, _everywhere(before), 1.0)
    assert places is not None
    with pytest.raises(ValueError, match="expected an array of shape"):
        measure_noise(places, before[:-8])


# Computed by hand: of 1 2 2.1 3 7 9 the half of least spread is 2 2.1 3, and of that 2 2.1.
def test_the_mode_by_halving_of_a_small_sample() -> None:
    assert half_sample_mode(np.array([9.0, 1.0, 2.0, 2.1, 3.0, 7.0])) == pytest.approx(2.05)
    assert half_sample_mode(np.array([4.0])) == 4


@given(st.lists(st.integers(-99, 99), min_size=1, max_size=60))
def test_the_mode_by_halving_lies_within_the_sample(values: list[int]) -> None:
    assert min(values) <= half_sample_mode(np.array(values, np.float64)) <= max(values)
