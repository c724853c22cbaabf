"""Orthonormal transforms of tiles, not rounded, so that squared errors add up (Parseval).

The codec `tiled` takes the same functions, rounded for its own purposes.
"""

from __future__ import annotations

from functools import lru_cache
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile.transform import cosine_basis, fourier_basis, walsh_hadamard_basis

__all__ = ["SIZES", "TRANSFORMS", "Reals", "as_tiles", "basis", "forward", "in_whole_tiles", "inverse"]

Reals: TypeAlias = npt.NDArray[np.float64]

SIZES = (2, 4, 8, 16, 32, 64)
"""Tile sizes studied, in pixels a side."""
_MAKERS = {"cosine": cosine_basis, "walsh-hadamard": walsh_hadamard_basis, "fourier": fourier_basis}
TRANSFORMS = tuple(_MAKERS)
"""Names as in plans."""


@lru_cache(maxsize=len(_MAKERS) * len(SIZES))
def basis(transform: str, size: int) -> Reals:
    """Basis functions in rows, low frequency first: (size, size), orthonormal to the last bits, read-only.

    Fourier is the discrete Fourier transform as real numbers: the constant, then cosine and sine of each frequency,
    then the alternating function. A complex coefficient and its conjugate are one such pair.

    Raises
    ------
    KeyError
        For a name not in `TRANSFORMS`.
    """
    table = np.ascontiguousarray(_MAKERS[transform](size))
    table.flags.writeable = False
    return table


def in_whole_tiles(plane: Reals, size: int) -> Reals:
    """Extend a plane (rows, columns) by zeros to whole tiles."""
    rows, columns = (-(-length // size) * size for length in plane.shape)
    if plane.shape == (rows, columns):
        return plane
    whole = np.zeros((rows, columns))
    whole[: plane.shape[0], : plane.shape[1]] = plane
    return whole


def as_tiles(plane: Reals, size: int) -> Reals:
    """Cut a plane of whole tiles into its tiles in raster order: (tiles, size * size)."""
    rows, columns = plane.shape
    cut = plane.reshape(rows // size, size, columns // size, size).transpose(0, 2, 1, 3)
    return np.ascontiguousarray(cut).reshape(-1, size * size)


def forward(tiles: Reals, table: Reals) -> Reals:
    """Transform tiles.

    Parameters
    ----------
    tiles
        (tiles, size * size) pixels, row by row.
    table
        (size, size), of `basis`.

    Returns
    -------
    numpy.ndarray
        (tiles, size * size) coefficients, row frequency first.
    """
    from safecheck.study.kernels import transform

    out = np.empty_like(tiles)
    transform(tiles, np.ascontiguousarray(table), np.ascontiguousarray(table.T), out)
    return out


def inverse(coefficients: Reals, table: Reals) -> Reals:
    """Undo `forward`."""
    return forward(coefficients, table.T)
