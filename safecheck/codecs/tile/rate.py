"""Prediction of a code's size from coefficient statistics, before anything is quantised.

What a coefficient costs depends on its expected magnitude (that of its neighbours) over the step. So the expected
magnitudes of a plane, counted in classes of a quarter octave, give the size at *every* step: the counts times the bits
per coefficient of each class, `COSTS`, shifted by the logarithm of the step. The counts are whole numbers and so are
the costs: the same steps are tried on every processor.
"""

from __future__ import annotations

import bisect
from collections.abc import Callable
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.base import RATE_TOLERANCE
from safecheck.codecs.tile.steps import STEPS

__all__ = [
    "BINS",
    "COSTS",
    "FIRST_BIN",
    "FIRST_COST",
    "magnitude_counts",
    "predicted_bytes",
    "search",
    "step_for",
    "tile_magnitudes",
]

Array: TypeAlias = npt.NDArray[Any]

BINS = 160
"""Classes of expected magnitude: four an octave over 40 octaves."""
FIRST_BIN = 8
"""Class of an expected magnitude of 1."""
THIN_FROM = 1024
"""Planes of at least so many tiles are counted on every fourth tile."""


@njit(cache=True, nogil=True)
def tile_magnitudes(coefficients: Array, places: Array, side: int, magnitudes: Array, expected: Array) -> None:
    """Weighted sums of magnitudes around each coefficient of one tile, itself included; weights sum to 8."""
    for k in range(1, coefficients.shape[0]):
        magnitudes[places[k]] = abs(coefficients[k])
    for k in range(1, coefficients.shape[0]):
        at = np.uintp(places[k])
        total = 2 * (magnitudes[at] + magnitudes[at - np.uintp(side)] + magnitudes[at - np.uintp(1)])
        expected[k] = total + magnitudes[at - np.uintp(side + 1)] + magnitudes[at - np.uintp(side - 1)] + 1


