"""Content: the pixels that count, told from padding and surrounding air by one versioned rule per modality.

The thresholds are our own choice; the measures document states why.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.measures.planes import Mask, Plane, check_mask, check_plane, spread

__all__ = ["CT_AIR", "LEAST_SHARE", "MR_BACKGROUND", "PADDING_ONLY", "Content", "find_content"]

CT_AIR = "ct-air-1"
MR_BACKGROUND = "mr-background-1"
PADDING_ONLY = "padding-only-1"
LEAST_SHARE = 0.05
"""A rule that leaves less of the frame than this gives way to `PADDING_ONLY`."""

AIR_BELOW_HU = -500.0
"""A pixel below may belong to air; half way between air and water, so that noise in air stays below."""
AIR_MEAN_BELOW_HU = -900.0
"""A connected area counts as surrounding air only if its mean lies below: lung cut by the field of view does not."""

BORDER_SHARE = 32
"""The border of an MR frame is one part in so many of its shorter side wide, and at least `BORDER_LEAST` pixels."""
BORDER_LEAST = 4
LEVEL_OVER_SIGMA = 2.5
RAYLEIGH_QUARTILE = math.sqrt(-2 * math.log(0.75))
"""First quartile of the Rayleigh distribution with sigma 1 (noise of a magnitude image: Gudbjartsson and Patz 1995)."""
LEVEL_UNDER_BRIGHT = 0.25
"""The level must lie below this share of the frame's 99th percentile, else the border is no background."""


@dataclass(frozen=True, slots=True, eq=False)
class Content:
    """Which pixels count, and why."""

    mask: Mask
    """(rows, columns), read-only."""
    rule: str
    """Identity of the rule, with its version."""
    reason: str = ""
    """Why the modality's own rule gave way, or ''."""

    @property
    def pixels(self) -> int:
        """Content pixels."""
        return int(np.count_nonzero(self.mask))


def find_content(
    values: Plane, *, modality: str, unit: str, padding: Mask | None = None, inverted: bool = False
) -> Content:
    """Tell content from the rest of a frame.

    Parameters
    ----------
    values
        (rows, columns), in the frame's unit.
    modality, unit
        As the frame names them.
    padding
        (rows, columns), boolean; None where the frame has none.
    inverted
        MONOCHROME1: values are turned before a rule looks for dark surroundings. HU keep their sense either way.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    values = check_plane(values)
    padded = np.zeros(values.shape, np.bool_) if padding is None else check_mask(padding, values.shape)
    if modality == "CT":
        if unit != "HU":
            return _padding_only(padded, "values are not in HU")
        return _kept_if_enough(_outside_ct(values, padded), padded, CT_AIR)
    if modality == "MR":
        turned = values.max() + values.min() - values if inverted else values
        level, reason = _background_level(turned, padded)
        if level is None:
            return _padding_only(padded, reason)
        return _kept_if_enough(_outside_mr(turned, padded, level), padded, MR_BACKGROUND)
    return _padding_only(padded, "")


def _padding_only(padded: Mask, reason: str) -> Content:
    """The frame less its padding."""
    return _content(~padded, PADDING_ONLY, reason)


def _kept_if_enough(outside: Mask, padded: Mask, rule: str) -> Content:
    """Content by a rule, unless it leaves too little."""
    mask = ~(outside | padded)
    if np.count_nonzero(mask) < LEAST_SHARE * mask.size:
        return _padding_only(padded, f"{rule} leaves under {LEAST_SHARE * 100:g} % of the frame")
    return _content(mask, rule, "")


def _content(mask: Mask, rule: str, reason: str) -> Content:
    """Freeze a mask."""
    mask.flags.writeable = False
    return Content(mask, rule, reason)


def _outside_ct(values: Plane, padded: Mask) -> Mask:
    """Surrounding air: areas below the threshold that touch the border or padding, and are air by their mean."""
    areas, touching = _touching_areas(values < AIR_BELOW_HU, padded)
    counts = np.bincount(areas.ravel(), minlength=len(touching))
    sums = np.bincount(areas.ravel(), weights=values.ravel(), minlength=len(touching))
    air = touching & (sums < AIR_MEAN_BELOW_HU * counts)
    return np.asarray(air[areas], dtype=np.bool_)


def _background_level(values: Plane, padded: Mask) -> tuple[float | None, str]:
    """Level that noise of the background stays below, from the border; or None and why there is none.

    Scanners fill what lies outside the image with one value: what is filled moves the border inwards.
    """
    least = float(values.min())
    if least < 0:
        return None, "values below zero: not a magnitude image"
    filled = _touching(values == least, padded)
    border = _near_rim(filled | padded) & ~(filled | padded)
    if not border.any():
        return None, "nothing but padding and filled surroundings"
    level = LEVEL_OVER_SIGMA * float(np.percentile(values[border], 25)) / RAYLEIGH_QUARTILE
    if level <= LEVEL_UNDER_BRIGHT * float(np.percentile(values[~(filled | padded)], 99)):
        return max(level, least), ""
    return (least, "") if filled.any() else (None, "the border is not background")


def _near_rim(outside: Mask) -> Mask:
    """Pixels within the border's width of the frame's rim or of what lies outside."""
    width = max(BORDER_LEAST, min(outside.shape) // BORDER_SHARE)
    near = spread(outside, width)
    inner = np.zeros(outside.shape, np.bool_)
    inner[width:-width, width:-width] = True
    return near | ~inner


def _outside_mr(values: Plane, padded: Mask, level: float) -> Mask:
    """Background: areas at or below the level, after a mean of 3x3, that touch the border or padding."""
    from scipy.ndimage import uniform_filter

    smooth = uniform_filter(values, 3, mode="nearest")
    return _touching((smooth <= level) | (values == values.min()), padded)


def _touching(low: Mask, padded: Mask) -> Mask:
    """Those 4-connected areas of low values that touch the border or padding."""
    areas, touching = _touching_areas(low, padded)
    return np.asarray(touching[areas], dtype=np.bool_)


def _touching_areas(low: Mask, padded: Mask) -> tuple[npt.NDArray[np.int32], npt.NDArray[np.bool_]]:
    """Number 4-connected areas of low values outside padding (0: none), and which touch the border or padding."""
    from scipy.ndimage import label

    areas, count = label(low & ~padded)
    rim = padded.copy()
    rim[1:] |= padded[:-1]
    rim[:-1] |= padded[1:]
    rim[:, 1:] |= padded[:, :-1]
    rim[:, :-1] |= padded[:, 1:]
    rim[[0, -1], :] = True
    rim[:, [0, -1]] = True
    touching = np.zeros(count + 1, np.bool_)
    touching[areas[rim]] = True
    touching[0] = False
    return areas, touching
