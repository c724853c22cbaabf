"""Coding gain: how unevenly a transform spreads the variance, measured on a frame and for a first-order Markov field.

Gain = 10 log10 of the arithmetic over the geometric mean of the coefficients' variances (Jayant and Noll 1984). It is
the fall of squared error at one high rate against coding the pixels themselves.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.study.tiles import Reals, basis

__all__ = [
    "LEAST_TILES",
    "complex_variances",
    "gain_db",
    "markov_gain_db",
    "neighbour_correlation",
    "variances",
]

LEAST_TILES = 16
"""Fewest tiles over which variances are taken: the gain then comes out about 0.3 dB too high, 4.3 dB over the tiles."""


def gain_db(spread: Reals) -> float | None:
    """Arithmetic over geometric mean of variances in dB; None where one of them is zero, or there are none."""
    if not spread.size or not spread.min() > 0:
        return None
    return float(10 * (np.log10(spread.mean()) - np.log10(spread).mean()))


def variances(tiles: Reals) -> Reals | None:
    """Variance of each coefficient over tiles, (size * size,); None of fewer than `LEAST_TILES`.

    Parameters
    ----------
    tiles
        (tiles, size * size).
    """
    return tiles.var(axis=0) if len(tiles) >= LEAST_TILES else None


def complex_variances(pixels: Reals, size: int) -> Reals | None:
    """Variance of each complex coefficient of the unitary discrete Fourier transform over tiles of pixels.

    A coefficient and its conjugate each count, so there are size * size of them: real and imaginary part share one
    variance, which is their mean in the real form. None of fewer than `LEAST_TILES` tiles.

    Parameters
    ----------
    pixels
        (tiles, size * size).
    size
        Tile size.
    """
    if len(pixels) < LEAST_TILES:
        return None
    found: Reals = np.fft.fft2(pixels.reshape(-1, size, size), norm="ortho").var(axis=0)
    return found.ravel()


def markov_gain_db(transform: str, size: int, correlation: float) -> float | None:
    """Gain along one direction for a first-order Markov process; a separable field has the sum of two.

    Parameters
    ----------
    transform
        One of `safecheck.study.tiles.TRANSFORMS`, or ``fourier, complex``.
    size
        Tile size.
    correlation
        Of neighbours, above -1 and below 1; the covariance at distance d is its d-th power.

    Returns
    -------
    float or None
        In dB; None for a correlation of 1 in size.
    """
    if not -1 < correlation < 1:
        return None
    apart = np.abs(np.subtract.outer(np.arange(size), np.arange(size)))
    covariance = np.float64(correlation) ** apart
    table = _complex_basis(size) if transform == "fourier, complex" else basis(transform, size)
    return gain_db(np.einsum("ui,ij,uj->u", table, covariance, table.conj()).real)


def _complex_basis(size: int) -> npt.NDArray[Any]:
    """Unitary discrete Fourier transform, frequencies in rows."""
    places = np.arange(size)
    table: npt.NDArray[Any] = np.exp(-2j * np.pi * np.outer(places, places) / size) / np.sqrt(size)
    return table


def neighbour_correlation(values: Reals, mask: npt.NDArray[np.bool_], axis: int) -> float | None:
    """Correlation coefficient of neighbours along an axis, both in the mask.

    Parameters
    ----------
    values
        (rows, columns).
    mask
        (rows, columns).
    axis
        0: of a pixel and the one below it; 1: and the one to its right.

    Returns
    -------
    float or None
        None of fewer than two pairs, or where values do not vary.
    """
    pairs = mask[:-1] & mask[1:] if axis == 0 else mask[:, :-1] & mask[:, 1:]
    first = (values[:-1] if axis == 0 else values[:, :-1])[pairs]
    second = (values[1:] if axis == 0 else values[:, 1:])[pairs]
    if first.size < 2:
        return None
    first, second = first - first.mean(), second - second.mean()
    scale = float(np.sqrt(np.dot(first, first) * np.dot(second, second)))
    return float(np.dot(first, second)) / scale if scale > 0 else None
