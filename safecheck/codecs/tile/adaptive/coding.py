"""From a raster to a code of tiles chosen over the frame, and back."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile import context, planes, rate, steps, stream, transform
from safecheck.codecs.tile.adaptive import around, contexts, leaves, levels, mixing, partition, tree
from safecheck.codecs.tile.coding import Padding, read_padding, restore_padding, write_padding
from safecheck.codecs.tile.entropy import Coder, finish_encoding, new_states
from safecheck.codecs.tile.levels import WORST_BYTES
from safecheck.codecs.tile.settings import ADAPTIVE_VERSION, SIZES, TRANSFORMS, WEIGHTINGS
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["Analysis", "analyse", "decode", "fixed_bytes", "search", "write"]

STEPS_TOGETHER = 128
"""Tiles are chosen once for so many places of the grid of steps, an octave."""
SWEEPS = 4
"""How often what is filled is smoothed; more gains nothing here."""
COUNTED = 2
"""Place in `SIZES` of the tiles by which the first step is guessed."""
FIRST_SCALE = 1.1
"""How much more the first guess may take, since chosen tiles take less than those of one size; measured once."""
SAMPLED_FROM = 256
"""Fewer tiles are not sampled."""
SAMPLED_AGAIN = 12
"""Places on the grid of steps by which the first sample may move the step before another is taken."""
USUAL = 0.94
"""What a code takes of the bytes predicted, on most frames."""
LEARNING = 150
"""Bytes that the contexts take to learn, in a sample as in a whole code; measured once on real frames."""
SAMPLE_SCALE = 0.983
"""What a whole code takes of the sample's share beside, since weights learn longer. Measured once on real frames."""


@dataclass(frozen=True, slots=True, eq=False)
class Analysis:
    """A raster's transform coefficients at every size and all else that does not depend on the step."""

    raster: Raster
    transform: str
    weighting: str
    centres: tuple[int, ...]
    coded: npt.NDArray[np.uint8]
    """1 for each cell of 4 x 4 pixels that is coded: (rows, columns)."""
    coefficients: tuple[tuple[npt.NDArray[np.int32], ...], ...]
    """Of each plane and size: (tiles, size * size), in `transform.scan_order`."""
    padding: Padding


@dataclass(frozen=True, slots=True, eq=False)
class Partition:
    """Tiles chosen at a step, and their coefficients."""

    cells: npt.NDArray[np.uint8]
    """Map of `tree`."""
    tiles: npt.NDArray[np.int32]
    """Of `tree.tiles_of`."""
    values: tuple[npt.NDArray[np.int32], ...]
    """Coefficients of each plane, tile after tile."""


@functools.lru_cache(maxsize=1)
def _tables() -> tuple[levels.Lookup, npt.NDArray[np.int64], npt.NDArray[np.int32]]:
    return levels.tables(), partition.bit_table(), leaves.neighbour_table()


@functools.lru_cache(maxsize=16)
def _relative(weighting: str, size: int, chroma: bool) -> npt.NDArray[np.float64]:
    """Steps over that of the constant, in scan order."""
    factors: npt.NDArray[np.float64] = steps.weights(weighting, size, chroma).ravel()[transform.scan_order(size)]
    return factors


def _plane_steps(weighting: str, step: int, channels: int) -> list[npt.NDArray[np.float64]]:
    """Steps of each plane: (5, 4096), by size, in scan order and coefficient units; 1 beyond a size's coefficients."""
    value = steps.step_at(step)
    planes_steps = []
    for plane, scale in enumerate(planes.PLANE_SCALES[channels]):
        by_size = np.ones((len(SIZES), SIZES[-1] ** 2))
        for kind, size in enumerate(SIZES):
            weight = steps.weights(weighting, size, plane > 0)
            by_size[kind, : size * size] = steps.coefficient_steps(value, scale, weight, transform.scan_order(size))
        planes_steps.append(by_size)
    return planes_steps


