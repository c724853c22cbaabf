"""The dial that gives a size: one search for every codec, starting from the raster alone.

A code's size follows a codec's dial (ratio, quantiser step, distance) roughly as a power, so the search runs in
logarithms of both: a first guess along the expected exponent, then the secant through what was seen, kept inside the
bracket once there is one, and bisection where the secant stalls. It remembers nothing between frames, so a run that
was stopped and resumed gives the same codes.

An integer dial (quality, largest error) seldom meets a size; there the two settings around it are given.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal, TypeAlias

from safecheck.codecs.base import EXEMPT_BYTES, RATE_TOLERANCE, Reached
from safecheck.errors import CodecUnavailable

__all__ = ["MOST_ENCODES", "Dial", "End", "Found", "Step", "bracket", "tell", "turn"]

MOST_ENCODES = 12
"""With a continuous dial no frame is encoded more often than this; one of whole numbers ends where its two settings
are found, which has no such bound."""
_ONE_SIDED = 5
"""After so many codes on the same side of the asked size the end of the dial is tried."""
_BEYOND = 1.25
"""After three codes on the same side the secant is followed so much further: on a bent curve it falls short."""
_MARGIN = 0.02
"""The secant keeps this share of the bracket away from its ends."""
_NARROW = 1e-3
"""A bracket narrower than this, in natural logarithms of the dial, holds one stair of the size."""

End: TypeAlias = Literal["met", "floor", "ceiling", "between"]
"""How a search ended: met; all codes too large; all too small; sizes too far apart."""


@dataclass(frozen=True, slots=True)
class Dial:
    """A continuous, positive dial."""

    lowest: float
    highest: float
    exponent: float
    """Expected d log(size) / d log(dial), not zero; negative where turning up makes the code smaller."""

    def __post_init__(self) -> None:
        """Check ranges."""
        if not 0 < self.lowest < self.highest < math.inf:
            raise ValueError(f"dial from {self.lowest} to {self.highest}, expected 0 < lowest < highest")
        if self.exponent == 0 or not math.isfinite(self.exponent):
            raise ValueError(f"exponent is {self.exponent}, expected a finite number other than 0")


@dataclass(frozen=True, slots=True)
class Found:
    """The code nearest to the asked size."""

    dial: float
    code: bytes
    encodes: int
    end: End


@dataclass(frozen=True, slots=True)
class Step:
    """One setting of an integer dial, and its code."""

    dial: int
    code: bytes


@dataclass(frozen=True, slots=True)
class _Point:
    """Logarithms of a dial and of size over asked size."""

    at: float
    excess: float


def turn(encode: Callable[[float], bytes], target_bytes: float, dial: Dial, start: float) -> Found:
    """Turn a continuous dial until the code has the asked size.

    Parameters
    ----------
    encode
        Dial -> code; a function of its argument alone.
    target_bytes
        Asked size, positive.
    dial
        Range and expected slope.
    start
        First dial tried; brought into the range.

    Returns
    -------
    Found
        The code nearest to the asked size; ``met`` where within `RATE_TOLERANCE` of it. At most `MOST_ENCODES` codes
        are written.

    Raises
    ------
    ValueError
        If ``target_bytes`` or ``start`` is not positive and finite.
    """
    if not (0 < target_bytes < math.inf and 0 < start < math.inf):
        raise ValueError(f"asked for {target_bytes} bytes from {start}, expected positive numbers")
    low, high = math.log(dial.lowest), math.log(dial.highest)
    points: list[_Point] = []
    best: tuple[float, float, bytes] | None = None
    at: float | None = min(max(math.log(start), low), high)
    while at is not None and len(points) < MOST_ENCODES:
        # Logarithms there and back miss an end by the last digit.
        inside = min(max(math.exp(at), dial.lowest), dial.highest)
        setting = {low: dial.lowest, high: dial.highest}.get(at, inside)
        code = encode(setting)
        points.append(_Point(at, math.log(max(len(code), 1) / target_bytes)))
        miss = abs(len(code) / target_bytes - 1)
        if best is None or miss < best[0]:
            best = (miss, setting, code)
        if miss <= RATE_TOLERANCE:
            break
        at = _next(points, dial.exponent, low, high)
    assert best is not None
    miss, setting, code = best
    return Found(setting, code, len(points), "met" if miss <= RATE_TOLERANCE else _end(points))


def _end(points: list[_Point]) -> End:
    """Say on which sides of the asked size the codes fell."""
    if all(point.excess > 0 for point in points):
        return "floor"
    return "ceiling" if all(point.excess < 0 for point in points) else "between"


def _next(points: list[_Point], exponent: float, low: float, high: float) -> float | None:
    """Logarithm of the dial to try next; None where nothing is left to try."""
    above = [point for point in points if point.excess > 0]
    below = [point for point in points if point.excess <= 0]
    if above and below:
        return _inside(points, *_pair(above, below))
    last = points[-1]
    wanted = high if (last.excess > 0) == (exponent < 0) else low
    if any(point.at == wanted for point in points):
        return None
    if len(points) >= _ONE_SIDED:
        return wanted
    slope = exponent
    if len(points) > 1 and points[-2].at != last.at:
        slope = (last.excess - points[-2].excess) / (last.at - points[-2].at)
    if slope * exponent <= 0 or abs(slope) < abs(exponent) / 10:
        return wanted
    reach = _BEYOND if len(points) > 2 else 1.0
    return min(max(last.at - reach * last.excess / slope, low), high)


def _pair(above: list[_Point], below: list[_Point]) -> tuple[_Point, _Point]:
    """Two dials next to each other whose codes lie on both sides of the asked size."""
    return min(((a, b) for a in above for b in below), key=lambda pair: abs(pair[0].at - pair[1].at))


def _inside(points: list[_Point], above: _Point, below: _Point) -> float | None:
    """Between two dials whose codes lie on both sides: the secant of the nearest two sizes, or the middle."""
    width = below.at - above.at
    if abs(width) < _NARROW:
        return None
    first, second = sorted(points, key=lambda point: abs(point.excess))[:2]
    # The secant alone creeps where the size is a staircase, so every third code halves the bracket.
    if first.excess != second.excess and len(points) % 3 != 2:
        at = first.at - first.excess * (second.at - first.at) / (second.excess - first.excess)
        share = (at - above.at) / width
        if 0 < share < 1:
            return above.at + min(max(share, _MARGIN), 1 - _MARGIN) * width
    return above.at + width / 2


def bracket(
    encode: Callable[[int], bytes],
    target_bytes: float,
    lowest: int,
    highest: int,
    start: int,
    *,
    rising: bool,
    guess: Callable[[Step], float] | None = None,
) -> tuple[Step, ...]:
    """Find the two neighbouring settings of an integer dial whose codes lie around the asked size.

    Parameters
    ----------
    encode
        Setting -> code; a function of its argument alone.
    target_bytes
        Asked size, positive.
    lowest, highest
        Range of the dial, both ends included.
    start
        First setting tried, within the range.
    rising
        Whether the code grows with the setting.
    guess
        First code -> setting at which the asked size is expected; None where nothing is known of it.

    Returns
    -------
    tuple[Step, ...]
        The setting whose code is the larger one within the asked size, then its neighbour above the asked size. One
        step alone where every code is larger or every code is smaller.

    Raises
    ------
    ValueError
        If the range is empty, ``start`` is outside it, or ``target_bytes`` is not positive.
    """
    if not lowest <= start <= highest or not 0 < target_bytes < math.inf:
        raise ValueError(f"asked for {target_bytes} bytes from {start} in {lowest} to {highest}")
    within: Step | None = None
    beyond: Step | None = None
    at, stride, tried = start, 1, 0
    while True:
        step, tried = Step(at, encode(at)), tried + 1
        if len(step.code) <= target_bytes:
            within = step
        else:
            beyond = step
        if within is not None and beyond is not None:
            if abs(within.dial - beyond.dial) == 1:
                return within, beyond
            at = _between(within, beyond, target_bytes, halve=tried % 3 == 0)
            continue
        end = highest if (beyond is None) == rising else lowest
        if at == end:
            return (step,)
        if guess is not None and tried == 1:
            stride = max(1, abs(round(guess(step)) - at))
        at = min(at + stride, end) if end > at else max(at - stride, end)
        # Strides grow: a start that is nearly right costs two or three codes, a wrong one stays logarithmic.
        stride = max(1, stride // 4) if guess is not None and tried == 1 else 3 * stride


def _between(within: Step, beyond: Step, target_bytes: float, *, halve: bool) -> int:
    """Setting strictly between two: on the line through the logarithms of their sizes, or in the middle."""
    low, high = sorted((within.dial, beyond.dial))
    if halve:
        return (low + high) // 2
    sizes = [math.log(max(len(step.code), 1)) for step in (within, beyond)]
    share = (math.log(max(target_bytes, 1)) - sizes[0]) / (sizes[1] - sizes[0]) if sizes[0] != sizes[1] else 0.5
    at = round(within.dial + share * (beyond.dial - within.dial))
    return min(max(at, low + 1), high - 1)


def tell(end: End, target_bytes: float, reversible_bytes: Callable[[], int]) -> Reached:
    """Put the end of a search into the words that all codecs share.

    Parameters
    ----------
    end
        How the search ended.
    target_bytes
        Asked size.
    reversible_bytes
        Gives the smallest reversible size; called only where the codec could make its code no larger. Where it finds no
        reversible codec on this machine, none is smaller.
    """
    if end == "met":
        return Reached.ASKED
    if end == "ceiling" and _holds(reversible_bytes, target_bytes):
        return Reached.REVERSIBLE_SMALLER
    if end == "floor":
        return Reached.CODEC_FLOOR
    if end == "ceiling":
        return Reached.CODEC_CEILING
    return Reached.SMALL_FRAME if target_bytes < EXEMPT_BYTES else Reached.COARSE_STEPS


def _holds(reversible_bytes: Callable[[], int], target_bytes: float) -> bool:
    """Whether a reversible code of this machine is within the asked size."""
    try:
        return reversible_bytes() <= target_bytes
    except CodecUnavailable:
        return False
