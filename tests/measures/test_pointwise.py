import dataclasses
import math
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.measures.planes import Mask, Plane
from safecheck.measures.pointwise import ErrorFigures, measure_errors
from tests.measures.planes import Levels, two_planes


def _by_numpy(before: Plane, after: Plane, mask: Mask) -> ErrorFigures:
    """The same figures written out in NumPy."""
    error = (after - before)[mask]
    if error.size == 0:
        return ErrorFigures(0)
    size = np.abs(error)
    row, column = np.argwhere((np.abs(after - before) == size.max()) & mask)[0]
    return ErrorFigures(
        pixels=error.size,
        bias=float(error.mean()),
        rmse=math.sqrt(float(np.mean(error**2))),
        mean_absolute=float(size.mean()),
        max=float(size.max()),
        row=int(row),
        column=int(column),
        p999=float(np.percentile(size, 99.9)) if size.size >= 1000 else None,
    )


def _close(found: ErrorFigures, expected: ErrorFigures) -> None:
    for name, value in dataclasses.asdict(expected).items():
        got = getattr(found, name)
        assert got is None if value is None else got == pytest.approx(value, rel=1e-9, abs=1e-12), name


# Maximum error and RMSE over the whole frame, in modality units: measured on these files by another program.
KNOWN = {"693": (2080.0, 121.042), "MR2": (120.8, 20.929), "RG3": (9.0, 1.311)}


@pytest.mark.parametrize("real_pair", KNOWN, indirect=True)
def test_errors_of_real_pairs_are_those_known(real_pair: tuple[str, Plane, Plane]) -> None:
    name, before, after = real_pair
    frame, _ = measure_errors(before, after, np.ones(before.shape, np.bool_))
    assert frame.max == pytest.approx(KNOWN[name][0], abs=0.05)
    assert frame.rmse == pytest.approx(KNOWN[name][1], abs=0.0005)


def test_errors_of_the_samples_of_a_colour_pair_are_those_known(colour_pair: tuple[Levels, Levels]) -> None:
    before, after = (samples.reshape(samples.shape[0], -1).astype(np.float64) for samples in colour_pair)
    frame, _ = measure_errors(before, after, np.ones(before.shape, np.bool_))
    assert frame.max == 124
    assert frame.rmse == pytest.approx(3.788, abs=0.0005)


def test_errors_of_real_pairs_are_those_of_numpy(real_pair: tuple[str, Plane, Plane]) -> None:
    _, before, after = real_pair
    content = before > np.median(before)
    frame, inside = measure_errors(before, after, content)
    _close(frame, _by_numpy(before, after, np.ones(before.shape, np.bool_)))
    _close(inside, _by_numpy(before, after, content))


@given(two_planes())
def test_errors_are_those_of_numpy(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, content = planes
    frame, inside = measure_errors(before, after, content)
    _close(frame, _by_numpy(before, after, np.ones(before.shape, np.bool_)))
    _close(inside, _by_numpy(before, after, content))


@pytest.mark.parametrize("pixels", [999, 1000, 1001, 1999, 2001, 262_144], ids=str)
@pytest.mark.parametrize("kind", ["spread", "ties", "flat"])
def test_upper_percentile_is_that_of_numpy_at_every_size(pixels: int, kind: str) -> None:
    rng = np.random.default_rng(pixels)
    kinds = {"spread": rng.normal(size=pixels), "ties": rng.integers(-3, 4, pixels), "flat": np.ones(pixels)}
    error = np.asarray(kinds[kind], np.float64)
    before = np.zeros((1, pixels))
    frame, _ = measure_errors(before, error[np.newaxis], np.ones(before.shape, np.bool_))
    if pixels < 1000:
        assert frame.p999 is None
    else:
        assert frame.p999 == pytest.approx(float(np.percentile(np.abs(error), 99.9)), rel=1e-12)


@given(two_planes(), st.integers(-5000, 5000))
def test_a_constant_added_to_both_changes_nothing(planes: tuple[Plane, Plane, Mask], constant: int) -> None:
    before, after, content = planes
    assert measure_errors(before + constant, after + constant, content) == measure_errors(before, after, content)


@given(two_planes())
def test_nothing_changed_gives_no_error(planes: tuple[Plane, Plane, Mask]) -> None:
    before, _, content = planes
    frame, inside = measure_errors(before, before, content)
    for figures in (frame, inside):
        assert not any((figures.bias, figures.rmse, figures.mean_absolute, figures.max, figures.p999))


@given(two_planes())
def test_exchange_turns_the_bias_and_nothing_else(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, content = planes
    for one, other in zip(measure_errors(before, after, content), measure_errors(after, before, content), strict=True):
        turned = None if other.bias is None else -other.bias
        assert one == dataclasses.replace(other, bias=turned)


@given(two_planes(), st.integers(0, 2**32 - 1))
def test_what_lies_outside_content_does_not_matter_to_it(planes: tuple[Plane, Plane, Mask], seed: int) -> None:
    before, after, content = planes
    noise = np.random.default_rng(seed).integers(-900, 900, before.shape)
    changed = np.where(content, after, noise)
    assert measure_errors(before, changed, content)[1] == measure_errors(before, after, content)[1]


def test_no_content_is_not_evaluated() -> None:
    plane = np.ones((40, 40))
    assert measure_errors(plane, plane + 1, np.zeros(plane.shape, np.bool_))[1] == ErrorFigures(0)


def test_read_only_strided_and_narrow_arrays_are_taken() -> None:
    before: npt.NDArray[Any] = np.zeros((20, 30), np.float32)[::2, ::3]
    after: npt.NDArray[Any] = np.ones((10, 10), np.int16)
    after.flags.writeable = False
    assert measure_errors(before, after, np.ones((10, 10), np.bool_))[0].bias == 1


@pytest.mark.parametrize(
    ("after", "mask"),
    [
        pytest.param(np.zeros((3, 4)), np.ones((3, 3), np.bool_), id="another frame"),
        pytest.param(np.zeros((3, 3)), np.ones((4, 3), np.bool_), id="another mask"),
        pytest.param(np.zeros((3, 3)), np.ones((3, 3), np.uint8), id="no mask"),
    ],
)
def test_arrays_that_do_not_fit_are_refused(after: Plane, mask: Mask) -> None:
    with pytest.raises(ValueError, match="expected a"):
        measure_errors(np.zeros((3, 3)), after, mask)
