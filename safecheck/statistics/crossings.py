"""Where each frame's curve of damage against ratio first reaches a given damage, and percentiles of what was found."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Crossings", "first_crossings", "percentile_between"]

Reals = npt.NDArray[np.float64]
Wholes = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class Crossings:
    """A ratio for each frame, or the bound beyond which it lies."""

    frames: Wholes
    """(m,) numbers of frames, ascending: those with at least one point."""
    least: Reals
    """(m,) it is not below this; minus infinity where it lies below what was run."""
    most: Reals
    """(m,) it is not above this; infinity where it lies above what was run, and `least` is the largest ratio run."""

    @property
    def below(self) -> int:
        """Frames on which it lies below what was run."""
        return int(np.isneginf(self.least).sum())

    @property
    def above(self) -> int:
        """Frames on which it lies above what was run."""
        return int(np.isposinf(self.most).sum())


def first_crossings(frames: Wholes, ratios: Reals, damages: Reals, wanted_frames: Wholes, wanted: Reals) -> Crossings:
    """Find for each frame the smallest ratio at which its curve does as much damage as is wanted.

    The curve of a frame joins its points in the order of their ratios by straight lines in the logarithms of ratio and
    damage; where a damage is not above 0, in the logarithm of the ratio and the damage itself. It ends with its points:
    nothing is extrapolated. Where it is not monotone the first crossing counts, so a larger damage never has a smaller
    ratio.

    Parameters
    ----------
    frames, ratios, damages
        (n,) each: points, in any order; ratios above 0. Those with a damage of NaN and those of other frames are left
        out.
    wanted_frames
        (m,) numbers of frames, ascending, each once.
    wanted
        (m,) damage to be reached on each, above 0.
    """
    position, ratio, damage = _points(frames, ratios, damages, wanted_frames)
    number = len(position)
    if not number:
        return Crossings(np.empty(0, np.int64), np.empty(0), np.empty(0))
    start = np.flatnonzero(np.r_[True, position[1:] != position[:-1]])
    end = np.r_[start[1:], number] - 1
    reaching = np.where(damage >= wanted[position], np.arange(number), number)
    first = np.minimum.reduceat(reaching, start)
    aim = wanted[position[start]]
    at = np.minimum(first, end)
    between = _between(ratio, damage, np.maximum(at - 1, start), at, aim)
    above = first == number
    below = (first == start) & (damage[start] > aim)
    least = np.where(above, ratio[end], np.where(below, -np.inf, between))
    most = np.where(above, np.inf, np.where(below, ratio[start], between))
    return Crossings(wanted_frames[position[start]], least, most)


def _points(frames: Wholes, ratios: Reals, damages: Reals, wanted_frames: Wholes) -> tuple[Wholes, Reals, Reals]:
    """Points of the wanted frames, by the frame's position among them and by ratio; of equal ratios the least first."""
    position = np.searchsorted(wanted_frames, frames)
    known = ~np.isnan(damages) & (position < len(wanted_frames))
    known[known] = wanted_frames[position[known]] == frames[known]
    position, ratio, damage = position[known], ratios[known], damages[known]
    order = np.lexsort((damage, ratio, position))
    return position[order], ratio[order], damage[order]


def _between(ratio: Reals, damage: Reals, before: Wholes, at: Wholes, aim: Reals) -> Reals:
    """Ratio on the straight line between two neighbours; that of a point itself where its damage is the one wanted."""
    d0, d1 = damage[before], damage[at]
    r0, r1 = ratio[before], ratio[at]
    inside = (d0 < aim) & (aim < d1)
    logs = inside & (d0 > 0)
    share = np.ones(len(aim))
    share[logs] = np.log(aim[logs] / d0[logs]) / np.log(d1[logs] / d0[logs])
    plain = inside & ~logs
    share[plain] = (aim[plain] - d0[plain]) / (d1[plain] - d0[plain])
    return np.where(inside, r0 * (r1 / r0) ** share, r1)


def percentile_between(least: Reals, most: Reals, percent: float) -> tuple[float, float]:
    """Bound a percentile of numbers of which only bounds are known.

    Each number lies between its `least` and its `most`, so the percentile lies between that of the `least` and that of
    the `most`; both are equal where all that it rests on is known. Linear interpolation between order statistics at
    position (m - 1) percent / 100, as `numpy.percentile`.

    Parameters
    ----------
    least, most
        (m,) bounds, m at least 1; may be infinite.
    percent
        0 to 100.
    """
    return _percentile(np.sort(least), percent), _percentile(np.sort(most), percent)


def _percentile(ordered: Reals, percent: float) -> float:
    """Percentile of ordered numbers; infinite where a neighbour that takes part is."""
    place = (len(ordered) - 1) * percent / 100
    low = int(place)
    share = place - low
    one = float(ordered[low])
    if not share:
        return one
    other = float(ordered[low + 1])
    if np.isinf(one) or np.isinf(other):
        return one if np.isinf(one) else other
    return one + (other - one) * share
