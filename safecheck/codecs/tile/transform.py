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
    "basis",
    "cosine_basis",
    "forward",
    "fourier_basis",
    "inverse",
    "scan_order",
    "walsh_hadamard_basis",
]

TABLE_GRID = 1 << 22
"""Basis tables hold multiples of one over this."""
GRID = 1 << 8
"""Coefficients are whole numbers of one over this, in stored units."""

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
def _forward(plane: Array, table: Array, order: Array, coefficients: Array) -> None:
    size = table.shape[0]
    across = plane.shape[1] // size
    rows, columns = (order // size * across).astype(np.uint64), (order % size).astype(np.uint64)
    work = np.empty((size, plane.shape[1]))
    turned = np.empty((size, plane.shape[1]))
    for stripe in range(plane.shape[0] // size):
        _apply(table, plane[stripe * size : (stripe + 1) * size], work)
        for u in range(size):
            for t in range(across):
                for k in range(size):
                    turned[k, u * across + t] = np.floor(work[u, t * size + k] * 256.0 + 0.5) / 256.0
        _apply(table, turned, work)
        for t in range(across):
            for k in range(size * size):
                value = np.floor(work[columns[k], rows[k] + np.uint64(t)] * 256.0 + 0.5)
                coefficients[stripe * across + t, k] = np.int32(value)


@njit(cache=True, nogil=True)
def _inverse(coefficients: Array, table: Array, order: Array, plane: Array) -> None:
    size = table.shape[0]
    across = plane.shape[1] // size
    rows, columns = (order // size * across).astype(np.uint64), (order % size).astype(np.uint64)
    work = np.empty((size, plane.shape[1]))
    turned = np.empty((size, plane.shape[1]))
    for stripe in range(plane.shape[0] // size):
        for t in range(across):
            for k in range(size * size):
                work[columns[k], rows[k] + np.uint64(t)] = coefficients[stripe * across + t, k] / 256.0
        _apply(table, work, turned)
        for u in range(size):
            for t in range(across):
                for k in range(size):
                    work[u, t * size + k] = np.floor(turned[k, u * across + t] * 256.0 + 0.5) / 256.0
        _apply(table, work, plane[stripe * size : (stripe + 1) * size])


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
    _forward(plane, table, scan_order(size), coefficients)
    return coefficients


def inverse(
    coefficients: npt.NDArray[np.int32], table: npt.NDArray[np.float64], shape: tuple[int, int]
) -> npt.NDArray[np.float64]:
    """Undo `forward`; `shape` is that of the plane. Returns (rows, columns), not rounded to whole numbers."""
    plane = np.empty(shape)
    _inverse(coefficients, np.ascontiguousarray(table.T), scan_order(len(table)), plane)
    return plane
