"""The codec `tiled`: its settings, and the doors to compiled code, which loads on first use."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import ClassVar

import numpy as np

from safecheck.codecs.base import EXEMPT_BYTES, RATE_TOLERANCE, Carriage, Encoded, Reached, Settings, admit
from safecheck.codecs.setting_values import choice, number
from safecheck.codecs.tile.settings import (
    ADAPTIVE,
    ADAPTIVE_VERSION,
    BITSTREAM_VERSION,
    SIZES,
    TRANSFORMS,
    WEIGHTINGS,
)
from safecheck.codecs.tile.steps import FINEST_STEP, STEPS, nearest_step, step_at
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["Tiled"]

LONGEST_SIDE = 65535
MOST_PIXELS = 1 << 28
EXACT_BELOW_STEP = 1.0
"""From this step on no code is checked for being exact."""
EXACT_GAP = 16
"""The coarsest exact step is sought to within so many places of the grid of steps (an eighth of an octave)."""


@dataclass(frozen=True, slots=True)
class Tiled:
    """Block transform, dead-zone quantiser and context coding; an analysis codec, not an archive encoder."""

    name: ClassVar[str] = "tiled"
    archive_can_write: ClassVar[bool] = False
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "step"

    size: int | str = 8
    """Tile size in pixels, one of `SIZES`, or `ADAPTIVE`: all of them, chosen over the frame."""
    transform: str = "cosine"
    """One of `TRANSFORMS`."""
    weighting: str = "flat"
    """``flat``: error in the image's own unit, the same at all frequencies; ``perceptual``: ITU-T T.81 Annex K."""
    step: float = 1.0
    """Quantiser step in stored units, 1/8 to 2**22; moved to the nearest of the codec's grid (ratios of 2**(1/128))."""

    def __post_init__(self) -> None:
        """Check values; move the step to the grid, so that equal codes have equal settings."""
        object.__setattr__(self, "size", choice("size", self.size, (*SIZES, ADAPTIVE)))
        object.__setattr__(self, "transform", choice("transform", self.transform, TRANSFORMS))
        object.__setattr__(self, "weighting", choice("weighting", self.weighting, WEIGHTINGS))
        step = number("step", self.step, FINEST_STEP, step_at(STEPS - 1))
        object.__setattr__(self, "step", step_at(nearest_step(step)))

    @property
    def settings(self) -> Settings:
        """Size, step, transform and weighting."""
        return {"size": self.size, "step": self.step, "transform": self.transform, "weighting": self.weighting}

    @property
    def version(self) -> str:
        """Version of the bitstream."""
        return f"bitstream {ADAPTIVE_VERSION if self.size == ADAPTIVE else BITSTREAM_VERSION}"

    @property
    def error_bound(self) -> int | None:
        """No promise."""
        return None

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Samples as they are."""
        return Carriage(format.bits_stored)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """See `Codec.refuses`; every pixel format is taken."""
        if max(shape) > LONGEST_SIDE or shape[0] * shape[1] > MOST_PIXELS:
            limit = f"at most {LONGEST_SIDE} a side and {MOST_PIXELS} in all"
            return f"frame of {shape[0]} x {shape[1]} pixels, expected {limit}"
        return None

    def encode(self, raster: Raster) -> bytes:
        """See `Codec.encode`."""
        admit(self, raster)
        return self._writer(raster)(nearest_step(self.step))

    def _writer(self, raster: Raster) -> Callable[[int], bytes]:
        """Analyse a raster; step index -> code."""
        if isinstance(self.size, str):
            from safecheck.codecs.tile.adaptive import coding as adaptive

            return partial(adaptive.write, adaptive.analyse(raster, self.transform, self.weighting))
        from safecheck.codecs.tile import coding

        return partial(coding.write, coding.analyse(raster, self.transform, self.weighting, self.size))

    def _search(self, raster: Raster, target_bytes: float) -> tuple[int, bytes, int]:
        """Step index, code and number of encodes."""
        if isinstance(self.size, str):
            from safecheck.codecs.tile.adaptive import coding as adaptive
            from safecheck.codecs.tile.adaptive import sizing

            return sizing.search(adaptive.analyse(raster, self.transform, self.weighting), target_bytes)
        from safecheck.codecs.tile import coding, rate

        analysis = coding.analyse(raster, self.transform, self.weighting, self.size)
        counts, fixed_bytes = coding.counts(analysis), coding.fixed_bytes(analysis)
        write, sample = partial(coding.write, analysis), partial(coding.sampled_bytes, analysis)
        return rate.search(write, sample, counts, fixed_bytes, target_bytes)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """See `Codec.decode`; the settings stand in the code."""
        from safecheck.codecs.tile import stream

        header, payload = stream.read(code, format, shape)
        if header.version == ADAPTIVE_VERSION:
            from safecheck.codecs.tile.adaptive import coding as adaptive

            return adaptive.decode(header, payload, format)
        from safecheck.codecs.tile import coding

        return coding.decode(header, payload, format)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """See `RatedCodec.encode_to_size`; the dial is the step.

        Where the asked size would take a step at which every sample comes back exact, the coarsest such step is
        sought and `reached` says that a reversible code is smaller.
        """
        admit(self, raster)
        index, code, encodes = self._search(raster, target_bytes)
        reached = Reached.ASKED
        if abs(len(code) - target_bytes) > RATE_TOLERANCE * target_bytes:
            too_large = len(code) > target_bytes
            at_end = self._writer(raster)(STEPS - 1 if too_large else 0)
            encodes += 1
            reached = _missed(len(at_end), target_bytes, too_large=too_large)
        if step_at(index) < EXACT_BELOW_STEP and self._exact(raster, code):
            write = self._writer(raster)
            low, high = index, nearest_step(EXACT_BELOW_STEP)
            while high - low > EXACT_GAP:
                middle = (low + high) // 2
                tried = write(middle)
                encodes += 1
                if self._exact(raster, tried):
                    low, code = middle, tried
                else:
                    high = middle
            index = low
            reached = Reached.REVERSIBLE_SMALLER if len(code) < target_bytes else reached
        return Encoded(code, {**self.settings, "step": step_at(index)}, reached, encodes)

    def _exact(self, raster: Raster, code: bytes) -> bool:
        if isinstance(self.size, str):
            from safecheck.codecs.tile.adaptive import coding as adaptive

            return adaptive.exact(adaptive.analyse(raster, self.transform, self.weighting), code)
        return np.array_equal(self.decode(code, raster.format, raster.shape), raster.samples)


def _missed(end_bytes: int, target_bytes: float, *, too_large: bool) -> Reached:
    """Say why a size was missed, from the code at the end of the dial on that side, exactness aside."""
    if too_large and end_bytes > target_bytes:
        return Reached.CODEC_FLOOR
    if not too_large and end_bytes < target_bytes:
        return Reached.CODEC_CEILING
    return Reached.SMALL_FRAME if target_bytes < EXEMPT_BYTES else Reached.COARSE_STEPS
