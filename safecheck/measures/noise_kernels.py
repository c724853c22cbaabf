"""Residual of a plane fitted to each patch of 8x8 pixels."""

from __future__ import annotations

from safecheck.measures.compiled import PLACES, PLANE, WORK_ROW, compiled
from safecheck.measures.planes import Places, Plane, Vector

SIDE = 8
SLOPE_SQUARES = 336.0
"""Sum over 8x8 pixels of the squared offset from the middle, along one axis: 8 times 42."""


@compiled(PLANE, PLACES, PLACES, WORK_ROW)
def fit_planes(values: Plane, rows: Places, columns: Places, squares: Vector) -> None:
    """Sum of squared residuals of the least-squares plane of each patch, whose first row and column are given.

    The offsets along rows and columns are orthogonal to each other and to the mean, so each is taken out by itself.
    """
    for index in range(rows.size):
        total = 0.0
        for r in range(SIDE):
            for c in range(SIDE):
                total += values[rows[index] + r, columns[index] + c]
        mean = total / (SIDE * SIDE)
        square = down = across = 0.0
        for r in range(SIDE):
            for c in range(SIDE):
                part = values[rows[index] + r, columns[index] + c] - mean
                square += part * part
                down += part * (r - 3.5)
                across += part * (c - 3.5)
        residual = square - (down * down + across * across) / SLOPE_SQUARES
        squares[index] = residual if residual > 0.0 else 0.0
