"""Bounds against the published closed forms and tables, and against SciPy."""

from __future__ import annotations

import pytest
import scipy.stats

from safecheck.statistics.bounds import patients_needed, share_upper_bound


@pytest.mark.parametrize(
    ("exceeding", "patients", "expected"),
    [
        # One-sided 95 % upper bounds, computed from the stated definition (Clopper-Pearson, beta quantile).
        (0, 10, 0.258866),
        (0, 20, 0.139108),
        (0, 30, 0.095034),
        (0, 59, 0.049508),
        (0, 100, 0.029513),
        (0, 300, 0.009936),
        (1, 100, 0.046560),
        (5, 100, 0.102253),
        (10, 100, 0.163718),
        (27, 100, 0.352615),
        (50, 100, 0.586378),
        (80, 100, 0.863339),
        (1, 20, 0.216106),
        (8, 10, 0.963229),
    ],
)
def test_the_one_sided_bound_gives_the_tabled_values(exceeding: int, patients: int, expected: float) -> None:
    assert share_upper_bound(exceeding, patients) == pytest.approx(expected, abs=5e-7)


@pytest.mark.parametrize("exceeding", [0, 1, 3, 7, 12])
@pytest.mark.parametrize("confidence", [0.9, 0.95, 0.99])
def test_the_bound_equals_the_exact_interval_of_scipy(exceeding: int, confidence: float) -> None:
    result = scipy.stats.binomtest(exceeding, 12, alternative="less")
    interval = result.proportion_ci(confidence_level=confidence, method="exact")
    assert share_upper_bound(exceeding, 12, confidence=confidence) == pytest.approx(interval.high, rel=1e-12)


@pytest.mark.parametrize(
    ("share", "confidence", "needed"),
    [
        # First-order Wilks sample sizes, computed from the stated definition; 59 and 299 are the often quoted ones.
        (0.05, 0.95, 59),
        (0.10, 0.95, 29),
        (0.01, 0.95, 299),
        (0.05, 0.99, 90),
        (0.05, 0.90, 45),
        (0.10, 0.90, 22),
        (0.01, 0.99, 459),
    ],
)
def test_the_number_of_patients_needed_is_that_of_wilks(share: float, confidence: float, needed: int) -> None:
    assert patients_needed(share, confidence=confidence) == needed


@pytest.mark.parametrize(("exceeding", "patients"), [(0, 7), (3, 7), (7, 7)])
def test_a_bound_is_never_below_its_point_estimate(exceeding: int, patients: int) -> None:
    assert share_upper_bound(exceeding, patients) >= exceeding / patients


@pytest.mark.parametrize(("exceeding", "patients"), [(1, 0), (-1, 5), (6, 5)])
def test_impossible_counts_are_refused(exceeding: int, patients: int) -> None:
    with pytest.raises(ValueError, match="no count of exceedances"):
        share_upper_bound(exceeding, patients)
