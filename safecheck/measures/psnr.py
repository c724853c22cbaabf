"""Peak signal-to-noise ratio on a stated peak."""

from __future__ import annotations

import math

__all__ = ["measure_psnr_db"]


def measure_psnr_db(rmse: float | None, peak: float | None) -> float | None:
    """PSNR = 20 log10(peak / RMSE), in dB.

    Parameters
    ----------
    rmse
        Root mean square error; None where it was not evaluated.
    peak
        In the same unit. It has no default, since it decides the figure.

    Returns
    -------
    float or None
        None where a term is missing, where nothing changed (then it is infinite) or where the peak is not positive.
    """
    if not rmse or peak is None or peak <= 0:
        return None
    return 20 * math.log10(peak / rmse)
