"""Planes and masks for property tests."""

from typing import TypeAlias

import numpy as np
import numpy.typing as npt
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays

from safecheck.measures.planes import Mask, Plane, Vector

Levels: TypeAlias = npt.NDArray[np.uint8]
"""(rows, columns, 3), RGB."""


@st.composite
def two_planes(draw: st.DrawFn, least: int = 1, most: int = 40) -> tuple[Plane, Plane, Mask]:
    """Whole-number planes before and after, and a mask: as images are, so that sums are exact."""
    shape = draw(array_shapes(min_dims=2, max_dims=2, min_side=least, max_side=most))
    seed = draw(st.integers(0, 2**32 - 1))
    rng = np.random.default_rng(seed)
    before = rng.integers(-1024, 3072, shape).astype(np.float64)
    after = before + rng.integers(-40, 41, shape) * rng.integers(0, 2, shape)
    mask = draw(st.sampled_from(["some", "all", "none"]))
    content = {"some": rng.random(shape) < 0.5, "all": np.ones(shape, np.bool_), "none": np.zeros(shape, np.bool_)}
    return before, after, content[mask]


def vectors() -> st.SearchStrategy[Vector]:
    """Finite values, many of them equal."""
    return arrays(
        np.float64, st.integers(1, 400), elements=st.one_of(st.integers(-3, 3).map(float), st.floats(-1e6, 1e6))
    )