def _coded_tiles(coded: npt.NDArray[np.uint8], kind: int) -> npt.NDArray[np.uint8]:
    """1 for each tile of a size that holds a coded cell: (tile rows, tile columns)."""
    side = 1 << kind
    rows, columns = coded.shape
    found: npt.NDArray[np.uint8] = coded.reshape(rows // side, side, columns // side, side).max(axis=(1, 3))
    return found


# A frame meets the same codec at several ratios, one after the other: the last analysis serves them all.
@functools.lru_cache(maxsize=1)
def analyse(raster: Raster, name: str, weighting: str) -> Analysis:
    """Transform a raster at every size, once for all steps; a raster is told from another by identity."""
    padding = raster.padding
    centres = planes.centre(raster.samples, padding)
    filled = planes.to_planes(raster.samples, padding, centres, contexts.LARGEST, SWEEPS)
    coefficients = tuple(
        tuple(transform.forward(plane, transform.basis(name, size)) for size in SIZES) for plane in filled
    )
    coded = _coded(raster.shape, padding)
    return Analysis(raster, name, weighting, centres, coded, coefficients, write_padding(raster))


def _coded(shape: tuple[int, int], padding: npt.NDArray[np.bool_] | None) -> npt.NDArray[np.uint8]:
    whole = planes.padded_shape(shape, contexts.LARGEST)
    coded = np.zeros((whole[0] // tree.CELL, whole[1] // tree.CELL), np.uint8)
    rows, columns = (side // tree.CELL for side in planes.padded_shape(shape, tree.CELL))
    coded[:rows, :columns] = planes.used_tiles(shape, padding, tree.CELL).reshape(rows, columns)
    return coded


def _costs(analysis: Analysis, steps_of_planes: list[npt.NDArray[np.float64]], kind: int) -> npt.NDArray[np.int64]:
    """What tiles of a size cost, over all planes: (tile rows, tile columns), 0 where nothing is coded."""
    coded = _coded_tiles(analysis.coded, kind)
    costs = np.zeros(coded.size, np.int64)
    size = SIZES[kind]
    for plane, by_size in enumerate(steps_of_planes):
        partition.tile_costs(
            analysis.coefficients[plane][kind],
            coded.ravel(),
            coded.shape[1],
            context.place_table(size),
            1.0 / by_size[kind, : size * size],
            _tables()[1],
            costs,
        )
    return costs.reshape(coded.shape)


@functools.lru_cache(maxsize=3)
def _partition(analysis: Analysis, group: int) -> Partition:
    """Choose tiles for a group of steps."""
    step = min(group * STEPS_TOGETHER, steps.STEPS - 1)
    by_plane = _plane_steps(analysis.weighting, step, analysis.raster.format.channels)
    costs = [_costs(analysis, by_plane, kind) for kind in range(len(SIZES))]
    cells = np.empty_like(analysis.coded)
    partition.choose(*costs, analysis.coded, cells)
    tiles = tree.tiles_of(cells)
    values = tuple(leaves.gather(own, tiles, cells.shape[1]) for own in analysis.coefficients)
    return Partition(cells, tiles, values)


def _partition_at(analysis: Analysis, step: int) -> Partition:
    return _partition(analysis, (step + STEPS_TOGETHER // 2) // STEPS_TOGETHER)


def fixed_bytes(analysis: Analysis) -> int:
    """Bytes that do not depend on the step: header, mask and padding values."""
    return stream.HEADER_BYTES + len(analysis.padding.written)


def write(analysis: Analysis, step: int) -> bytes:
    """Quantise and code at the step of an index; equal arguments give equal bytes on every processor."""
    raster = analysis.raster
    chosen = _partition_at(analysis, step)
    buffer, coder, shifts = _write_planes(analysis, chosen, step, thin=0)
    centres = [*analysis.centres, 0, 0]
    header = stream.Header(
        transform=TRANSFORMS.index(analysis.transform),
        weighting=WEIGHTINGS.index(analysis.weighting),
        size=0,
        rows=raster.shape[0],
        columns=raster.shape[1],
        bits=raster.format.bits_stored,
        signed=int(raster.format.signed),
        channels=raster.format.channels,
        padding=analysis.padding.kind,
        step=step,
        padding_values=analysis.padding.values,
        centres=(centres[0], centres[1], centres[2]),
        shifts=(shifts[0], shifts[1], shifts[2], shifts[3], shifts[4], shifts[5]),
        version=ADAPTIVE_VERSION,
    )
    return stream.write(header, buffer[: finish_encoding(buffer, coder)].tobytes())


def _write_planes(
    analysis: Analysis, chosen: Partition, step: int, thin: int
) -> tuple[npt.NDArray[np.uint8], Coder, list[int]]:
    """Quantise and code all planes; buffer, encoder behind them and quantiser's shifts."""
    found = np.empty_like(chosen.values[0])
    ends = np.zeros(len(chosen.tiles), dtype=np.int32)
    coder, done = analysis.padding.coder, len(analysis.padding.written)
    buffer = np.empty(done + WORST_BYTES * (contexts.LARGEST**2 + 2) + 2 * chosen.cells.size + 2 * found.size, np.uint8)
    buffer[:done] = np.frombuffer(analysis.padding.written, dtype=np.uint8)
    states = new_states(contexts.CONTEXTS)
    coder = tree.encode_tree(chosen.cells, states, buffer, coder)
    shifts = [0] * 6
    _, _, neighbours = _tables()
    for plane, by_size in enumerate(_plane_steps(analysis.weighting, step, analysis.raster.format.channels)):
        shifts[2 * plane : 2 * plane + 2] = leaves.quantise_tiles(
            chosen.values[plane], chosen.tiles, by_size, neighbours, found, ends
        )
        buffer, coder = _write_levels(chosen, found, ends, buffer, coder, thin)
    return buffer, coder, shifts


def _write_levels(
    chosen: Partition,
    found: npt.NDArray[np.int32],
    ends: npt.NDArray[np.int32],
    buffer: npt.NDArray[np.uint8],
    coder: Coder,
    thin: int,
) -> tuple[npt.NDArray[np.uint8], Coder]:
    """Write one plane's levels, in a larger buffer where the first guess is too small."""
    lookup, _, _ = _tables()
    # A carry may reach back into what stands before this plane, so a second try needs it as it was.
    before = buffer[: coder[0]].copy()
    while True:
        work = around.new_work(chosen.cells.shape, len(chosen.tiles), len(found))
        states, weights = new_states(contexts.CONTEXTS), mixing.new_weights(contexts.WEIGHT_ROWS)
        after, fits = levels.encode_tiles(found, ends, chosen.tiles, lookup, states, weights, work, buffer, coder, thin)
        if fits:
            return buffer, after
        larger = np.empty(2 * len(buffer), dtype=np.uint8)
        larger[: coder[0]] = before
        buffer = larger


def _partition_counts(analysis: Analysis, chosen: Partition) -> npt.NDArray[np.int64]:
    """Expected magnitudes of all tiles and of every fourth: (2, bins)."""
    counts = np.zeros((2, rate.BINS), np.int64)
    places = np.zeros((len(SIZES), SIZES[-1] ** 2), np.int32)
    for plane, scale in enumerate(planes.PLANE_SCALES[analysis.raster.format.channels]):
        relative = np.ones(places.shape)
        for kind, size in enumerate(SIZES):
            relative[kind, : size * size] = _relative(analysis.weighting, size, plane > 0) * scale
            places[kind, : size * size] = context.place_table(size)
        partition.tile_counts(chosen.values[plane], chosen.tiles, places, relative, counts)
    return counts


def search(analysis: Analysis, target_bytes: float) -> tuple[int, bytes, int]:
    """Find the step whose code has the asked size; see `rate.search`."""
    wanted = target_bytes - fixed_bytes(analysis)
    chosen = _partition_at(analysis, rate.step_for(_counts(analysis), wanted * FIRST_SCALE))
    counts = _partition_counts(analysis, chosen)

    def share(step: int) -> float:
        """Bytes of a sample of the tiles, over what the counts predict of them."""
        _, coder, _ = _write_planes(analysis, _partition_at(analysis, step), step, thin=3)
        written = coder[0] - len(analysis.padding.written)
        predicted = max(rate.predicted_bytes(counts[1], step), 1)
        return float(max(written - LEARNING, written // 2) / predicted)

    def sample(asked: int) -> int | None:
        if len(chosen.tiles) < SAMPLED_FROM:
            return None
        step = rate.step_for(counts[0], wanted / USUAL)
        found = share(step)
        again = rate.step_for(counts[0], (wanted - LEARNING) / (found * SAMPLE_SCALE))
        if abs(again - step) > SAMPLED_AGAIN:
            found = share(again)
        return int(found * SAMPLE_SCALE * rate.predicted_bytes(counts[0], asked)) + LEARNING

    put = functools.partial(write, analysis)
    return rate.search(put, sample, counts[0], fixed_bytes(analysis), target_bytes)


@functools.lru_cache(maxsize=1)
def _counts(analysis: Analysis) -> npt.NDArray[np.int64]:
    """Expected magnitudes of tiles of one size, for a first guess of the step."""
    total = np.zeros(rate.BINS, dtype=np.int64)
    size = SIZES[COUNTED]
    coded = _coded_tiles(analysis.coded, COUNTED)
    for plane, scale in enumerate(planes.PLANE_SCALES[analysis.raster.format.channels]):
        part = rate.magnitude_counts(
            analysis.coefficients[plane][COUNTED],
            coded.ravel(),
            coded.shape[1],
            context.place_table(size),
            _relative(analysis.weighting, size, plane > 0) * scale,
        )
        total += part * (int(coded.sum()) * size * size) // max(int(part.sum()), 1)
    return total


def decode(header: stream.Header, payload: bytes, format: PixelFormat) -> Samples:  # noqa: A002
    """Read the payload of an adaptive code; see `Codec.decode`."""
    shape = (header.rows, header.columns)
    buffer = np.frombuffer(payload, dtype=np.uint8)
    coder, padding, values = read_padding(header, format, buffer)
    cells = np.where(_coded(shape, padding), 0, tree.EMPTY).astype(np.uint8)
    coder = tree.decode_tree(cells, new_states(contexts.CONTEXTS), buffer, coder)
    if coder[0] > len(buffer) + 4:
        raise CorruptCode("a tiled code ends early")
    tiles = tree.tiles_of(cells)
    count = sum(16 << (2 * int(kind)) for kind in tiles[:, 0])
    lookup, _, _ = _tables()
    tables = tuple(transform.basis(TRANSFORMS[header.transform], size) for size in SIZES)
    results = []
    weighting = WEIGHTINGS[header.weighting]
    for plane, by_size in enumerate(_plane_steps(weighting, header.step, header.channels)):
        found = np.zeros(count, np.int32)
        ends = np.zeros(len(tiles), np.int32)
        states, weights = new_states(contexts.CONTEXTS), mixing.new_weights(contexts.WEIGHT_ROWS)
        work = around.new_work(cells.shape, len(tiles), count)
        coder, readable = levels.decode_tiles(found, ends, tiles, lookup, states, weights, work, buffer, coder)
        if not readable:
            raise CorruptCode("a tiled code ends early or holds a level out of range")
        leaves.dequantise_tiles(found, tiles, ends, by_size, *header.shifts[2 * plane : 2 * plane + 2])
        whole = planes.padded_shape(shape, contexts.LARGEST)
        results.append(leaves.inverse_tiles(found, tiles, ends, tables, whole))
    if coder[0] != len(buffer) + 4:
        raise CorruptCode("a tiled code holds more or fewer bytes than its levels take")
    samples = planes.from_planes(results, header.centres, format, shape)
    restore_padding(samples, header, padding, values)
    return samples
