"""Squared errors summed over the patches of a grid, and over a list of places."""

from __future__ import annotations

import numpy as np

from safecheck.measures.compiled import INDEX, MASK, PLACES, PLANE, WORK, compiled
from safecheck.measures.planes import Mask, Places, Plane


@compiled(PLANE, PLANE, MASK, INDEX, INDEX, WORK)
def sum_patches(before: Plane, after: Plane, content: Mask, height: int, width: int, sums: Plane) -> None:
    """Sum of squared errors of content pixels in each complete patch of the grid."""
    columns = before.shape[1]
    band = np.empty(columns)
    for patch_row in range(sums.shape[0]):
        band[:] = 0.0
        for row in range(patch_row * height, (patch_row + 1) * height):
            for column in range(columns):
                error = after[row, column] - before[row, column] if content[row, column] else 0.0
                band[column] += error * error
        for patch_column in range(sums.shape[1]):
            total = 0.0
            for column in range(width):
                total += band[patch_column * width + column]
            sums[patch_row, patch_column] = total


@compiled(MASK, INDEX, INDEX, WORK)
def count_patches(mask: Mask, height: int, width: int, counts: Plane) -> None:
    """Count the True pixels of each complete patch of the grid."""
    band = np.empty(mask.shape[1])
    for patch_row in range(counts.shape[0]):
        band[:] = 0.0
        for row in range(patch_row * height, (patch_row + 1) * height):
            for column in range(mask.shape[1]):
                band[column] += 1.0 if mask[row, column] else 0.0
        for patch_column in range(counts.shape[1]):
            total = 0.0
            for column in range(width):
                total += band[patch_column * width + column]
            counts[patch_row, patch_column] = total


@compiled(PLANE, PLANE, PLACES)
def sum_places(before: Plane, after: Plane, places: Places) -> tuple[float, float, int]:
    """Sum of squared errors over a list of places, the largest absolute error, and its place."""
    columns = before.shape[1]
    total = 0.0
    largest = -1.0
    at = -1
    for place in places:
        row, column = place // columns, place % columns
        error = after[row, column] - before[row, column]
        total += error * error
        if abs(error) > largest:
            largest = abs(error)
            at = place
    return total, largest, at
