"""From a raster to a code and back: the parts put together."""

from __future__ import annotations

import functools
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile import context, mask, planes, quantise, rate, steps, stream, transform
from safecheck.codecs.tile.entropy import WIDE, Coder, finish_encoding, new_states, start_decoding
from safecheck.codecs.tile.levels import WORST_BYTES, decode_levels, encode_levels, new_scratch
from safecheck.codecs.tile.settings import TRANSFORMS, WEIGHTINGS
from safecheck.errors import CorruptCode
from safecheck.frames import Mask, PixelFormat, Raster, Samples

__all__ = [
    "Analysis",
    "Padding",
    "analyse",
    "counts",
    "decode",
    "fixed_bytes",
    "read_padding",
    "restore_padding",
    "sampled_bytes",
    "write",
    "write_padding",
]

START: Coder = (0, 0, WIDE)
"""An encoder before its first bit."""
THIN = 3
"""A sample takes the tiles whose column and twice the row sum to a multiple of 4."""
SAMPLE_SCALE = 253
"""256 times what a whole code takes of the sample's share: contexts learn longer. Measured once on real frames."""


@dataclass(frozen=True, slots=True)
class Padding:
    """What a code says of padding, the same at every step."""

    kind: int
    """0: none; 1: one value a channel; 2: several values."""
    values: tuple[int, int, int]
    """Counted from the format's least value, where `kind` is 1."""
    written: bytes
    """First bytes of the payload."""
    coder: Coder
    """The encoder behind them."""


