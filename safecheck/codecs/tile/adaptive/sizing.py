"""The step at which a code of chosen tiles has the asked size: predicted, sampled, then met."""

from __future__ import annotations

import functools

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile import context, planes, rate
from safecheck.codecs.tile.adaptive import coding, partition
from safecheck.codecs.tile.settings import SIZES

__all__ = ["search"]

COUNTED = 2
"""Place in `SIZES` of the tiles by which the first step is guessed."""
FIRST_SCALE = 1.1
"""How much more the first guess may take, since chosen tiles take less than those of one size; measured once."""
SAMPLED_FROM = 256
"""Fewer tiles are not sampled."""
SAMPLED_AGAIN = 12
"""Places on the grid of steps by which the first sample may move the step before another is taken."""
RICH_BITS = 2
"""Codes of more bits a coefficient than this keep nearer to what is predicted."""
USUAL = {True: 0.98, False: 0.94}
"""What a code, rich or not, takes of the bytes predicted, on most frames. Measured once on real frames."""
SAMPLE_SCALE = {True: 0.997, False: 0.986}
"""What a whole code, rich or not, takes of the sample's share, since contexts learn longer. Measured likewise."""
LEARNING = 220
"""Bytes that contexts take to learn beside, in a sample as in a whole code. Measured likewise."""


def _partition_counts(analysis: coding.Analysis, chosen: coding.Partition) -> npt.NDArray[np.int64]:
    """Expected magnitudes of all tiles and of every fourth: (2, bins)."""
    counts = np.zeros((2, rate.BINS), np.int64)
    places = np.zeros((len(SIZES), SIZES[-1] ** 2), np.int32)
    for plane, scale in enumerate(planes.PLANE_SCALES[analysis.raster.format.channels]):
        relative = np.ones(places.shape)
        for kind, size in enumerate(SIZES):
            relative[kind, : size * size] = coding.relative_steps(analysis.weighting, size, plane > 0) * scale
            places[kind, : size * size] = context.place_table(size)
        partition.tile_counts(chosen.values[plane], chosen.tiles, places, relative, counts)
    return counts


def search(analysis: coding.Analysis, target_bytes: float) -> tuple[int, bytes, int]:
    """Find the step whose code has the asked size; see `rate.search`."""
    wanted = target_bytes - coding.fixed_bytes(analysis)
    chosen = coding.partition_at(analysis, rate.step_for(_counts(analysis), wanted * FIRST_SCALE))
    counts = _partition_counts(analysis, chosen)
    rich = 8 * wanted > RICH_BITS * len(chosen.values[0]) * len(chosen.values)

    def share(step: int) -> float:
        """Bytes of a sample of the tiles, over what the counts predict of them."""
        _, coder, _ = coding.write_planes(analysis, coding.partition_at(analysis, step), step, thin=3)
        written = coder[0] - len(analysis.padding.written)
        predicted = max(rate.predicted_bytes(counts[1], step), 1)
        return float(max(written - LEARNING, written // 2) / predicted)

    def sample(asked: int) -> int | None:
        if len(chosen.tiles) < SAMPLED_FROM:
            return None
        step = rate.step_for(counts[0], wanted / USUAL[rich])
        found = share(step)
        again = rate.step_for(counts[0], (wanted - LEARNING) / (found * SAMPLE_SCALE[rich]))
        if abs(again - step) > SAMPLED_AGAIN:
            found = share(again)
        return int(found * SAMPLE_SCALE[rich] * rate.predicted_bytes(counts[0], asked)) + LEARNING

    put = functools.partial(coding.write, analysis)
    return rate.search(put, sample, counts[0], coding.fixed_bytes(analysis), target_bytes)


@functools.lru_cache(maxsize=1)
def _counts(analysis: coding.Analysis) -> npt.NDArray[np.int64]:
    """Expected magnitudes of tiles of one size, for a first guess of the step."""
    total = np.zeros(rate.BINS, dtype=np.int64)
    size = SIZES[COUNTED]
    coded = analysis.coded[COUNTED]
    for plane, scale in enumerate(planes.PLANE_SCALES[analysis.raster.format.channels]):
        part = rate.magnitude_counts(
            analysis.coefficients[plane][COUNTED],
            coded.ravel(),
            coded.shape[1],
            context.place_table(size),
            coding.relative_steps(analysis.weighting, size, plane > 0) * scale,
        )
        total += part * (int(coded.sum()) * size * size) // max(int(part.sum()), 1)
    return total
