"""Kernels of SSIM: separable Gaussian filters over rows kept in a ring, so that no filtered plane is ever stored."""

from __future__ import annotations

import numpy as np

from safecheck.measures.compiled import INDEX, MASK, PLACES, PLANE, VECTOR, WORK, WORK_ROW, compiled, types
from safecheck.measures.planes import Mask, Places, Plane, Vector

SIDE = 11
_CHANGED_FROM = 5.0 - 1e-9


@compiled(VECTOR, WORK_ROW, VECTOR)
def filter_along(source: Vector, target: Vector, taps: Vector) -> None:
    """Filter one row: target[c] from source[c] to source[c + 10].

    Here and below loops run from 0 over slices: from any other start the compiler must allow for negative indices,
    and gives up on vector instructions.
    """
    t0, t1, t2, t3, t4, t5 = taps[5], taps[4], taps[3], taps[2], taps[1], taps[0]
    for c in range(target.size):
        target[c] = (
            t0 * source[c + 5]
            + t1 * (source[c + 4] + source[c + 6])
            + t2 * (source[c + 3] + source[c + 7])
            + t3 * (source[c + 2] + source[c + 8])
            + t4 * (source[c + 1] + source[c + 9])
            + t5 * (source[c] + source[c + 10])
        )


@compiled(PLANE, INDEX, WORK_ROW, VECTOR, INDEX)
def filter_down(ring: Plane, oldest: int, target: Vector, taps: Vector, first: int) -> None:
    """Filter eleven rows of a ring into one, from the column `first`."""
    t0, t1, t2, t3, t4, t5 = taps[5], taps[4], taps[3], taps[2], taps[1], taps[0]
    last = first + target.size
    a, b = ring[oldest, first:last], ring[(oldest + 10) % SIDE, first:last]
    c, d = ring[(oldest + 1) % SIDE, first:last], ring[(oldest + 9) % SIDE, first:last]
    e, f = ring[(oldest + 2) % SIDE, first:last], ring[(oldest + 8) % SIDE, first:last]
    g, h = ring[(oldest + 3) % SIDE, first:last], ring[(oldest + 7) % SIDE, first:last]
    i, j = ring[(oldest + 4) % SIDE, first:last], ring[(oldest + 6) % SIDE, first:last]
    k = ring[(oldest + 5) % SIDE, first:last]
    for x in range(target.size):
        target[x] = t0 * k[x] + t1 * (i[x] + j[x]) + t2 * (g[x] + h[x]) + t3 * (e[x] + f[x]) + t4 * (c[x] + d[x])
    for x in range(target.size):
        target[x] += t5 * (a[x] + b[x])


@compiled(VECTOR, VECTOR, types.boolean, WORK_ROW)
def show_row(values: Vector, ramp: Vector, inverted: bool, target: Vector) -> None:
    """Display values of one row: `ramp` holds low, high, centre and width; without it values are shown already."""
    if ramp.size == 0:
        for c in range(values.size):
            target[c] = values[c]
        return
    low, high, centre, width = ramp[0], ramp[1], ramp[2], ramp[3]
    for c in range(values.size):
        value = values[c]
        level = ((value - centre) / width + 0.5) * 255.0
        level = 0.0 if value <= low else level
        target[c] = 255.0 if value > high else level
    if inverted:
        for c in range(values.size):
            target[c] = 255.0 - target[c]


@compiled(VECTOR, VECTOR, WORK_ROW)
def multiply(one: Vector, other: Vector, target: Vector) -> None:
    """Fill the beginning of the target with products."""
    for c in range(one.size):
        target[c] = one[c] * other[c]


@compiled(PLANE, VECTOR, types.boolean, VECTOR, WORK, WORK)
def take_moments(before: Plane, ramp: Vector, inverted: bool, taps: Vector, means: Plane, variances: Plane) -> None:
    """Local mean and variance of the original's display values, over the valid part."""
    rows, columns = before.shape
    width = columns - SIDE + 1
    shown, squares = np.empty(columns), np.empty(columns)
    ring, square_ring = np.empty((SIDE, width)), np.empty((SIDE, width))
    for row in range(rows):
        show_row(before[row], ramp, inverted, shown)
        multiply(shown, shown, squares)
        filter_along(shown, ring[row % SIDE], taps)
        filter_along(squares, square_ring[row % SIDE], taps)
        top = row - SIDE + 1
        if top >= 0:
            filter_down(ring, (row + 1) % SIDE, means[top], taps, 0)
            filter_down(square_ring, (row + 1) % SIDE, variances[top], taps, 0)
            for c in range(width):
                variances[top, c] -= means[top, c] * means[top, c]