@dataclass(frozen=True, slots=True, eq=False)
class Analysis:
    """A raster's transform coefficients and all else that does not depend on the step."""

    raster: Raster
    transform: str
    weighting: str
    size: int
    centres: tuple[int, ...]
    used: npt.NDArray[np.uint8]
    """1 for each tile that is coded: (tiles,)."""
    coefficients: tuple[npt.NDArray[np.int32], ...]
    """Of each plane: (tiles, size * size), in `transform.scan_order`."""
    padding: Padding

    @property
    def across(self) -> int:
        """Tiles in a row of tiles."""
        return -(-self.raster.shape[1] // self.size)


# A frame meets the same codec at several ratios, one after the other: the last analysis serves them all.
@functools.lru_cache(maxsize=1)
def analyse(raster: Raster, name: str, weighting: str, size: int) -> Analysis:
    """Transform a raster, once for all steps; a raster is told from another by identity, and never changes."""
    padding = raster.padding
    centres = planes.centre(raster.samples, padding)
    table = transform.basis(name, size)
    values = planes.to_planes(raster.samples, padding, centres, size)
    coefficients = tuple(transform.forward(plane, table) for plane in values)
    used = planes.used_tiles(raster.shape, padding, size)
    return Analysis(raster, name, weighting, size, centres, used, coefficients, write_padding(raster))


def _tables(size: int) -> tuple[npt.NDArray[Any], npt.NDArray[Any], npt.NDArray[Any], npt.NDArray[Any]]:
    return (
        context.place_table(size),
        context.zone_table(size),
        context.class_table(),
        context.higher_table(size),
    )


def _plane_steps(name: str, size: int, step: int, channels: int) -> list[npt.NDArray[np.float64]]:
    """Steps of each plane, in scan order and coefficient units."""
    value = steps.step_at(step)
    order = transform.scan_order(size)
    return [
        steps.coefficient_steps(value, scale, steps.weights(name, size, plane > 0), order)
        for plane, scale in enumerate(planes.PLANE_SCALES[channels])
    ]


def _padding_values(raster: Raster, padding: Mask) -> npt.NDArray[np.int32]:
    """Values of padding pixels counted from the format's least: (pixels, channels)."""
    pixels = raster.samples[padding].astype(np.int32) - raster.format.lowest
    return pixels.reshape(len(pixels), raster.format.channels)


def write_padding(raster: Raster) -> Padding:
    """Code mask and values of padding without loss, once for all steps."""
    if raster.padding is None:
        return Padding(0, (0, 0, 0), b"", START)
    buffer = np.empty(6 * raster.pixels * raster.format.channels + 1024, dtype=np.uint8)
    states = new_states(mask.MASK_CONTEXTS)
    coder = mask.encode_mask(raster.padding.view(np.uint8), states, buffer, START)
    values = _padding_values(raster, raster.padding)
    if (values == values[0]).all():
        first = [int(value) for value in values[0]] + [0, 0]
        return Padding(1, (first[0], first[1], first[2]), buffer[: coder[0]].tobytes(), coder)
    coder = mask.encode_padding_values(values, raster.format.bits_stored, states, buffer, coder)
    return Padding(2, (0, 0, 0), buffer[: coder[0]].tobytes(), coder)


@functools.lru_cache(maxsize=1)
def counts(analysis: Analysis) -> npt.NDArray[np.int64]:
    """Expected magnitudes counted for `rate.search`, over all planes, scaled to all tiles."""
    total = np.zeros(rate.BINS, dtype=np.int64)
    size = analysis.size
    places = context.place_table(size)
    all_values = int(analysis.used.sum()) * size * size
    for plane, scale in enumerate(planes.PLANE_SCALES[analysis.raster.format.channels]):
        relative = steps.weights(analysis.weighting, size, plane > 0).ravel()[transform.scan_order(size)]
        part = rate.magnitude_counts(
            analysis.coefficients[plane], analysis.used, analysis.across, places, relative * scale
        )
        total += part * all_values // max(int(part.sum()), 1)
    total.flags.writeable = False
    return total


def fixed_bytes(analysis: Analysis) -> int:
    """Bytes that do not depend on the step: header, mask and padding values."""
    return stream.HEADER_BYTES + len(analysis.padding.written)


def write(analysis: Analysis, step: int) -> bytes:
    """Quantise and code at the step of an index; equal arguments give equal bytes on every processor."""
    raster, size = analysis.raster, analysis.size
    buffer, coder, shifts = _write_planes(analysis, step, thin=0)
    centres = [*analysis.centres, 0, 0]
    header = stream.Header(
        transform=TRANSFORMS.index(analysis.transform),
        weighting=WEIGHTINGS.index(analysis.weighting),
        size=size,
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
    )
    return stream.write(header, buffer[: finish_encoding(buffer, coder)].tobytes())


def sampled_bytes(analysis: Analysis, step: int) -> int | None:
    """Bytes of the levels at the step of an index, judged by every fourth tile; None where tiles are too few."""
    if len(analysis.used) < rate.THIN_FROM:
        return None
    tiles = np.arange(len(analysis.used))
    sampled = int(analysis.used[((tiles % analysis.across + 2 * (tiles // analysis.across)) & THIN) == 0].sum())
    if not sampled:
        return None
    _, coder, _ = _write_planes(analysis, step, thin=THIN)
    written = coder[0] - len(analysis.padding.written)
    return written * int(analysis.used.sum()) * SAMPLE_SCALE // (sampled << 8)


def _write_planes(analysis: Analysis, step: int, thin: int) -> tuple[npt.NDArray[np.uint8], Coder, list[int]]:
    """Quantise and code all planes, or a sample of their tiles; buffer, encoder behind them and quantiser's shifts."""
    size = analysis.size
    levels = np.empty_like(analysis.coefficients[0])
    ends = np.zeros(len(analysis.used), dtype=np.int32)
    coder, done = analysis.padding.coder, len(analysis.padding.written)
    buffer = np.empty(done + WORST_BYTES * (size * size + 2) + 2 * levels.size, dtype=np.uint8)
    buffer[:done] = np.frombuffer(analysis.padding.written, dtype=np.uint8)
    shifts = [0] * 6
    steps_of_planes = _plane_steps(analysis.weighting, size, step, analysis.raster.format.channels)
    for plane, plane_steps in enumerate(steps_of_planes):
        coefficients = analysis.coefficients[plane]
        shifts[2 * plane : 2 * plane + 2] = quantise.quantise(coefficients, plane_steps, analysis.used, levels, ends)
        buffer, coder = _write_levels(analysis, levels, ends, buffer, coder, thin)
    return buffer, coder, shifts


def _write_levels(
    analysis: Analysis,
    levels: npt.NDArray[np.int32],
    ends: npt.NDArray[np.int32],
    buffer: npt.NDArray[np.uint8],
    coder: Coder,
    thin: int,
) -> tuple[npt.NDArray[np.uint8], Coder]:
    """Write one plane's levels, in a larger buffer where the first guess is too small."""
    # A carry may reach back into what stands before this plane, so a second try needs it as it was.
    before = buffer[: coder[0]].copy()
    while True:
        after, fits = encode_levels(
            levels,
            ends,
            analysis.used,
            analysis.across,
            _tables(analysis.size),
            new_states(context.CONTEXTS),
            new_scratch(*levels.shape),
            buffer,
            coder,
            thin,
        )
        if fits:
            return buffer, after
        larger = np.empty(2 * len(buffer) + WORST_BYTES * (analysis.size**2 + 2), dtype=np.uint8)
        larger[: coder[0]] = before
        buffer = larger


def read_padding(
    header: stream.Header,
    format: PixelFormat,  # noqa: A002
    buffer: npt.NDArray[np.uint8],
) -> tuple[Coder, Mask | None, npt.NDArray[np.int32]]:
    """Read mask and values (pixels or 1, channels); no mask where the frame has no padding."""
    coder = start_decoding(buffer)
    values = np.array([header.padding_values[: header.channels]], dtype=np.int32)
    if not header.padding:
        return coder, None, values
    found = np.zeros((header.rows, header.columns), dtype=np.uint8)
    states = new_states(mask.MASK_CONTEXTS)
    coder = mask.decode_mask(found, states, buffer, coder)
    if header.padding == 2:
        values = np.zeros((int(np.count_nonzero(found)), header.channels), dtype=np.int32)
        coder = mask.decode_padding_values(values, format.bits_stored, states, buffer, coder)
    return coder, found.view(np.bool_), values + format.lowest


def restore_padding(
    samples: Samples, header: stream.Header, padding: Mask | None, values: npt.NDArray[np.int32]
) -> None:
    """Put the values that `read_padding` gave back in their places."""
    if padding is None:
        return
    exact = values.astype(samples.dtype)
    if header.padding == 1:
        np.copyto(samples, exact[0], where=padding if samples.ndim == 2 else padding[..., None])
    else:
        samples[padding] = exact[:, 0] if samples.ndim == 2 else exact


def decode(header: stream.Header, payload: bytes, format: PixelFormat) -> Samples:  # noqa: A002
    """Read the payload of a code of one tile size; see `Codec.decode`."""
    shape = (header.rows, header.columns)
    buffer = np.frombuffer(payload, dtype=np.uint8)
    coder, padding, values = read_padding(header, format, buffer)
    size = header.size
    used = planes.used_tiles(shape, padding, size)
    whole = planes.padded_shape(shape, size)
    table = transform.basis(TRANSFORMS[header.transform], size)
    weighting = WEIGHTINGS[header.weighting]
    results = []
    for plane, plane_steps in enumerate(_plane_steps(weighting, size, header.step, header.channels)):
        levels = np.zeros((len(used), size * size), dtype=np.int32)
        states = new_states(context.CONTEXTS)
        ends = np.zeros(len(used), dtype=np.int32)
        scratch = new_scratch(*levels.shape)
        coder, readable = decode_levels(
            levels, ends, used, whole[1] // size, _tables(size), states, scratch, buffer, coder
        )
        if not readable:
            raise CorruptCode("a tiled code ends early or holds a level out of range")
        quantise.dequantise(levels, ends, plane_steps, *header.shifts[2 * plane : 2 * plane + 2])
        results.append(transform.inverse(levels, table, whole))
    if coder[0] != len(buffer) + 4:
        raise CorruptCode("a tiled code holds more or fewer bytes than its levels take")
    samples = planes.from_planes(results, header.centres, format, shape)
    restore_padding(samples, header, padding, values)
    return samples
