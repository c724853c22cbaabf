"""Padding pixels changed, and other pixels that turned into padding; both in stored values."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.measures.planes import Mask, check_mask

__all__ = ["count_became_padding", "count_padding_changed"]


def count_padding_changed(
    before: npt.NDArray[np.integer[Any]], after: npt.NDArray[np.integer[Any]], padding: Mask | None
) -> int:
    """Padding pixels of the original whose stored value changed.

    Parameters
    ----------
    before, after
        (rows, columns), stored values.
    padding
        (rows, columns), boolean; None where the frame has none.
    """
    if padding is None:
        return 0
    return int(np.count_nonzero((before != after) & check_mask(padding, before.shape)))


def count_became_padding(after: npt.NDArray[np.integer[Any]], padding: Mask | None, lowest: int, highest: int) -> int:
    """Pixels that were no padding and whose stored value now lies in the padding range.

    Parameters
    ----------
    after
        (rows, columns), stored values.
    padding
        (rows, columns), boolean: padding of the original; None where the frame has none.
    lowest, highest
        Padding range, both ends included.
    """
    if padding is None:
        return 0
    inside = (after >= lowest) & (after <= highest)
    return int(np.count_nonzero(inside & ~check_mask(padding, after.shape)))
