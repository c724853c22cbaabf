"""From a raster to a code of tiles chosen over the frame, and back."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile import context, planes, steps, stream, transform
from safecheck.codecs.tile.adaptive import around, contexts, drawing, leaves, levels, mixing, partition, tree
from safecheck.codecs.tile.coding import Padding, read_padding, restore_padding, write_padding
from safecheck.codecs.tile.entropy import Coder, finish_encoding, new_states
from safecheck.codecs.tile.levels import WORST_BYTES
from safecheck.codecs.tile.settings import ADAPTIVE_VERSION, SIZES, TRANSFORMS, WEIGHTINGS
from safecheck.errors import CorruptCode
from safecheck.frames import Mask, PixelFormat, Raster, Samples, SizeBasis

__all__ = [
    "Analysis",
    "Partition",
    "analyse",
    "decode",
    "exact",
    "fixed_bytes",
    "partition_at",
    "relative_steps",
    "write",
    "write_planes",
]

STEPS_TOGETHER = 128
"""Tiles are chosen once for so many places of the grid of steps, an octave."""
DRAWING_SHARE = 32
"""A drawing may take the frame's size over this."""
SCREENED = 16
"""Of so many tiles one is held against the raster first."""
SWEEPS = 4
"""How often what is filled is smoothed; more gains nothing here."""


@dataclass(frozen=True, slots=True, eq=False)
class Analysis:
    """A raster's transform coefficients at every size and all else that does not depend on the step."""

    raster: Raster
    transform: str
    weighting: str
    centres: tuple[int, ...]
    coded: tuple[npt.NDArray[np.uint8], ...]
    """1 for each tile of each size that holds a coded pixel: (tile rows, tile columns)."""
    coefficients: tuple[tuple[npt.NDArray[np.int32], ...], ...]
    """Of each plane and size: (tiles, size * size), in `transform.scan_order`."""
    padding: Padding
    """With the drawing behind it, where there is one."""
    drawn: bool
    """Whether there is one."""
    hidden: Mask | None
    """Pixels that the transform need not give back: padding and drawing."""


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
def relative_steps(weighting: str, size: int, chroma: bool) -> npt.NDArray[np.float64]:
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


def _coded_by_size(coded: npt.NDArray[np.uint8]) -> tuple[npt.NDArray[np.uint8], ...]:
    """1 for each tile of each size that holds a coded cell: (tile rows, tile columns)."""
    found = [coded]
    for _ in SIZES[1:]:
        rows = found[-1][0::2] | found[-1][1::2]
        found.append(np.ascontiguousarray(rows[:, 0::2] | rows[:, 1::2]))
    return tuple(found)


# A frame meets the same codec at several ratios, one after the other: the last analysis serves them all.
@functools.lru_cache(maxsize=1)
def analyse(raster: Raster, name: str, weighting: str) -> Analysis:
    """Transform a raster at every size, once for all steps; a raster is told from another by identity."""
    drawn, written = _write_exact(raster)
    hidden = _hidden(raster.padding, drawn)
    centres = planes.centre(raster.samples, hidden)
    filled = planes.to_planes(raster.samples, hidden, centres, contexts.LARGEST, SWEEPS)
    coefficients = tuple(
        tuple(transform.forward(plane, transform.basis(name, size)) for size in SIZES) for plane in filled
    )
    coded = _coded_by_size(_coded(raster.shape, hidden))
    return Analysis(raster, name, weighting, centres, coded, coefficients, written, drawn is not None, hidden)


def _write_exact(raster: Raster) -> tuple[drawing.Drawing | None, Padding]:
    """Padding, and behind it what is drawn, unless that takes more than it may."""
    padding = write_padding(raster)
    drawn = drawing.find(raster)
    if drawn is None:
        return None, padding
    done = len(padding.written)
    buffer = np.empty(done + 2 * raster.pixels + 1024, np.uint8)
    buffer[:done] = np.frombuffer(padding.written, np.uint8)
    coder = drawing.write(drawn, raster.format.bits_stored, buffer, padding.coder)
    if DRAWING_SHARE * (coder[0] - done) > raster.size_bytes(SizeBasis.BITS_STORED):
        return None, padding
    return drawn, Padding(padding.kind, padding.values, buffer[: coder[0]].tobytes(), coder)


def _hidden(padding: Mask | None, drawn: drawing.Drawing | None) -> Mask | None:
    """Pixels that the transform need not give back."""
    if drawn is None:
        return padding
    return drawn.covered if padding is None else padding | drawn.covered