@compiled(VECTOR, VECTOR, MASK, INDEX, WORK)
def count_levels(before: Vector, after: Vector, content: Mask, row: int, columns_of: Plane) -> None:
    """By column: how many content pixels changed by five levels or more, and the largest change."""
    for c in range(before.size):
        change = abs(after[c] - before[c]) if content[row, c] else 0.0
        columns_of[0, c] += 1.0 if change >= _CHANGED_FROM else 0.0
    for c in range(before.size):
        change = abs(after[c] - before[c]) if content[row, c] else 0.0
        top = columns_of[1, c]
        columns_of[1, c] = change if change > top else top


@compiled(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, WORK_ROW)
def compare_row(
    mean_b: Vector,
    variance_b: Vector,
    mean_a: Vector,
    square_a: Vector,
    product: Vector,
    constants: Vector,
    target: Vector,
) -> None:
    """SSIM of one row from local moments."""
    c1, c2 = constants[0], constants[1]
    for c in range(target.size):
        both = mean_b[c] * mean_a[c]
        variance_a = square_a[c] - mean_a[c] * mean_a[c]
        covariance = product[c] - both
        above = (2 * both + c1) * (2 * covariance + c2)
        below = (mean_b[c] * mean_b[c] + mean_a[c] * mean_a[c] + c1) * (variance_b[c] + variance_a + c2)
        target[c] = above / below


@compiled(
    PLANE, PLANE, VECTOR, types.boolean, VECTOR, VECTOR, PLANE, PLANE, MASK, MASK, PLACES, PLACES, WORK_ROW, WORK, WORK
)
def compare(
    before: Plane,
    after: Plane,
    ramp: Vector,
    inverted: bool,
    taps: Vector,
    constants: Vector,
    means: Plane,
    variances: Plane,
    content: Mask,
    scored: Mask,
    firsts: Places,
    lasts: Places,
    scores: Vector,
    picture: Plane,
    columns_of: Plane,
) -> int:
    """Fill `scores` with SSIM at the scored pixels, row by row, `picture` (if any) with the map; return how many.

    `firsts` and `lasts` hold, for each row of the frame, the columns of the valid part that any window reaching this
    row needs; rows that none needs have an empty span.
    """
    rows, columns = before.shape
    width = max(columns - SIDE + 1, 0)
    shown_b, shown_a, work = np.empty(columns), np.empty(columns), np.empty(columns)
    means_a, squares, products = np.empty((SIDE, width)), np.empty((SIDE, width)), np.empty((SIDE, width))
    mean_a, square_a, product, line = np.empty(width), np.empty(width), np.empty(width), np.empty(width)
    found = 0
    for row in range(rows):
        show_row(before[row], ramp, inverted, shown_b)
        show_row(after[row], ramp, inverted, shown_a)
        count_levels(shown_b, shown_a, content, row, columns_of)
        first, last = firsts[row], lasts[row]
        if first < last:
            slot = row % SIDE
            seen_b, seen_a = shown_b[first : last + SIDE - 1], shown_a[first : last + SIDE - 1]
            filter_along(seen_a, means_a[slot, first:last], taps)
            multiply(seen_a, seen_a, work)
            filter_along(work, squares[slot, first:last], taps)
            multiply(seen_b, seen_a, work)
            filter_along(work, products[slot, first:last], taps)
        top = row - SIDE + 1
        centre = row - SIDE // 2
        if top < 0 or not firsts[centre + rows] < lasts[centre + rows]:
            continue
        first, last = firsts[centre + rows], lasts[centre + rows]
        oldest = (row + 1) % SIDE
        span = last - first
        filter_down(means_a, oldest, mean_a[:span], taps, first)
        filter_down(squares, oldest, square_a[:span], taps, first)
        filter_down(products, oldest, product[:span], taps, first)
        compare_row(
            means[top, first:last], variances[top, first:last], mean_a, square_a, product, constants, line[:span]
        )
        for c in range(span):
            if scored[centre, first + c + SIDE // 2]:
                scores[found] = line[c]
                found += 1
        if picture.size:
            for c in range(span):
                picture[centre, first + c + SIDE // 2] = line[c]
    return found


@compiled(VECTOR)
def sum_and_least(scores: Vector) -> tuple[float, int]:
    """Sum in order in eight strands, and the index of the first least."""
    strands = np.zeros(8)
    whole = scores.size // 8 * 8
    for start in range(0, whole, 8):
        for strand in range(8):
            strands[strand] += scores[start + strand]
    total = 0.0
    for strand in range(8):
        total += strands[strand]
    for index in range(whole, scores.size):
        total += scores[index]
    least = 0
    for index in range(scores.size):
        if scores[index] < scores[least]:
            least = index
    return total, least
