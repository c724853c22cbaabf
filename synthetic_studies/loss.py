"""Irreversible change with a known amount: 8x8 cosine blocks, quantised with one step."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["cosine_matrix", "quantise_blocks"]

Samples = npt.NDArray[np.integer[Any]]
_SIDE = 8


def cosine_matrix() -> npt.NDArray[np.float64]:
    """Orthonormal 8-point DCT-II (Ahmed, Natarajan, Rao 1974), rows are basis vectors."""
    index = np.arange(_SIDE)
    matrix: npt.NDArray[np.float64] = np.cos(np.pi * (2 * index[None, :] + 1) * index[:, None] / (2 * _SIDE)) / 2
    matrix[0] /= np.sqrt(2)
    return matrix


def quantise_blocks(samples: Samples, step: float, lowest: int, highest: int) -> tuple[Samples, float]:
    """Put a plane through an 8x8 cosine transform and a uniform quantiser and back.

    Parameters
    ----------
    samples
        (rows, columns), whole numbers.
    step
        Quantiser step in stored values, the same for all coefficients.
    lowest, highest
        The result is rounded and clipped to this range.

    Returns
    -------
    tuple
        The plane afterwards, same shape and dtype, and the size in bytes that an ideal coder with one
        fixed table for each coefficient position would need (zero-order entropy: an estimate).
    """
    rows, columns = samples.shape
    padded = np.pad(samples.astype(np.float64), ((0, -rows % _SIDE), (0, -columns % _SIDE)), mode="edge")
    blocks = padded.reshape(padded.shape[0] // _SIDE, _SIDE, padded.shape[1] // _SIDE, _SIDE).swapaxes(1, 2)
    matrix = cosine_matrix()
    levels = np.rint(matrix @ blocks @ matrix.T / step)
    back = (matrix.T @ (levels * step) @ matrix).swapaxes(1, 2).reshape(padded.shape)[:rows, :columns]
    plane: Samples = np.clip(np.rint(back), lowest, highest).astype(samples.dtype)
    return plane, _entropy_bytes(levels.reshape(-1, _SIDE * _SIDE))


def _entropy_bytes(levels: npt.NDArray[np.float64]) -> float:
    """Sum of the zero-order entropies of the columns, in bytes, at least one."""
    bits = 0.0
    for column in levels.T:
        counts = np.unique(column, return_counts=True)[1]
        bits -= float((counts * np.log2(counts / column.size)).sum())
    return max(bits / 8, 1.0)