def _coded(shape: tuple[int, int], hidden: Mask | None) -> npt.NDArray[np.uint8]:
    whole = planes.padded_shape(shape, contexts.LARGEST)
    coded = np.zeros((whole[0] // tree.CELL, whole[1] // tree.CELL), np.uint8)
    rows, columns = (side // tree.CELL for side in planes.padded_shape(shape, tree.CELL))
    coded[:rows, :columns] = planes.used_tiles(shape, hidden, tree.CELL).reshape(rows, columns)
    return coded


def _costs(analysis: Analysis, steps_of_planes: list[npt.NDArray[np.float64]], kind: int) -> npt.NDArray[np.int64]:
    """What tiles of a size cost, over all planes: (tile rows, tile columns), 0 where nothing is coded."""
    coded = analysis.coded[kind]
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
    cells = np.empty_like(analysis.coded[0])
    partition.choose(*costs, analysis.coded[0], cells)
    tiles = tree.tiles_of(cells)
    values = tuple(leaves.gather(own, tiles, cells.shape[1]) for own in analysis.coefficients)
    return Partition(cells, tiles, values)


def partition_at(analysis: Analysis, step: int) -> Partition:
    """Tiles chosen for the group of steps that holds a step of an index."""
    return _partition(analysis, (step + STEPS_TOGETHER // 2) // STEPS_TOGETHER)


def fixed_bytes(analysis: Analysis) -> int:
    """Bytes that do not depend on the step: header, mask, padding values and drawing."""
    return stream.HEADER_BYTES + len(analysis.padding.written)


def exact(analysis: Analysis, code: bytes) -> bool:
    """Whether a code of this raster gives every sample back, told without reading its payload."""
    raster = analysis.raster
    header, _ = stream.read(code, raster.format, raster.shape)
    chosen = partition_at(analysis, header.step)
    # Some of the tiles mostly say no already.
    return _agree(analysis, chosen, chosen.tiles[::SCREENED], header) and _agree(analysis, chosen, chosen.tiles, header)


def _agree(analysis: Analysis, chosen: Partition, tiles: npt.NDArray[np.int32], header: stream.Header) -> bool:
    """Whether all samples of some tiles come back."""
    raster = analysis.raster
    results = []
    by_plane = _plane_steps(analysis.weighting, header.step, header.channels)
    whole = planes.padded_shape(raster.shape, contexts.LARGEST)
    for plane, (values, by_size) in enumerate(zip(chosen.values, by_plane, strict=True)):
        found, ends = np.empty_like(values), np.zeros(len(tiles), dtype=np.int32)
        leaves.quantise_tiles(values, tiles, by_size, _tables()[2], found, ends)
        leaves.dequantise_tiles(found, tiles, ends, by_size, *header.shifts[2 * plane : 2 * plane + 2])
        results.append(leaves.inverse_tiles(found, tiles, ends, _bases(analysis.transform), whole))
    wrong = planes.from_planes(results, analysis.centres, raster.format, raster.shape) != raster.samples
    asked = np.zeros(whole, np.bool_)
    for kind, row, column, _ in tiles:
        asked[4 * row : 4 * (row + (1 << kind)), 4 * column : 4 * (column + (1 << kind))] = True
    asked = asked[: raster.shape[0], : raster.shape[1]]
    return not wrong[asked if analysis.hidden is None else asked & ~analysis.hidden].any()


def _bases(name: str) -> tuple[npt.NDArray[np.float64], ...]:
    return tuple(transform.basis(name, size) for size in SIZES)


def write(analysis: Analysis, step: int) -> bytes:
    """Quantise and code at the step of an index; equal arguments give equal bytes on every processor."""
    raster = analysis.raster
    chosen = partition_at(analysis, step)
    buffer, coder, shifts = write_planes(analysis, chosen, step, thin=0)
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
        drawn=int(analysis.drawn),
    )
    return stream.write(header, buffer[: finish_encoding(buffer, coder)].tobytes())


def write_planes(
    analysis: Analysis, chosen: Partition, step: int, thin: int
) -> tuple[npt.NDArray[np.uint8], Coder, list[int]]:
    """Quantise and code all planes; buffer, encoder behind them and quantiser's shifts."""
    found = np.empty_like(chosen.values[0])
    ends = np.zeros(len(chosen.tiles), dtype=np.int32)
    coder, done = analysis.padding.coder, len(analysis.padding.written)
    buffer = np.empty(
        done + WORST_BYTES * (contexts.LARGEST**2 + 2) + 2 * chosen.cells.size + 2 * found.size,
        np.uint8,
    )
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


def decode(header: stream.Header, payload: bytes, format: PixelFormat) -> Samples:  # noqa: A002
    """Read the payload of an adaptive code; see `Codec.decode`."""
    shape = (header.rows, header.columns)
    buffer = np.frombuffer(payload, dtype=np.uint8)
    coder, padding, values = read_padding(header, format, buffer)
    drawn = None
    if header.drawn:
        coder, drawn = drawing.read(shape, format, buffer, coder)
    hidden = _hidden(padding, drawn)
    cells = np.where(_coded(shape, hidden), 0, tree.EMPTY).astype(np.uint8)
    coder = tree.decode_tree(cells, new_states(contexts.CONTEXTS), buffer, coder)
    if coder[0] > len(buffer) + 4:
        raise CorruptCode("a tiled code ends early")
    tiles = tree.tiles_of(cells)
    count = sum(16 << (2 * int(kind)) for kind in tiles[:, 0])
    lookup, _, _ = _tables()
    tables = _bases(TRANSFORMS[header.transform])
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
    if drawn is not None:
        drawing.restore(samples, drawn, format)
    restore_padding(samples, header, padding, values)
    return samples
