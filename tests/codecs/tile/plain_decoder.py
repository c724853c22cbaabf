"""A second decoder, in plain Python from the text of docs/tiled_codec.md: slow, and shares nothing with the codec."""

from __future__ import annotations

import math
import struct
import zlib
from collections import defaultdict
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[Any]
K1 = """16 11 10 16 24 40 51 61 12 12 14 19 26 58 60 55 14 13 16 24 40 57 69 56 14 17 22 29 51 87 80 62
18 22 37 56 68 109 103 77 24 35 55 64 81 104 113 92 49 64 78 87 103 121 120 101 72 92 95 98 112 100 103 99"""
K2 = """17 18 24 47 99 99 99 99 18 21 26 66 99 99 99 99 24 26 56 99 99 99 99 99 47 66 99 99 99 99 99 99""" + " 99" * 32


class Coder:
    """The arithmetic decoder."""

    def __init__(self, payload: bytes) -> None:
        self.payload, self.at, self.width = payload, 0, 2**48 - 1
        self.code = self.take(6)
        self.contexts: dict[Any, list[int]] = {}
        self.fresh()

    def fresh(self) -> None:
        self.contexts = defaultdict(lambda: [32768, 32768, 0])

    def take(self, count: int) -> int:
        part = self.payload[self.at : self.at + count].ljust(count, b"\0")
        self.at += count
        return int.from_bytes(part, "big")

    def widen(self) -> None:
        if self.width < 2**32:
            self.code = (self.code << 16) + self.take(2)
            self.width <<= 16

    def bit(self, *context: Any) -> int:
        state = self.contexts[context]
        share = (self.width >> 15) * ((state[0] + state[1]) // 4)
        found = int(self.code < share)
        if found:
            self.width = share
        else:
            self.code -= share
            self.width -= share
        target = 65504 if found else 32
        state[0] += (target - state[0]) // 2 ** min(state[2] + 1, 4)
        state[1] += (target - state[1]) // 2 ** min(state[2] + 1, 7)
        state[2] = min(state[2] + 1, 6)
        self.widen()
        return found

    def raw(self, bits: int) -> int:
        if bits <= 0:
            return 0
        if bits > 16:
            return (self.raw(bits - 16) << 16) | self.raw(16)
        self.width >>= bits
        value = min(self.code // self.width, 2**bits - 1)
        self.code -= value * self.width
        self.widen()
        return int(value)


def read_mask(coder: Coder, rows: int, columns: int) -> Array:
    mask = np.zeros((rows, columns), int)
    cells = np.zeros((-(-rows // 8), -(-columns // 8)), int)
    for r, c in np.ndindex(cells.shape):
        left = cells[r, c - 1] if c else 0
        above = cells[r - 1, c] if r else left
        context = 3 * left + above
        cells[r, c] = 2 if coder.bit("mask", context) else coder.bit("mask", 9 + context)
        if cells[r, c] == 1:
            mask[8 * r : 8 * r + 8, 8 * c : 8 * c + 8] = 1

    def known(r: int, c: int) -> int:
        return int(mask[r, c]) if r >= 0 and 0 <= c < columns else 0

    for r, c in np.ndindex(mask.shape):
        if cells[r // 8, c // 8] == 2:
            near = (known(r, c - 1), known(r, c - 2), known(r - 1, c), known(r - 1, c - 1), known(r - 1, c + 1))
            context = sum(bit << k for k, bit in enumerate((*near, known(r - 2, c))))
            mask[r, c] = coder.bit("mask", 18 + context)
    return mask


def grade(value: int) -> int:
    value = min(value, 8191)
    length = value.bit_length()
    return 0 if value == 0 else 2 * length - 1 + (value >> (length - 2) & 1 if length > 1 else 0)


def read_magnitude(coder: Coder, zone: int, c: int) -> int:
    if not coder.bit("ONE", zone, c):
        return 1
    length, kind = 2, zone > 0
    while length < 29 and coder.bit("LENGTH", kind, c, length):
        length += 1
    first = coder.bit("MANTISSA", kind, c, length, 0)
    value = 2 | first
    if length > 2:
        value = 2 * value + coder.bit("MANTISSA", kind, c, length, 1 + first)
        value = (value << (length - 3)) | coder.raw(length - 3)
    return value


def read_end(coder: Coder, around: int, count: int) -> int:
    length = 0
    while length < (count - 1).bit_length() and coder.bit("END", around, length):
        length += 1
    if length < 2:
        return length
    node = 1
    for _ in range(min(3, length - 1)):
        node = 2 * node + coder.bit("PLACE", length, node)
    return node << max(length - 4, 0) | coder.raw(length - 4)


def read_plane(coder: Coder, used: Array, n: int) -> Array:
    """Levels as (tile rows, tile columns, row frequency, column frequency)."""
    coder.fresh()
    order = sorted(((u, v) for u in range(n) for v in range(n)), key=lambda p: (p[0] + p[1], p[0]))
    levels = np.zeros((*used.shape, n, n), int)
    ends, rests = np.zeros(used.shape, int), np.zeros(used.shape, int)

    for r, c in zip(*np.nonzero(used), strict=True):
        left = (r, c - 1) if c and used[r, c - 1] else None
        above = (r - 1, c) if r and used[r - 1, c] else None
        before = [place for place in (left, above) if place]
        sides = [int(levels[place][0, 0]) for place in before]
        guess = sum(sides)
        if len(sides) == 2:
            corner = int(levels[r - 1, c - 1][0, 0]) if used[r - 1, c - 1] else guess // 2
            guess = sorted((*sides, guess - corner))[1]
        k = grade(2 * sum(int(rests[place]) for place in before))
        rest = 0
        if coder.bit("ZERO", 0, k):
            rest = read_magnitude(coder, 0, k)
            rest = -rest if coder.raw(1) else rest
        rests[r, c] = abs(rest)
        levels[r, c, 0, 0] = guess + rest
        end = read_end(coder, sum(int(ends[place]).bit_length() for place in before), n * n)
        ends[r, c] = end
        own = np.zeros((n + 3, n + 3), int)  # magnitudes, two rows and columns of margin, one more to the right
        own[2, 2] = abs(rest)
        sums = np.zeros((n + 1, n + 1), int)
        for place in before:
            sums[:n, :n] += np.abs(levels[place])
        for at, (u, v) in enumerate(order[1 : end + 1], start=1):
            p, q = u + 2, v + 2
            m = 2 * (own[p - 1, q] + own[p, q - 1] + own[p - 1, q + 1]) + own[p - 2, q] + own[p, q - 2]
            m += 4 * sums[u, v] + sums[u, v + 1] + sums[u + 1, v]
            zone = 1 + sum(math.ceil(8 * (u + v) / n) > limit for limit in (1, 2, 4, 7, 10))
            if at == end or coder.bit("ZERO", zone, grade(int(m))):
                own[p, q] = read_magnitude(coder, zone, grade(int(m)))
                levels[r, c, u, v] = -own[p, q] if coder.raw(1) else own[p, q]
    return levels


def table(transform: int, n: int) -> Array:
    rows: list[Array]
    x = np.arange(n)
    if transform == 0:
        rows = [np.cos((2 * x + 1) * u * np.pi / (2 * n)) * math.sqrt((1 if u == 0 else 2) / n) for u in x]
    elif transform == 1:
        signs = np.array([[(-1.0) ** bin(i & j).count("1") for j in x] for i in x])
        rows = sorted(signs / math.sqrt(n), key=lambda row: np.count_nonzero(np.diff(row)))
    else:
        pairs = [kind(2 * np.pi * f * x / n) * math.sqrt(2 / n) for f in range(1, n // 2) for kind in (np.cos, np.sin)]
        rows = [np.full(n, 1 / math.sqrt(n)), *pairs, (-1.0) ** x / math.sqrt(n)]
    rounded: Array = np.rint(np.array(rows) * 2**22) / 2**22
    return rounded


def weight(weighting: int, n: int, plane: int) -> Array:
    if weighting == 0:
        return np.ones((n, n))
    known = np.array((K2 if plane else K1).split(), float).reshape(8, 8)
    at = np.minimum(8 * np.arange(n) / n, 7)
    along = np.array([np.interp(at, np.arange(8), row) for row in known])
    both: Array = np.array([np.interp(at, np.arange(8), column) for column in along.T]).T / known[0, 0]
    return both


def rebuilt(levels: Array, steps: Array, shifts: tuple[int, int], basis: Array) -> Array:
    sizes = np.abs(levels)
    fine = 256 * sizes + np.where(sizes == 1, shifts[0], np.where(sizes > 1, shifts[1], 0))
    fine[:, :, 0, 0] = 256 * sizes[:, :, 0, 0]
    values = np.sign(levels) * np.minimum(np.floor(fine * steps / 256 + 0.5), 2.0**30) / 256
    half = np.floor(256 * (values @ basis) + 0.5) / 256
    tiles = basis.T @ half
    rows, columns, n, _ = tiles.shape
    return tiles.transpose(0, 2, 1, 3).reshape(rows * n, columns * n)


def decode(code: bytes) -> Array:
    """Read a code: (rows, columns, channels), whole numbers."""
    fields = struct.unpack("<4sBBBBIIBBBBH3H3i6bIII", code[:58])
    _, version, transform, weighting, n, rows, columns, bits, signed, channels, padding, k, *more = fields
    assert version == 1
    assert fields[-1] == zlib.crc32(code[:54] + code[58:])
    least = -(2 ** (bits - 1)) if signed else 0
    coder = Coder(code[58:])
    mask = np.zeros((rows, columns), int)
    values = np.tile(more[:channels], (rows * columns, 1))
    if padding:
        mask = read_mask(coder, rows, columns)
        values = values[: mask.sum()]
    if padding == 2:
        for channel in range(channels):
            before = 0
            for row in range(len(values)):
                before = before if coder.bit("same", channel) else coder.raw(bits)
                values[row, channel] = before
    down, across = -(-rows // n), -(-columns // n)
    free = np.ones((down * n, across * n), int)
    free[:rows, :columns] = mask
    used = (free.reshape(down, n, across, n).min(axis=(1, 3)) == 0).astype(int)
    step = math.floor(2**32 * 2 ** (k % 128 / 128)) / 2**32 * 2 ** (k // 128) / 8
    axes = (1.0,) if channels == 1 else (math.sqrt(3) / 4, math.sqrt(2) / 2, math.sqrt(6) / 4)
    planes = []
    for plane, axis in enumerate(axes):
        levels = read_plane(coder, used, n)
        steps = np.floor(2**14 * 256 * step * axis * weight(weighting, n, plane) + 0.5) / 2**14
        shifts = (more[6 + 2 * plane], more[7 + 2 * plane])
        planes.append(rebuilt(levels, steps, shifts, table(transform, n))[:rows, :columns])
    assert coder.at == 6 + len(coder.payload) - 2
    if channels == 3:
        y, u, v = planes
        planes = [(4 * y + 3 * u + 2 * v) / 3, (4 * y - 4 * v) / 3, (4 * y - 3 * u + 2 * v) / 3]
    whole: Array = np.stack([np.floor(plane + 0.5) + more[3 + k] for k, plane in enumerate(planes)], axis=-1)
    whole = np.clip(whole, least, least + 2**bits - 1).astype(int)
    whole[mask == 1] = values[: mask.sum()] + least
    return whole
