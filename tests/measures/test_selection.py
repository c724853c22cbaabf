import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.measures.planes import Vector
from safecheck.measures.selection import percentile
from tests.measures.planes import vectors


@given(vectors(), st.sampled_from([0.0, 5.0, 25.0, 50.0, 95.0, 99.9, 100.0]))
def test_percentile_is_that_of_numpy(values: Vector, percent: float) -> None:
    # Reference: numpy.percentile, method "linear".
    assert percentile(values, percent) == pytest.approx(float(np.percentile(values, percent)), rel=1e-12, abs=1e-12)


@pytest.mark.parametrize(
    "values",
    [
        pytest.param(np.random.default_rng(1).normal(size=200_000), id="spread"),
        pytest.param(np.random.default_rng(2).integers(0, 5, 200_000).astype(float), id="few values"),
        pytest.param(np.append(np.random.default_rng(3).random(200_000), 1e12), id="one far away"),
        pytest.param(np.full(5000, 7.5), id="one value"),
        pytest.param(np.repeat([0.0, 1.0], [4999, 5001]), id="two values"),
        pytest.param(np.random.default_rng(4).random(5000) * 1e-320, id="almost nothing"),
    ],
)
@pytest.mark.parametrize("percent", [0, 5, 49.99, 50, 95, 99.9, 100])
def test_percentile_of_many_values_is_that_of_numpy(values: Vector, percent: float) -> None:
    assert percentile(values, percent) == pytest.approx(float(np.percentile(values, percent)), rel=1e-12, abs=0)


def test_percentile_of_nothing_is_none() -> None:
    assert percentile(np.empty(0), 50) is None


def test_percentile_out_of_range_is_refused() -> None:
    with pytest.raises(ValueError, match="expected 0 to 100"):
        percentile(np.ones(3), 101)
