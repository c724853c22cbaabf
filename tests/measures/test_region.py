import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.measures.planes import Mask, Plane
from safecheck.measures.region import (
    ContrastFigures,
    RegionFigures,
    average_map,
    measure_contrast,
    measure_region,
    prepare_region,
)
from tests.measures.planes import two_planes


def _by_numpy(before: Plane, after: Plane, coverage: Plane, inside: Mask) -> RegionFigures:
    """The same figures by numpy.average over the whole frame."""
    error = after - before
    figures: dict[str, float | int | None] = {}
    if coverage.sum() > 0:
        for name, plane in (("before", before), ("after", after)):
            mean = float(np.average(plane, weights=coverage))
            figures[f"mean_{name}"] = mean
            figures[f"sd_{name}"] = float(np.sqrt(np.average((plane - mean) ** 2, weights=coverage)))
        figures["bias"] = float(np.average(error, weights=coverage))
        figures["rmse"] = float(np.sqrt(np.average(error**2, weights=coverage)))
        figures["mean_absolute"] = float(np.average(np.abs(error), weights=coverage))
    if inside.any():
        size = np.abs(error)[inside]
        row, column = np.argwhere((np.abs(error) == size.max()) & inside)[0]
        figures |= {"max": float(size.max()), "max_row": int(row), "max_column": int(column)}
        figures["p999"] = float(np.percentile(size, 99.9)) if size.size >= 1000 else None
    return RegionFigures(**figures)  # type: ignore[arg-type]


def _close(found: RegionFigures, expected: RegionFigures) -> None:
    for name, value in dataclasses.asdict(expected).items():
        got = getattr(found, name)
        assert got is None if value is None else got == pytest.approx(value, rel=1e-9, abs=1e-9), name


def _coverage(shape: tuple[int, ...], seed: int) -> tuple[Plane, Mask]:
    """Fractions, many of them 0 or 1, and centres inside where more than half is covered."""
    coverage = np.clip(np.random.default_rng(seed).uniform(-1, 2, shape), 0, 1)
    return coverage, coverage > 0.5


@given(two_planes(), st.integers(0, 2**32 - 1))
def test_region_figures_are_those_of_numpy(planes: tuple[Plane, Plane, Mask], seed: int) -> None:
    before, after, _ = planes
    coverage, inside = _coverage(before.shape, seed)
    _close(measure_region(prepare_region(before, coverage, inside), after), _by_numpy(before, after, coverage, inside))


def test_region_figures_of_real_pairs_are_those_of_numpy(real_pair: tuple[str, Plane, Plane]) -> None:
    _, before, after = real_pair
    coverage, inside = _coverage(before.shape, 9)
    coverage[:100], inside[:100] = 0, False
    _close(measure_region(prepare_region(before, coverage, inside), after), _by_numpy(before, after, coverage, inside))


@given(two_planes(), st.integers(0, 2**32 - 1))
def test_pixels_without_weight_do_not_matter(planes: tuple[Plane, Plane, Mask], seed: int) -> None:
    before, after, _ = planes
    coverage, inside = _coverage(before.shape, seed)
    noise = np.random.default_rng(seed).normal(0, 900, before.shape)
    other_before, other_after = (np.where(coverage > 0, plane, noise) for plane in (before, after))
    assert measure_region(prepare_region(other_before, coverage, inside), other_after) == measure_region(
        prepare_region(before, coverage, inside), after
    )


@given(two_planes(), st.integers(-3000, 3000), st.integers(0, 2**32 - 1))
def test_a_constant_added_to_both_moves_the_means_only(
    planes: tuple[Plane, Plane, Mask], constant: int, seed: int
) -> None:
    before, after, _ = planes
    coverage, inside = _coverage(before.shape, seed)
    plain = measure_region(prepare_region(before, coverage, inside), after)
    moved = measure_region(prepare_region(before + constant, coverage, inside), after + constant)
    if plain.mean_before is not None and plain.mean_after is not None:
        plain = dataclasses.replace(
            plain, mean_before=plain.mean_before + constant, mean_after=plain.mean_after + constant
        )
    _close(moved, plain)


def test_padding_takes_no_part() -> None:
    before = np.full((6, 6), 10.0)
    before[0] = -2000
    padding = before == -2000
    everything = np.ones(before.shape, np.bool_)
    figures = measure_region(prepare_region(before, np.ones(before.shape), everything, padding), before + 1)
    assert (figures.mean_before, figures.sd_before, figures.bias) == (10, 0, 1)


def test_rounding_of_the_coverage_is_no_piece_of_a_region() -> None:
    coverage = np.full((5, 5), 1e-16)
    coverage[2, 2] = 1
    baseline = prepare_region(np.zeros((5, 5)), coverage, coverage > 0.5)
    assert baseline.places.tolist() == [12]


@pytest.mark.parametrize("coverage", [0.0, 0.3], ids=["none", "edges only"])
def test_a_region_with_no_centre_inside_has_no_largest_error(coverage: float) -> None:
    before = np.zeros((4, 4))
    figures = measure_region(
        prepare_region(before, np.full(before.shape, coverage), np.zeros(before.shape, np.bool_)), before + 2
    )
    assert figures.max is None
    assert figures.rmse == (2 if coverage else None)


@pytest.mark.parametrize("coverage", [-0.1, 1.1, np.nan], ids=str)
def test_a_coverage_out_of_range_is_refused(coverage: float) -> None:
    before = np.zeros((4, 4))
    with pytest.raises(ValueError, match="outside 0 to 1"):
        prepare_region(before, np.full(before.shape, coverage), np.ones(before.shape, np.bool_))


def test_contrast_to_noise_rises_when_noise_is_removed_and_says_so() -> None:
    # Computed by hand: |50 - 40| / 20 before, |50 - 40| / 5 after; three quarters of the noise are gone.
    target = RegionFigures(mean_before=50, mean_after=50)
    background = RegionFigures(mean_before=40, mean_after=40, sd_before=20, sd_after=5)
    assert measure_contrast(target, background) == ContrastFigures(0.5, 2.0, 75.0)


@pytest.mark.parametrize(
    "background",
    [
        pytest.param(RegionFigures(), id="nothing covered"),
        pytest.param(RegionFigures(mean_before=40, mean_after=40, sd_before=0, sd_after=0), id="no spread"),
    ],
)
def test_contrast_without_a_background_is_not_evaluated(background: RegionFigures) -> None:
    assert measure_contrast(RegionFigures(mean_before=1, mean_after=1), background) == ContrastFigures()


def test_the_map_of_a_region_is_averaged_where_it_is_defined() -> None:
    before = np.zeros((3, 3))
    inside = np.zeros(before.shape, np.bool_)
    inside[1] = True
    picture = np.array([[9, 9, 9], [0.5, 0.7, np.nan], [9, 9, 9]])
    baseline = prepare_region(before, inside.astype(np.float64), inside)
    assert average_map(baseline, picture) == pytest.approx(0.6)
    assert average_map(baseline, np.full((3, 3), np.nan)) is None
