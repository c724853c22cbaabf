"""Exact bounds on a share, from counts of independent patients."""

from __future__ import annotations

import math

__all__ = ["patients_needed", "share_upper_bound"]


def share_upper_bound(exceeding: int, patients: int, *, confidence: float = 0.95) -> float:
    """Exact one-sided upper bound on the share of patients with an exceedance.

    Parameters
    ----------
    exceeding
        Patients with an exceedance, 0 to `patients`.
    patients
        Independent patients drawn at random, at least 1.
    confidence
        Above 0 and below 1.

    Returns
    -------
    float
        Share, 0 to 1.

    Raises
    ------
    ValueError
        If a count or the confidence is out of range.

    Notes
    -----
    The bound of Clopper and Pearson (Biometrika 26, 1934, 404-413) by the beta quantile; for no exceedance it is
    1 - (1 - confidence) ** (1 / patients).
    """
    if patients < 1 or not 0 <= exceeding <= patients:
        raise ValueError(f"{exceeding} of {patients} patients is no count of exceedances")
    if not 0 < confidence < 1:
        raise ValueError(f"a confidence lies between 0 and 1, found {confidence}")
    if exceeding == patients:
        return 1.0
    from scipy.special import betaincinv

    return float(betaincinv(exceeding + 1, patients - exceeding, confidence))


def patients_needed(largest_share: float, *, confidence: float = 0.95) -> int:
    """Least number of patients that carries a claim when none of them exceeds.

    Parameters
    ----------
    largest_share
        Largest share of patients with an exceedance that the claim allows, above 0 and below 1.
    confidence
        Above 0 and below 1.

    Notes
    -----
    Wilks (Ann. Math. Statist. 12, 1941, 91-96), first order: the least n with 1 - (1 - share) ** n >= confidence.
    """
    if not (0 < largest_share < 1 and 0 < confidence < 1):
        raise ValueError("a share and a confidence lie between 0 and 1")
    estimate = math.log1p(-confidence) / math.log1p(-largest_share)
    # The quotient may round to just above a whole number that already suffices.
    below = max(1, math.floor(estimate))
    return below if 1 - (1 - largest_share) ** below >= confidence else below + 1
