"""One pass over two frames: sums, and the largest error of each small group of pixels."""

from __future__ import annotations

import numpy as np

from safecheck.measures.compiled import INDEX, MASK, PLANE, REAL, VECTOR, WORK, compiled
from safecheck.measures.planes import Mask, Plane, Vector

GROUP = 8
"""Rows of a group; a group is one column wide."""


@compiled(PLANE, PLANE, MASK, WORK, WORK, WORK)
def accumulate(before: Plane, after: Plane, content: Mask, sums: Plane, tops: Plane, content_tops: Plane) -> None:
    """Add errors up by column and take the largest of each group, over the frame and over content.

    Six short loops of one or two arrays each are what the compiler turns into vector instructions; one loop over all
    of them is not.
    """
    rows, columns = before.shape
    error = np.empty(columns)
    inside = np.empty(columns)
    for row in range(rows):
        group = row // GROUP
        for column in range(columns):
            error[column] = after[row, column] - before[row, column]
        for column in range(columns):
            inside[column] = error[column] if content[row, column] else 0.0
        for column in range(columns):
            sums[0, column] += error[column]
        for column in range(columns):
            sums[1, column] += abs(error[column])
        for column in range(columns):
            sums[2, column] += error[column] * error[column]
        for column in range(columns):
            sums[3, column] += inside[column]
        for column in range(columns):
            sums[4, column] += abs(inside[column])
        for column in range(columns):
            sums[5, column] += inside[column] * inside[column]
        for column in range(columns):
            size = abs(error[column])
            top = tops[group, column]
            tops[group, column] = size if size > top else top
        for column in range(columns):
            size = abs(error[column]) if content[row, column] else -1.0
            top = content_tops[group, column]
            content_tops[group, column] = size if size > top else top


@compiled(PLANE)
def add_up(sums: Plane) -> Vector:
    """Sum of each row, in order of the columns."""
    totals = np.zeros(sums.shape[0])
    for index in range(sums.shape[0]):
        for column in range(sums.shape[1]):
            totals[index] += sums[index, column]
    return totals


@compiled(PLANE, PLANE, MASK, PLANE, REAL)
def find_first(before: Plane, after: Plane, content: Mask, tops: Plane, size: float) -> tuple[int, int]:
    """Place of the first pixel of the mask, row by row, whose absolute error has this size."""
    rows, columns = before.shape
    for group in range(tops.shape[0]):
        if tops[group].max() < size:
            continue
        for row in range(group * GROUP, min((group + 1) * GROUP, rows)):
            for column in range(columns):
                if content[row, column] and abs(after[row, column] - before[row, column]) == size:
                    return row, column
    return -1, -1


@compiled(PLANE, PLANE, MASK, PLANE, REAL, INDEX)
def collect_above(before: Plane, after: Plane, content: Mask, tops: Plane, bound: float, limit: int) -> Vector:
    """Absolute errors of the mask above the bound, largest first; at most `limit` of them exist."""
    kept = np.empty(limit)
    found = 0
    rows = before.shape[0]
    for group in range(tops.shape[0]):
        for column in range(tops.shape[1]):
            if tops[group, column] <= bound:
                continue
            for row in range(group * GROUP, min((group + 1) * GROUP, rows)):
                size = abs(after[row, column] - before[row, column])
                if content[row, column] and size > bound:
                    kept[found] = size
                    found += 1
    return np.sort(kept[:found])[::-1].copy()


@compiled(VECTOR, VECTOR)
def accumulate_list(errors: Vector, weights: Vector) -> tuple[float, float, float, float]:
    """Weight, weighted error, absolute error and squared error, added up in order."""
    weight = total = absolute = square = 0.0
    for index in range(errors.size):
        weight += weights[index]
        total += weights[index] * errors[index]
        absolute += weights[index] * abs(errors[index])
        square += weights[index] * errors[index] * errors[index]
    return weight, total, absolute, square
