"""Compiled loops over tiles: in a fixed order, so that every processor adds the same numbers in the same order."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

__all__ = ["energies_below", "rank", "split_squares", "transform"]

Array: TypeAlias = npt.NDArray[Any]


@njit(cache=True, nogil=True)
def transform(tiles: Array, table: Array, turned: Array, out: Array) -> None:
    """Write table @ tile @ table.T for each tile.

    Parameters
    ----------
    tiles, out
        (tiles, size * size).
    table
        (size, size).
    turned
        The table's transpose, contiguous.
    """
    size = table.shape[0]
    down = np.empty((size, size))
    for tile in range(tiles.shape[0]):
        for u in range(size):
            for i in range(size):
                down[u, i] = table[u, 0] * tiles[tile, i]
            for k in range(1, size):
                factor = table[u, k]
                for i in range(size):
                    down[u, i] += factor * tiles[tile, k * size + i]
        for u in range(size):
            for v in range(size):
                out[tile, u * size + v] = down[u, 0] * turned[0, v]
            for k in range(1, size):
                factor = down[u, k]
                for v in range(size):
                    out[tile, u * size + v] += factor * turned[k, v]


@njit(cache=True, nogil=True)
def rank(tiles: Array, lowness: Array, grid: float, keys: Array) -> None:
    """Write whole numbers that order the coefficients of each tile by magnitude, then by `lowness`; no two are equal.

    Parameters
    ----------
    tiles
        (tiles, coefficients).
    lowness
        (coefficients,), 0 to their number less 1, each once.
    grid
        Magnitudes are compared in steps of one over this.
    keys
        (tiles, coefficients), int64; the first coefficient of each tile gets the largest.
    """
    count = tiles.shape[1]
    for tile in range(tiles.shape[0]):
        for k in range(1, count):
            keys[tile, k] = np.int64(np.floor(abs(tiles[tile, k]) * grid + 0.5)) * count + lowness[k]
        keys[tile, 0] = np.int64(1) << 62


@njit(cache=True, nogil=True)
def energies_below(tiles: Array, keys: Array, least: Array, energies: Array) -> None:
    """Write the sum of squares of the coefficients of each tile whose key is below the least that is kept.

    Parameters
    ----------
    tiles, keys
        (tiles, coefficients).
    least
        (tiles,).
    energies
        (tiles,).
    """
    for tile in range(tiles.shape[0]):
        total = 0.0
        for k in range(tiles.shape[1]):
            if keys[tile, k] < least[tile]:
                total += tiles[tile, k] * tiles[tile, k]
        energies[tile] = total


@njit(cache=True, nogil=True)
def split_squares(coefficients: Array, moved: Array, least: float) -> tuple[int, float, float]:
    """Tell squared errors apart by whether a coefficient came back.

    Parameters
    ----------
    coefficients, moved
        (tiles, coefficients) before, and what was added to them.
    least
        Size from which a coefficient after counts as one that came back.

    Returns
    -------
    tuple
        How many came back, the squared error of all, and of those that came back.
    """
    count = 0
    total = 0.0
    rounding = 0.0
    for tile in range(moved.shape[0]):
        for k in range(moved.shape[1]):
            square = moved[tile, k] * moved[tile, k]
            total += square
            if abs(coefficients[tile, k] + moved[tile, k]) >= least:
                count += 1
                rounding += square
    return count, total, rounding
