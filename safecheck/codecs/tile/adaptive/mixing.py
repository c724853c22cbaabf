"""Binary decisions under three contexts at once, their odds mixed in whole numbers.

Each context gives a probability as in `entropy`. Their logits, in 1/256, are weighted, summed and turned back into one
probability; the weights move along the gradient of the code length (logistic mixing as in Mahoney's PAQ coders, 2005).
Logit and its inverse are tables of whole numbers, so equal bits give equal bytes on every processor.
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any, Final, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

from safecheck.codecs.tile.entropy import NARROW, Coder, adapted, shift_in, shift_out

__all__ = ["INPUTS", "Tables", "decode_mixed", "encode_mixed", "logit_table", "new_weights", "odds_table"]

Array: TypeAlias = npt.NDArray[Any]
Tables: TypeAlias = tuple[Array, Array]
"""Logits and odds."""

INPUTS: Final = 3
"""Contexts of a decision."""
FURTHEST: Final = 2047
"""Largest logit in magnitude, in 1/256."""
FIRST_WEIGHT: Final = 24576
"""Weight of each input at first, in 1/65536."""


@lru_cache(maxsize=1)
def logit_table() -> npt.NDArray[np.int16]:
    """256 ln(p / (1 - p)) of p = (k + 1/2) / 4096, rounded to whole numbers: (4096,)."""
    table = np.array([round(256 * math.log((2 * k + 1) / (8191 - 2 * k))) for k in range(4096)], dtype=np.int16)
    table.flags.writeable = False
    return table


@lru_cache(maxsize=1)
def odds_table() -> npt.NDArray[np.uint16]:
    """65536 / (1 + exp(-x / 256)) of x = k - 2047, rounded to whole numbers, within 32 to 65504: (4095,)."""
    logits = range(-FURTHEST, FURTHEST + 1)
    table = np.array([min(max(round(65536 / (1 + math.exp(-x / 256))), 32), 65504) for x in logits], dtype=np.uint16)
    table.flags.writeable = False
    return table


def new_weights(rows: int) -> npt.NDArray[np.int64]:
    """Weights of so many sets, all even: (rows * `INPUTS`,)."""
    return np.full(rows * INPUTS, FIRST_WEIGHT, dtype=np.int64)


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _place(state: int) -> np.uintp:
    """Row of the logit table that a context's two estimates give."""
    return np.uintp(((state >> 21) + ((state >> 4) & 0x1FFFF)) >> 5)


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _mixed_odds(weights: Array, row: int, a: int, b: int, c: int, odds: Array) -> np.int64:
    """Probability of a one on 16 bits, from three logits."""
    at = np.uintp(row)
    total = weights[at] * a + weights[at + np.uintp(1)] * b + weights[at + np.uintp(2)] * c
    return np.int64(odds[np.uintp(min(max(total >> 16, -FURTHEST), FURTHEST) + FURTHEST)])


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _learn(weights: Array, row: int, a: int, b: int, c: int, error: int) -> None:
    """Move three weights along the gradient; `error` is the bit less its probability, on 16 bits."""
    at = np.uintp(row)
    weights[at] += (a * error + 32768) >> 16
    weights[at + np.uintp(1)] += (b * error + 32768) >> 16
    weights[at + np.uintp(2)] += (c * error + 32768) >> 16


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def encode_mixed(
    buffer: Array,
    coder: Coder,
    states: Array,
    weights: Array,
    rows: tuple[int, int, int, int],
    bit: int,
    tables: Tables,
) -> Coder:
    """Write one bit; `rows` are its three contexts and the place of its weights."""
    position, low, width = coder
    logits, odds = tables
    one, two, three = np.uintp(rows[0]), np.uintp(rows[1]), np.uintp(rows[2])
    a = np.int64(logits[_place(states[one])])
    b = np.int64(logits[_place(states[two])])
    c = np.int64(logits[_place(states[three])])
    chance: Any = _mixed_odds(weights, rows[3], a, b, c, odds)
    share = (width >> 16) * chance
    if bit:
        width = share
    else:
        low += share
        width -= share
    _learn(weights, rows[3], a, b, c, (bit << 16) - chance)
    states[one] = adapted(states[one], bit)
    states[two] = adapted(states[two], bit)
    states[three] = adapted(states[three], bit)
    if width < NARROW:
        position, low, width = shift_out(buffer, position, low, width)
    return position, low, width


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def decode_mixed(
    buffer: Array, coder: Coder, states: Array, weights: Array, rows: tuple[int, int, int, int], tables: Tables
) -> tuple[Coder, int]:
    """Read one bit."""
    position, code, width = coder
    logits, odds = tables
    one, two, three = np.uintp(rows[0]), np.uintp(rows[1]), np.uintp(rows[2])
    a = np.int64(logits[_place(states[one])])
    b = np.int64(logits[_place(states[two])])
    c = np.int64(logits[_place(states[three])])
    chance: Any = _mixed_odds(weights, rows[3], a, b, c, odds)
    share = (width >> 16) * chance
    bit = 1 if code < share else 0
    if bit:
        width = share
    else:
        code -= share
        width -= share
    _learn(weights, rows[3], a, b, c, (bit << 16) - chance)
    states[one] = adapted(states[one], bit)
    states[two] = adapted(states[two], bit)
    states[three] = adapted(states[three], bit)
    if width < NARROW:
        position, code, width = shift_in(buffer, position, code, width)
    return (position, code, width), bit
