"""Separable orthonormal block transforms, exact on every processor.

A basis table is rounded to multiples of 2**-22, samples are whole numbers below 2**15 (quarters of them for colour),
and what goes from the first direction to the second is rounded to multiples of 2**-8. So every product and every
partial sum is a multiple of 2**-30 below 2**23 and fits the 53 bits of a double: no operation rounds, in whatever order
and with or without fused multiply-add. Coefficients are whole numbers of 2**-8 stored units.
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt
from numba import njit

__all__ = [
    "GRID",
    "TABLE_GRID",
    "backward_tables",
    "basis",
    "cosine_basis",
    "forward",
    "fourier_basis",
    "inverse",
    "scan_order",
    "turn_back",
    "walsh_hadamard_basis",
]

TABLE_GRID = 1 << 22
"""Basis tables hold multiples of one over this."""
GRID = 1 << 8
"""Coefficients are whole numbers of one over this, in stored units."""

TOGETHER = 8192
"""Samples turned at once, so that work space stays near the processor."""
FOLDED_FROM = 8
"""Tables of at least so many rows are folded where they can be; smaller ones gain nothing."""

Array = npt.NDArray[Any]


def cosine_basis(size: int) -> npt.NDArray[np.float64]:
    """Orthonormal DCT-II: row u is sqrt(2/n) C(u) cos((2x+1) u pi / 2n), C(0) = 1/sqrt 2 (ITU-T T.81 A.3.3)."""
    x = np.arange(size)
    rows = [[math.cos((2 * k + 1) * u * math.pi / (2 * size)) for k in x] for u in x]
    table = np.array(rows) * math.sqrt(2.0 / size)
    table[0] = 1.0 / math.sqrt(size)
    return table


def walsh_hadamard_basis(size: int) -> npt.NDArray[np.float64]:
    """Walsh-Hadamard functions by number of sign changes, +1 and -1 over sqrt(n). `size` is a power of two."""
    signs = np.ones((1, 1))
    while len(signs) < size:
        signs = np.block([[signs, signs], [signs, -signs]])
    changes = (np.diff(signs, axis=1) != 0).sum(axis=1)
    table: npt.NDArray[np.float64] = signs[np.argsort(changes)] / math.sqrt(size)
    return table


def fourier_basis(size: int) -> npt.NDArray[np.float64]:
    """Discrete Fourier transform as real pairs: constant, cos 1, sin 1, cos 2, sin 2, ..., alternating; orthonormal.

    Rows 2f-1 and 2f are sqrt(2/n) cos(2 pi f x/n) and sqrt(2/n) sin(2 pi f x/n), that is sqrt 2 times the real part
    and minus sqrt 2 times the imaginary part of the unitary DFT at frequency f.
    """
    table = np.full((size, size), 1.0 / math.sqrt(size))
    for f in range(1, size // 2):
        angle = [2.0 * math.pi * ((f * k) % size) / size for k in range(size)]
        table[2 * f - 1] = [math.cos(a) * math.sqrt(2.0 / size) for a in angle]
        table[2 * f] = [math.sin(a) * math.sqrt(2.0 / size) for a in angle]
    table[size - 1, 1::2] *= -1.0
    return table


_MAKERS = {"cosine": cosine_basis, "walsh-hadamard": walsh_hadamard_basis, "fourier": fourier_basis}


@lru_cache(maxsize=16)
def basis(transform: str, size: int) -> npt.NDArray[np.float64]:
    """Basis functions in rows, rounded to multiples of 1/`TABLE_GRID`: (size, size), read-only.

    No entry before rounding lies within 2**-45 of a tie, so a last-bit difference between cosines of two
    mathematical libraries cannot show.

    Raises
    ------
    KeyError
        For a name not in `TRANSFORMS`.
    """
    table: npt.NDArray[np.float64] = np.rint(_MAKERS[transform](size) * TABLE_GRID) / TABLE_GRID
    table.flags.writeable = False
    return table


@lru_cache(maxsize=8)
def scan_order(size: int) -> npt.NDArray[np.int32]:
    """Coefficient order, low to high: raster index (row frequency * size + column frequency) of each place.

    Diagonals of equal row plus column frequency, each from the top right down.
    """
    places = sorted((u + v, u, u * size + v) for u in range(size) for v in range(size))
    order = np.array([place for _, _, place in places], dtype=np.int32)
    order.flags.writeable = False
    return order


@njit(cache=True, nogil=True)
def _apply(table: Array, source: Array, target: Array) -> None:
    """Write table @ source into target; the inner loop runs over long contiguous rows."""
    size, length = source.shape
    for u in range(size):
        t0 = table[u, 0]
        t1 = table[u, 1]
        t2 = table[u, 2]
        t3 = table[u, 3]
        for i in range(length):
            target[u, i] = t0 * source[0, i] + t1 * source[1, i] + t2 * source[2, i] + t3 * source[3, i]
        for k in range(4, size, 4):
            t0 = table[u, k]
            t1 = table[u, k + 1]
            t2 = table[u, k + 2]
            t3 = table[u, k + 3]
            for i in range(length):
                target[u, i] += (
                    t0 * source[k, i] + t1 * source[k + 1, i] + t2 * source[k + 2, i] + t3 * source[k + 3, i]
                )


@njit(cache=True, nogil=True)
def _fold(source: Array, top: int, left: int, halves: Array) -> None:
    """Sums of rows that mirror each other, then their differences, of a part of the source."""
    size = halves.shape[0]
    half = size // 2
    for k in range(half):
        for i in range(halves.shape[1]):
            first, last = source[top + k, left + i], source[top + size - 1 - k, left + i]
            halves[k, i] = first + last
            halves[half + k, i] = first - last


@njit(cache=True, nogil=True)
def _unfold(halves: Array, target: Array) -> None:
    """Undo `_fold`, but for a factor of 2."""
    size = target.shape[0]
    half = size // 2
    for k in range(half):
        for i in range(target.shape[1]):
            even, odd = halves[k, i], halves[half + k, i]
            target[k, i] = even + odd
            target[size - 1 - k, i] = even - odd


@njit(cache=True, nogil=True)
def _turn(even: Array, odd: Array, source: Array, top: int, left: int, halves: Array, target: Array) -> None:
    """Write table @ a part of the source into target: folded, even rows first, or as it is."""
    size = halves.shape[0]
    if odd.shape[1]:
        half = size // 2
        _fold(source, top, left, halves)
        _apply(even, halves[:half], target[:half])
        _apply(odd, halves[half:], target[half:])
    else:
        for k in range(size):
            for i in range(halves.shape[1]):
                halves[k, i] = source[top + k, left + i]
        _apply(even, halves, target)


@njit(cache=True, nogil=True)
def _forward(plane: Array, even: Array, odd: Array, places: Array, coefficients: Array) -> None:
    size = even.shape[0] + odd.shape[0]
    tiles = plane.shape[1] // size
    together = max(TOGETHER // (size * size), 1)
    for first in range(0, tiles, together):
        across = min(together, tiles - first)
        # Whole arrays of just this width: slices of wider ones would keep the loops from being vectorised.
        work, turned, halves = (
            np.empty((size, across * size)),
            np.empty((size, across * size)),
            np.empty((size, across * size)),
        )
        starts, lines = (places[:, 0] * across).astype(np.uint64), places[:, 1].astype(np.uint64)
        for stripe in range(plane.shape[0] // size):
            _turn(even, odd, plane, stripe * size, first * size, halves, work)
            for u in range(size):
                for t in range(across):
                    for k in range(size):
                        turned[k, u * across + t] = np.floor(work[u, t * size + k] * 256.0 + 0.5) / 256.0
            _turn(even, odd, turned, 0, 0, halves, work)
            for t in range(across):
                tile = stripe * tiles + first + t
                for k in range(size * size):
                    value = np.floor(work[lines[k], starts[k] + np.uint64(t)] * 256.0 + 0.5)
                    coefficients[tile, k] = np.int32(value)


@njit(cache=True, nogil=True)
def turn_back(work: Array, even: Array, odd: Array, turned: Array, halves: Array) -> None:
    """Sum basis functions by column, then by row: columns of `work` are tiles side by side.

    Parameters
    ----------
    work
        (size, rows of all tiles) by column frequency; row frequency, then tile. Overwritten.
    even, odd
        Of `backward_tables`.
    turned, halves
        Work space like `work`; samples come back in `turned`, (size, columns of all tiles).
    """
    size = work.shape[0]
    half = size // 2
    across = work.shape[1] // size
    for turn in range(2):
        if odd.shape[1]:
            _apply(even, work[:half], halves[:half])
            _apply(odd, work[half:], halves[half:])
            _unfold(halves, turned)
        else:
            _apply(even, work, turned)
        if turn == 0:
            for u in range(size):
                # The first turn leaves row frequencies in the order of `work`, so rows stay where they are.
                for t in range(across):
                    for k in range(size):
                        work[u, t * size + k] = np.floor(turned[k, u * across + t] * 256.0 + 0.5) / 256.0


@njit(cache=True, nogil=True)
def _inverse(coefficients: Array, even: Array, odd: Array, places: Array, plane: Array) -> None:
    size = even.shape[1] + odd.shape[1]
    across = plane.shape[1] // size
    starts, lines = (places[:, 0] * across).astype(np.uint64), places[:, 1].astype(np.uint64)
    work = np.empty((size, plane.shape[1]))
    halves = np.empty((size, plane.shape[1]))
    for stripe in range(plane.shape[0] // size):
        for t in range(across):
            for k in range(size * size):
                work[lines[k], starts[k] + np.uint64(t)] = coefficients[stripe * across + t, k] / 256.0
        turn_back(work, even, odd, plane[stripe * size : (stripe + 1) * size], halves)


def _mirrored(table: npt.NDArray[np.float64]) -> bool:
    """Whether functions are symmetric and antisymmetric by turns, so that half the products serve."""
    return np.array_equal(table[0::2], table[0::2, ::-1]) and np.array_equal(table[1::2], -table[1::2, ::-1])


def _halves(
    table: npt.NDArray[np.float64],
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64], npt.NDArray[np.int32]]:
    """Two tables that serve for one, and each coefficient's row and column frequency there, in `scan_order`.

    The left halves of the even and of the odd rows; or the whole table and nothing.
    """
    size = len(table)
    order = scan_order(size)
    places = np.stack([order // size, order % size], axis=1).astype(np.int32)
    if not _mirrored(table) or size < FOLDED_FROM:
        # A copy, since a kernel compiles once more for arrays that are read-only.
        return table.copy(), np.empty((0, 0)), places
    half = size // 2
    folded = ((places & 1) * half + (places >> 1)).astype(np.int32)
    return np.ascontiguousarray(table[0::2, :half]), np.ascontiguousarray(table[1::2, :half]), folded


def backward_tables(
    table: npt.NDArray[np.float64],
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64], npt.NDArray[np.int32]]:
    """What `turn_back` needs of a table of `basis`: two tables, and each coefficient's row and column frequency there.

    The last is (size * size, 2), in `scan_order`.
    """
    even, odd, places = _halves(table)
    return np.ascontiguousarray(even.T), np.ascontiguousarray(odd.T), places


def forward(plane: npt.NDArray[np.float64], table: npt.NDArray[np.float64]) -> npt.NDArray[np.int32]:
    """Transform a plane tile by tile.

    Parameters
    ----------
    plane
        (rows, columns), both multiples of the tile size; multiples of 1/4, at most 2**15 in magnitude.
    table
        (size, size), of `basis`.

    Returns
    -------
    numpy.ndarray
        (tiles, size * size) whole numbers of 1/`GRID` stored units; tiles in raster order, coefficients in
        `scan_order`.
    """
    size = len(table)
    tiles = (plane.shape[0] // size) * (plane.shape[1] // size)
    coefficients = np.empty((tiles, size * size), dtype=np.int32)
    _forward(plane, *_halves(table), coefficients)
    return coefficients


def inverse(
    coefficients: npt.NDArray[np.int32], table: npt.NDArray[np.float64], shape: tuple[int, int]
) -> npt.NDArray[np.float64]:
    """Undo `forward`; `shape` is that of the plane. Returns (rows, columns), not rounded to whole numbers."""
    plane = np.empty(shape)
    _inverse(coefficients, *backward_tables(table), plane)
    return plane
