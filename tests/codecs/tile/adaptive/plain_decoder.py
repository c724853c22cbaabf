"""A second decoder of adaptive codes, in plain Python from the text of docs/tiled_codec.md: slow, of another hand."""

from __future__ import annotations

import math
import struct
import zlib
from collections.abc import Iterator
from typing import Any

import numpy as np
import numpy.typing as npt

from tests.codecs.tile import plain_decoder
from tests.codecs.tile.plain_decoder import grade, read_mask, rebuilt, table, weight

Array = npt.NDArray[Any]
Place = tuple[int, int]


class Coder(plain_decoder.Coder):
    """The arithmetic decoder, with decisions under three contexts."""

    def fresh(self) -> None:
        super().fresh()
        self.weights: dict[Any, list[int]] = {}

    def mixed(self, kind: Any, *contexts: Any) -> int:
        states = [self.contexts[context] for context in contexts]
        weights = self.weights.setdefault(kind, [24576] * 3)
        places = [(state[0] + state[1]) // 32 for state in states]
        logits = [round(256 * math.log((2 * k + 1) / (8191 - 2 * k))) for k in places]
        total = sum(w * x for w, x in zip(weights, logits, strict=True)) >> 16
        total = min(max(total, -2047), 2047)
        odds = min(max(round(65536 / (1 + math.exp(-total / 256))), 32), 65504)
        share = (self.width >> 16) * odds
        found = int(self.code < share)
        if found:
            self.width = share
        else:
            self.code -= share
            self.width -= share
        for k in range(3):
            weights[k] += (logits[k] * (65536 * found - odds) + 32768) >> 16
        target = 65504 if found else 32
        for state in states:
            state[0] += (target - state[0]) // 2 ** min(state[2] + 1, 4)
            state[1] += (target - state[1]) // 2 ** min(state[2] + 1, 7)
            state[2] = min(state[2] + 1, 6)
        self.widen()
        return found


def read_drawing(coder: Coder, shape: Place, channels: int, bits: int) -> tuple[Array, Array, Array]:
    """Two values, pixels that are drawn, and which of the two they hold."""
    values = np.array([coder.raw(bits) for _ in range(2 * channels)]).reshape(2, channels)
    cells = np.zeros((-(-shape[0] // 4), -(-shape[1] // 4)), int)

    def known(image: Array, r: int, c: int) -> int:
        return int(image[r, c]) if r >= 0 and 0 <= c < image.shape[1] else 0

    for r, c in np.ndindex(cells.shape):
        near = ((r, c - 1), (r - 1, c - 1), (r - 1, c), (r - 1, c + 1))
        cells[r, c] = coder.bit("cell", sum(known(cells, *place) << k for k, place in enumerate(near)))
    ink = np.zeros(shape, int)
    for r, c in np.ndindex(shape):
        if cells[r // 4, c // 4]:
            near3 = [
                (r, c - 1),
                (r, c - 2),
                (r, c - 3),
                *((r - 1, c + k) for k in range(-2, 3)),
                (r - 2, c),
                (r - 2, c + 1),
            ]
            ink[r, c] = coder.bit("ink", sum(known(ink, *place) << k for k, place in enumerate(near3)))
    drawn = np.repeat(np.repeat(cells, 4, 0), 4, 1)[: shape[0], : shape[1]]
    return values, drawn, ink


def read_tree(coder: Coder, coded: Array) -> Iterator[tuple[int, int, int]]:
    """Tiles as size, first row and first column, in their order."""
    sizes = np.zeros_like(coded)

    def node(size: int, r: int, c: int) -> Iterator[tuple[int, int, int]]:
        side = size // 4
        if not coded[r : r + side, c : c + side].any():
            return
        smaller = sum(
            int(p >= 0 and q >= 0 and coded[p, q] and sizes[p, q] < size) for p, q in ((r, c - 1), (r - 1, c))
        )
        if size > 4 and coder.bit("split", size, smaller):
            for down, right in ((0, 0), (0, side // 2), (side // 2, 0), (side // 2, side // 2)):
                yield from node(size // 2, r + down, c + right)
        else:
            sizes[r : r + side, c : c + side] = size
            yield size, 4 * r, 4 * c

    for r in range(0, coded.shape[0], 16):
        for c in range(0, coded.shape[1], 16):
            yield from node(64, r, c)


class Tile:
    """A tile once read."""

    def __init__(self, size: int, mean: int, rest: int, end: int) -> None:
        self.size, self.mean, self.rest, self.length = size, mean, rest * 64 // size, end.bit_length()
        self.sizes = np.zeros((size, size), int)
        self.levels = np.zeros((size, size), int)


def resampled(tile: Tile, size: int, weight_16: int) -> Array:
    """Magnitudes at the frequencies of a tile of another size, weighted in 1/16."""
    if tile.size <= size:
        ratio = size // tile.size
        return weight_16 * np.repeat(np.repeat(tile.sizes, ratio, 0), ratio, 1)
    ratio = tile.size // size
    sums: Array = tile.sizes.reshape(size, ratio, size, ratio).sum(axis=(1, 3))
    return weight_16 * sums // ratio**2


def sides(owner: dict[Place, Tile], size: int, r: int, c: int) -> list[list[tuple[Tile, int]]]:
    """Tiles to the left and above, each with the pixels of the side that it shares."""
    found = []
    for line in ([(r + k, c - 1) for k in range(0, size, 4)], [(r - 1, c + k) for k in range(0, size, 4)]):
        shares: dict[int, tuple[Tile, int]] = {}
        for place in line:
            tile = owner.get((place[0] // 4, place[1] // 4))
            if tile:
                shares[id(tile)] = (tile, shares.get(id(tile), (tile, 0))[1] + 4)
        found.append(list(shares.values()))
    return found


def read_level(coder: Coder, size: int, zone: int, known: tuple[int, int, int], first: int) -> int:
    """A magnitude; `first` is 1 where it is known not to be zero."""
    c, near, beside = known
    length = first
    while length < 29:
        kind = (min(length, 3), zone, size)
        high = min(length, 15)
        if length < 2:
            rows: tuple[Any, ...] = (
                ("A", length, zone, c),
                ("B", length, size, near, beside),
                ("C", length, size, zone, c),
            )
        else:
            rows = (("A", high, min(zone, 1), c), ("D", high, size, near), ("E", high, zone, beside))
        if not coder.mixed(kind, *rows):
            break
        length += 1
    if length < 2:
        return length
    kind_c = (min(zone, 1), c, length)
    bit = coder.bit("M", *kind_c, 0)
    value = 2 | bit
    if length > 2:
        value = 2 * value + coder.bit("M", *kind_c, 1 + bit)
        value = (value << (length - 3)) | coder.raw(length - 3)
    return value


def read_end(coder: Coder, size: int, around: int, c: int) -> int:
    length = 0
    while length < (size * size - 1).bit_length() and coder.mixed(
        ("end", size), ("F", size, around, length), ("G", size, length), ("H", c, length)
    ):
        length += 1
    if length < 2:
        return length
    node = 1
    for _ in range(min(3, length - 1)):
        node = 2 * node + coder.bit("P", size, length, node)
    return node << max(length - 4, 0) | coder.raw(length - 4)


def read_tile(coder: Coder, owner: dict[Place, Tile], size: int, r: int, c: int) -> Tile:
    around = sides(owner, size, r, c)
    means = [sum(share * tile.mean for tile, share in line) // max(sum(s for _, s in line), 1) for line in around]
    guess = sum(means)
    if around[0] and around[1]:
        corner = owner.get((r // 4 - 1, c // 4 - 1))
        guess = sorted((*means, guess - corner.mean if corner else guess // 2))[1]
    guess = (guess * size // 32 + 1) // 2 if size < 64 else guess
    rests = sum(share * tile.rest for line in around for tile, share in line) * 16 // size
    grade_0 = grade(rests // (2 * 64 * 4 // size))
    rest = read_level(coder, size, 0, (grade_0, min(grade_0, 15), 15), 0)
    if rest:
        rest = -rest if coder.raw(1) else rest
    lengths = sum(share * tile.length for line in around for tile, share in line) * 16 // size // 16
    end = read_end(coder, size, min(lengths, 26), grade(abs(rest)))
    tile = Tile(size, (guess + rest) * 64 // size, abs(rest), end)
    tile.levels[0, 0], tile.sizes[0, 0] = guess + rest, min(abs(rest), 8191)
    beside = np.zeros((size + 1, size + 1), int)
    for line in around:
        for other, share in line:
            beside[:size, :size] += resampled(other, size, 16 * share // size)
    own = np.zeros((size + 3, size + 3), int)
    own[2, 2] = abs(rest)
    order = sorted(((u, v) for u in range(size) for v in range(size)), key=lambda p: (p[0] + p[1], p[0]))
    for at, (u, v) in enumerate(order[1 : end + 1], start=1):
        p, q = u + 2, v + 2
        near = 2 * (own[p - 1, q] + own[p, q - 1] + own[p - 1, q + 1]) + own[p - 2, q] + own[p, q - 2]
        more = (4 * beside[u, v] + beside[u, v + 1] + beside[u + 1, v]) // 16
        zone = 1 + sum(math.ceil(8 * (u + v) / size) > limit for limit in (1, 2, 4, 7, 10))
        known = (grade(int(near + more)), min(grade(int(near)), 15), min(grade(int(more)), 14))
        own[p, q] = read_level(coder, size, zone, known, int(at == end))
        if own[p, q]:
            tile.sizes[u, v] = min(own[p, q], 8191)
            tile.levels[u, v] = -own[p, q] if coder.raw(1) else own[p, q]
    for place in np.ndindex(size // 4, size // 4):
        owner[r // 4 + place[0], c // 4 + place[1]] = tile
    return tile


def decode(code: bytes) -> Array:
    """Read a code: (rows, columns, channels), whole numbers."""
    fields = struct.unpack("<4sBBBBIIBBBBH3H3i6bIII", code[:58])
    _, version, transform, weighting, none, rows, columns, bits, signed, channels, padding, k, *more = fields
    assert (version, none) == (2, 0)
    assert fields[-1] == zlib.crc32(code[:54] + code[58:])
    least = -(2 ** (bits - 1)) if signed else 0
    coder = Coder(code[58:])
    mask = np.zeros((rows, columns), int)
    exact = np.tile(more[:channels], (rows * columns, 1))
    if padding:
        mask = read_mask(coder, rows, columns)
        exact = exact[: mask.sum()]
    if padding == 2:
        for channel in range(channels):
            before = 0
            for row in range(len(exact)):
                before = before if coder.bit("same", channel) else coder.raw(bits)
                exact[row, channel] = before
    drawn = np.zeros((rows, columns), int)
    if more[12]:
        pair, drawn, ink = read_drawing(coder, (rows, columns), channels, bits)
    whole = np.zeros((-(-rows // 64) * 64, -(-columns // 64) * 64), int)
    whole[:rows, :columns] = 1 - (mask | drawn)
    coded = whole.reshape(whole.shape[0] // 4, 4, whole.shape[1] // 4, 4).max(axis=(1, 3))
    tiles = list(read_tree(coder, coded))
    step = math.floor(2**32 * 2 ** (k % 128 / 128)) / 2**32 * 2 ** (k // 128) / 8
    axes = (1.0,) if channels == 1 else (math.sqrt(3) / 4, math.sqrt(2) / 2, math.sqrt(6) / 4)
    planes = []
    for plane, axis in enumerate(axes):
        coder.fresh()
        owner: dict[Place, Tile] = {}
        values = np.zeros(whole.shape)
        for size, r, c in tiles:
            tile = read_tile(coder, owner, size, r, c)
            steps = np.floor(2**14 * 256 * step * axis * weight(weighting, size, plane) + 0.5) / 2**14
            shifts = (more[6 + 2 * plane], more[7 + 2 * plane])
            levels = tile.levels[None, None]
            values[r : r + size, c : c + size] = rebuilt(levels, steps, shifts, table(transform, size))
        planes.append(values[:rows, :columns])
    assert coder.at == 6 + len(coder.payload) - 2
    if channels == 3:
        y, u, v = planes
        planes = [(4 * y + 3 * u + 2 * v) / 3, (4 * y - 4 * v) / 3, (4 * y - 3 * u + 2 * v) / 3]
    samples: Array = np.stack([np.floor(plane + 0.5) + more[3 + k] for k, plane in enumerate(planes)], axis=-1)
    samples = np.clip(samples, least, least + 2**bits - 1).astype(int)
    if more[12]:
        samples[drawn == 1] = pair[ink[drawn == 1]] + least
    samples[mask == 1] = exact[: mask.sum()] + least
    return samples
