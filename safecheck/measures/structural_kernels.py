"""Kernels of SSIM: separable Gaussian filters over rows kept in a ring, so that no filtered plane is ever stored."""

from __future__ import annotations

import numpy as np

from safecheck.measures.compiled import (
    CUBE,
    CUBE_WORK,
    FLAGS,
    INDEX,
    MASK,
    PLACES_WORK,
    PLANE,
    SPANS,
    VECTOR,
    WORK,
    WORK_ROW,
    compiled,
    types,
)
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


@compiled(PLANE, VECTOR, types.boolean, VECTOR, SPANS, WORK, WORK)
def take_moments(
    before: Plane, ramp: Vector, inverted: bool, taps: Vector, spans: Places, means: Plane, variances: Plane
) -> None:
    """Local mean and variance of the original's display values, in the spans of `compare`."""
    rows, columns = before.shape
    width = max(columns - SIDE + 1, 0)
    shown, squares = np.empty(columns), np.empty(columns)
    ring, square_ring = np.empty((SIDE, width)), np.empty((SIDE, width))
    for row in range(rows):
        first, last = spans[0, row], spans[1, row]
        if first < last:
            seen = shown[first : last + SIDE - 1]
            show_row(before[row, first : last + SIDE - 1], ramp, inverted, seen)
            multiply(seen, seen, squares)
            filter_along(seen, ring[row % SIDE, first:last], taps)
            filter_along(squares, square_ring[row % SIDE, first:last], taps)
        top, centre = row - SIDE + 1, row - SIDE // 2
        if top < 0 or not spans[2, centre] < spans[3, centre]:
            continue
        first, last = spans[2, centre], spans[3, centre]
        mean, variance = means[top, first:last], variances[top, first:last]
        filter_down(ring, (row + 1) % SIDE, mean, taps, first)
        filter_down(square_ring, (row + 1) % SIDE, variance, taps, first)
        for c in range(mean.size):
            variance[c] -= mean[c] * mean[c]


@compiled(MASK, PLACES_WORK, PLACES_WORK)
def find_ends(mask: Mask, firsts: Places, lasts: Places) -> None:
    """First column and end of the True pixels of each row; without any, the number of columns and 0."""
    rows, columns = mask.shape
    for row in range(rows):
        first, last = 0, columns
        while first < columns and not mask[row, first]:
            first += 1
        while last > first and not mask[row, last - 1]:
            last -= 1
        firsts[row] = first
        lasts[row] = last if first < columns else 0


@compiled(VECTOR, VECTOR, FLAGS, WORK, INDEX)
def count_levels(before: Vector, after: Vector, content: Mask, tallies: Plane, first: int) -> None:
    """By column: how many content pixels changed by five levels or more, and the largest change."""
    changed, largest = tallies[0, first : first + before.size], tallies[1, first : first + before.size]
    for c in range(before.size):
        change = abs(after[c] - before[c]) if content[c] else 0.0
        changed[c] += 1.0 if change >= _CHANGED_FROM else 0.0
    for c in range(before.size):
        change = abs(after[c] - before[c]) if content[c] else 0.0
        top = largest[c]
        largest[c] = change if change > top else top


@compiled(VECTOR, VECTOR, CUBE_WORK, INDEX, VECTOR, WORK_ROW, INDEX)
def fill_rings(before: Vector, after: Vector, rings: Plane, slot: int, taps: Vector, work: Vector, first: int) -> None:
    """Filter one row of values after, of their squares and of their products with those before."""
    last = first + before.size - SIDE + 1
    filter_along(after, rings[0, slot, first:last], taps)
    multiply(after, after, work)
    filter_along(work, rings[1, slot, first:last], taps)
    multiply(before, after, work)
    filter_along(work, rings[2, slot, first:last], taps)


@compiled(VECTOR, VECTOR, CUBE, INDEX, VECTOR, VECTOR, WORK, INDEX)
def compare_row(
    mean_b: Vector,
    variance_b: Vector,
    rings: Plane,
    oldest: int,
    taps: Vector,
    constants: Vector,
    lines: Plane,
    first: int,
) -> None:
    """SSIM of one row from eleven rows of the rings, into the last of the lines."""
    size = mean_b.size
    mean_a, square_a, product, target = lines[0, :size], lines[1, :size], lines[2, :size], lines[3, :size]
    filter_down(rings[0], oldest, mean_a, taps, first)
    filter_down(rings[1], oldest, square_a, taps, first)
    filter_down(rings[2], oldest, product, taps, first)
    c1, c2 = constants[0], constants[1]
    for c in range(size):
        both = mean_b[c] * mean_a[c]
        variance_a = square_a[c] - mean_a[c] * mean_a[c]
        covariance = product[c] - both
        above = (2 * both + c1) * (2 * covariance + c2)
        below = (mean_b[c] * mean_b[c] + mean_a[c] * mean_a[c] + c1) * (variance_b[c] + variance_a + c2)
        target[c] = above / below


@compiled(VECTOR, FLAGS, INDEX, WORK_ROW, INDEX)
def gather(line: Vector, scored: Mask, first: int, scores: Vector, found: int) -> int:
    """Append the values of the scored pixels of one row; return how many there are by now."""
    for c in range(line.size):
        if scored[first + c]:
            scores[found] = line[c]
            found += 1
    return found


@compiled(PLANE, PLANE, VECTOR, types.boolean, VECTOR, VECTOR, PLANE, PLANE, MASK, MASK, SPANS, WORK_ROW, WORK, WORK)
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
    spans: Places,
    scores: Vector,
    picture: Plane,
    tallies: Plane,
) -> int:
    """Fill `scores` with SSIM at the scored pixels, row by row, `picture` (if any) with the map; return how many.

    `spans` holds, for each row of the frame, first column and end of three spans: what is filtered along, what is
    filtered down (both counted in the valid part), and what is shown (in the frame). An end before its first column
    means that nothing is needed there.
    """
    rows, columns = before.shape
    width = max(columns - SIDE + 1, 0)
    shown_b, shown_a, work = np.empty(columns), np.empty(columns), np.empty(columns)
    rings, lines = np.empty((3, SIDE, width)), np.empty((4, width))
    found = 0
    for row in range(rows):
        first, last = spans[4, row], spans[5, row]
        if first < last:
            show_row(before[row, first:last], ramp, inverted, shown_b[first:last])
            show_row(after[row, first:last], ramp, inverted, shown_a[first:last])
            count_levels(shown_b[first:last], shown_a[first:last], content[row, first:last], tallies, first)
        first, last = spans[0, row], spans[1, row]
        if first < last:
            seen = slice(first, last + SIDE - 1)
            fill_rings(shown_b[seen], shown_a[seen], rings, row % SIDE, taps, work, first)
        top, centre = row - SIDE + 1, row - SIDE // 2
        if top < 0 or not spans[2, centre] < spans[3, centre]:
            continue
        first, last = spans[2, centre], spans[3, centre]
        compare_row(
            means[top, first:last], variances[top, first:last], rings, (row + 1) % SIDE, taps, constants, lines, first
        )
        found = gather(lines[3, : last - first], scored[centre], first + SIDE // 2, scores, found)
        if picture.size:
            picture[centre, first + SIDE // 2 : last + SIDE // 2] = lines[3, : last - first]
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