@njit(cache=True, nogil=True)
def magnitude_counts(coefficients: Array, used: Array, across: int, places: Array, relative: Array) -> Array:
    """Count expected magnitudes in quarter octaves over every fourth tile.

    Parameters
    ----------
    coefficients
        (tiles, size * size) whole numbers of 1/256 stored units.
    used
        (tiles,), 1 where a tile is coded.
    across
        Tiles in a row.
    places
        Of `context.place_table`.
    relative
        (size * size,), steps of the coefficients in coefficient units where the plain step is 1/256 stored units.

    Returns
    -------
    numpy.ndarray
        (`BINS`,) int64.
    """
    counts = np.zeros(BINS, np.int64)
    count = coefficients.shape[1]
    side = 4
    while side * side < count:
        side *= 2
    side += 4
    magnitudes = np.zeros(side * side, np.int64)
    expected = np.empty(count)
    thin = 3 if coefficients.shape[0] >= THIN_FROM else 0
    for tile in range(coefficients.shape[0]):
        column = tile % across
        if not used[tile] or (column + 2 * (tile // across)) & thin:
            continue
        tile_magnitudes(coefficients[tile], places, side, magnitudes, expected)
        before = coefficients[tile - 1, 0] if column and used[tile - 1] else 0
        expected[0] = 8 * abs(coefficients[tile, 0] - before) + 1
        for k in range(count):
            expected[k] /= relative[k]
        bits = expected.view(np.int64)
        for k in range(count):
            place = (bits[k] >> 50) - (1023 << 2) + FIRST_BIN
            counts[min(max(place, 0), BINS - 1)] += 1
    return counts


COSTS = np.array(
    [2, 3, 3, 3, 8, 93, 290, 412, 520, 672, 820, 949, 1075, 1205, 1345, 1480, 1610, 1750, 1900, 2060, 2200]
    + [2335 + 129 * k for k in range(12)],
    dtype=np.int64,
)
"""Cost of a coefficient in 1/256 bit, by half octaves of expected magnitude over step; measured once on real frames."""
FIRST_COST = -192
"""Where `COSTS` begins, in 1/128 octave of (weighted sum of magnitudes, see `magnitude_counts`) over step."""
MOST_TRIES = 16
BISECT_FROM = 5


@njit(cache=True, nogil=True)
def predicted_bytes(counts: Array, index: int) -> int:
    """Bytes of the levels at the step of an index, before correction by a first try."""
    bits = 0
    for place in range(BINS):
        # Both the classes and the steps lie evenly in the logarithm: 32 and 1 parts of 1/128 octave.
        ratio = (place - FIRST_BIN) * 32 - index - 640 - FIRST_COST
        if ratio >= 0:
            knot = min(ratio // 64, COSTS.shape[0] - 2)
            part = ratio - 64 * knot
            bits += counts[place] * ((COSTS[knot] * (64 - part) + COSTS[knot + 1] * part) // 64)
    return bits // 2048


def step_for(counts: npt.NDArray[np.int64], wanted: float) -> int:
    """Finest step at which no more than the wanted bytes are predicted."""
    return min(bisect.bisect_left(range(STEPS), -wanted, key=lambda k: -predicted_bytes(counts, k)), STEPS - 1)


def _corrected(counts: npt.NDArray[np.int64], index: int, found: int, wanted: float) -> int:
    """Step of the wanted bytes, given the bytes found where the counts predicted others."""
    factor = max(found, 1) / max(predicted_bytes(counts, index), 1)
    return step_for(counts, wanted / factor)


def _secant(tried: dict[int, bytes], target_bytes: float) -> int:
    """Step index at which the line through the two codes nearest to the asked size has it."""
    first, second = sorted(tried, key=lambda k: (abs(len(tried[k]) - target_bytes), k))[:2]
    rise = len(tried[second]) - len(tried[first])
    if rise == 0:
        return (first + second) // 2
    return first + round((second - first) * (target_bytes - len(tried[first])) / rise)


def search(
    write: Callable[[int], bytes],
    sample: Callable[[int], int | None],
    counts: npt.NDArray[np.int64],
    fixed_bytes: int,
    target_bytes: float,
) -> tuple[int, bytes, int]:
    """Find the step whose code has the asked size.

    The first step comes from the counts, corrected by a sample of the tiles where there are enough, the second from
    the counts corrected by the first try, further ones from the line through the two nearest tries, or halfway between
    known bounds where that does not close in.

    Parameters
    ----------
    write
        Step index -> code.
    sample
        Step index -> bytes of the levels judged by some of the tiles; None where they are too few.
    counts
        Of `magnitude_counts`, scaled to all tiles and summed over planes.
    fixed_bytes
        Header and mask.
    target_bytes
        Asked size.

    Returns
    -------
    tuple
        Step index, code and number of tries; the code nearest to the asked size.
    """
    tried: dict[int, bytes] = {}
    finer, coarser = -1, STEPS
    index = step_for(counts, target_bytes - fixed_bytes)
    sampled = sample(index)
    if sampled is not None:
        index = _corrected(counts, index, sampled, target_bytes - fixed_bytes)
    while True:
        code = write(index)
        tried[index] = code
        if abs(len(code) - target_bytes) <= RATE_TOLERANCE * target_bytes or len(tried) >= MOST_TRIES:
            break
        if len(code) > target_bytes:
            finer = index
        else:
            coarser = index
        if coarser - finer <= 1:
            break
        if len(tried) == 1:
            guess = _corrected(counts, index, len(code) - fixed_bytes, target_bytes - fixed_bytes)
        elif len(tried) < BISECT_FROM:
            guess = _secant(tried, target_bytes)
        else:
            guess = (finer + coarser) // 2
        index = min(max(guess, finer + 1), coarser - 1)
    best = min(tried, key=lambda k: (abs(len(tried[k]) - target_bytes), k))
    return best, tried[best], len(tried)
