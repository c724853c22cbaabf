"""Display values: what a window or a look-up table makes of values, as unrounded doubles from 0 to 255.

Formulas: DICOM PS3.3 C.11.2.1.2 and C.11.2.1.3 with an output of 0 to 255. MONOCHROME1 shows low values bright, so its
display values are 255 minus those.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import numpy.typing as npt

from safecheck.measures.planes import Mask, Plane, Vector, check_plane

__all__ = ["TOP_LEVEL", "DefaultWindow", "Ramp", "Rendering", "default_windows", "find_clipped", "render"]

TOP_LEVEL = 255.0
"""Largest display value; the least is 0."""

_STEEPEST = 700.0


@dataclass(frozen=True, slots=True, eq=False)
class Rendering:
    """How values become display values: a window, or a table."""

    function: Literal["LINEAR", "LINEAR_EXACT", "SIGMOID", "TABLE"]
    centre: float = 0.0
    """Of a window, in the unit of the values."""
    width: float = 1.0
    """At least 1 for LINEAR, above 0 for LINEAR_EXACT and SIGMOID."""
    first: int = 0
    """Of a table: value that its first entry stands for."""
    entries: Vector = field(default_factory=lambda: np.empty(0))
    """Of a table: display values 0 to `top`."""
    top: float = TOP_LEVEL
    """Of a table: entry that stands for the brightest level, 2**bits - 1."""
    inverted: bool = False
    """MONOCHROME1."""

    def __post_init__(self) -> None:
        """Check ranges."""
        if self.function == "TABLE":
            if len(self.entries) == 0 or self.top <= 0:
                raise ValueError("a look-up table needs entries and a brightest level above zero")
        elif not (self.width >= 1 if self.function == "LINEAR" else self.width > 0):
            raise ValueError(f"a {self.function} window cannot have the width {self.width}")

    @property
    def ramp(self) -> Ramp | None:
        """The straight piece between two flat ones; None for SIGMOID and TABLE, which have none."""
        if self.function == "LINEAR":
            centre, width = self.centre - 0.5, self.width - 1
        elif self.function == "LINEAR_EXACT":
            centre, width = self.centre, self.width
        else:
            return None
        return Ramp(centre - width / 2, centre + width / 2, centre, width)


@dataclass(frozen=True, slots=True)
class Ramp:
    """display = ((value - centre) / width + 0.5) * 255 between the ends."""

    low: float
    """At or below it the display value is 0."""
    high: float
    """Above it the display value is 255."""
    centre: float
    width: float
    """Zero for a LINEAR window of width 1, which is a step."""


@dataclass(frozen=True, slots=True)
class DefaultWindow:
    """A window for frames whose file has none."""

    label: str
    centre: float
    width: float
    function: Literal["LINEAR", "LINEAR_EXACT"]


def render(values: Plane, rendering: Rendering) -> Plane:
    """Turn values into display values.

    Parameters
    ----------
    values
        (rows, columns), in the unit of the window or table.
    rendering
        Window or table.

    Returns
    -------
    numpy.ndarray
        (rows, columns), float64, 0 to 255, not rounded.
    """
    values = check_plane(values)
    ramp = rendering.ramp
    if ramp is not None:
        levels = _ramp_levels(values, ramp)
    elif rendering.function == "SIGMOID":
        exponent = np.clip(-4 * (values - rendering.centre) / rendering.width, -_STEEPEST, _STEEPEST)
        levels = TOP_LEVEL / (1 + np.exp(exponent))
    else:
        places = np.clip(_table_places(values, rendering), 0, len(rendering.entries) - 1)
        levels = rendering.entries[places] / rendering.top * TOP_LEVEL
    return TOP_LEVEL - levels if rendering.inverted else levels


def find_clipped(values: Plane, rendering: Rendering) -> Mask:
    """Pixels on a flat end, where a change of value may not show.

    Returns
    -------
    numpy.ndarray
        (rows, columns), boolean. A table clips what lies outside its entries; SIGMOID has no flat end.
    """
    values = check_plane(values)
    ramp = rendering.ramp
    if ramp is not None:
        return (values <= ramp.low) | (values > ramp.high)
    if rendering.function == "SIGMOID":
        return np.zeros(values.shape, np.bool_)
    places = _table_places(values, rendering)
    return (places < 0) | (places >= len(rendering.entries))


def default_windows(
    modality: str, unit: str, body_part: str, lowest: float | None, highest: float | None
) -> tuple[DefaultWindow, ...]:
    """Windows for a frame whose file has none.

    CT in HU: common practice, no source. Otherwise the range of the original's content, end to end.

    Parameters
    ----------
    modality, unit, body_part
        As the frame names them; any may be empty.
    lowest, highest
        Range of the original's content, in the unit; None where there is no content.
    """
    if modality == "CT" and unit == "HU":
        if body_part.upper() in ("HEAD", "BRAIN", "SKULL"):
            pairs = (("default brain", 40.0, 80.0), ("default bone", 500.0, 2000.0))
        else:
            pairs = (("default soft tissue", 40.0, 400.0), ("default lung", -600.0, 1500.0))
        return tuple(DefaultWindow(label, centre, width, "LINEAR") for label, centre, width in pairs)
    if lowest is None or highest is None or not highest > lowest or not math.isfinite(highest - lowest):
        return ()
    return (DefaultWindow("default range", (lowest + highest) / 2, highest - lowest, "LINEAR_EXACT"),)


def _ramp_levels(values: Plane, ramp: Ramp) -> Plane:
    """Levels of a ramp, in the order of operations of the standard's pseudo-code."""
    if ramp.width == 0:
        return np.where(values <= ramp.low, 0.0, TOP_LEVEL)
    levels = ((values - ramp.centre) / ramp.width + 0.5) * TOP_LEVEL
    levels[values <= ramp.low] = 0.0
    levels[values > ramp.high] = TOP_LEVEL
    return levels


def _table_places(values: Plane, rendering: Rendering) -> npt.NDArray[np.int64]:
    """Place of each value in a table; values between whole numbers go to the nearest, halves to the even one."""
    return np.rint(values).astype(np.int64) - rendering.first
