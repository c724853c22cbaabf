"""The codec `tiled`: its settings, and the doors to compiled code, which loads on first use."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from safecheck.codecs.base import EXEMPT_BYTES, RATE_TOLERANCE, Encoded, Reached, Settings
from safecheck.codecs.tile.settings import BITSTREAM_VERSION, SIZES, TRANSFORMS, WEIGHTINGS
from safecheck.codecs.tile.steps import nearest_step, step_at
from safecheck.errors import CannotEncode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["Tiled"]

LONGEST_SIDE = 65535
MOST_PIXELS = 1 << 28
EXACT_BELOW_STEP = 1.0
"""Above this step no code is ever checked for being exact."""


@dataclass(frozen=True, slots=True)
class Tiled:
    """Block transform, dead-zone quantiser and context coding; an analysis codec, not an archive encoder."""

    name: ClassVar[str] = "tiled"
    archive_can_write: ClassVar[bool] = False
    reversible: ClassVar[bool] = False

    size: int = 8
    """Tile size in pixels, one of `SIZES`."""
    transform: str = "cosine"
    """One of `TRANSFORMS`."""
    weighting: str = "flat"
    """``flat``: error in the image's own unit, the same at all frequencies; ``perceptual``: ITU-T T.81 Annex K."""
    step: float = 1.0
    """Quantiser step in stored units, above 0; moved to the nearest of the codec's grid (ratios of 2**(1/128))."""

    def __post_init__(self) -> None:
        """Check values; move the step to the grid, so that equal codes have equal settings."""
        for value, choices, what in (
            (self.size, SIZES, "size"),
            (self.transform, TRANSFORMS, "transform"),
            (self.weighting, WEIGHTINGS, "weighting"),
        ):
            if value not in choices:
                raise ValueError(f"{what} is {value!r}, expected one of {', '.join(map(str, choices))}")
        if not 0 < self.step < float("inf"):
            raise ValueError(f"step is {self.step}, expected a positive number of stored units")
        object.__setattr__(self, "step", step_at(nearest_step(self.step)))

    @property
    def settings(self) -> Settings:
        """Size, step, transform and weighting."""
        return {"size": self.size, "step": self.step, "transform": self.transform, "weighting": self.weighting}

    @property
    def version(self) -> str:
        """Version of the bitstream."""
        return f"bitstream {BITSTREAM_VERSION}"

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """See `Codec.refuses`; every pixel format is taken."""
        if max(shape) > LONGEST_SIDE or shape[0] * shape[1] > MOST_PIXELS:
            limit = f"at most {LONGEST_SIDE} a side and {MOST_PIXELS} in all"
            return f"frame of {shape[0]} x {shape[1]} pixels, expected {limit}"
        return None

    def _check(self, raster: Raster) -> None:
        reason = self.refuses(raster.format, raster.shape)
        if reason:
            raise CannotEncode(reason)

    def encode(self, raster: Raster) -> bytes:
        """See `Codec.encode`."""
        self._check(raster)
        from safecheck.codecs.tile import coding

        analysis = coding.analyse(raster, self.transform, self.weighting, self.size)
        return coding.write(analysis, nearest_step(self.step))

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """See `Codec.decode`; the settings stand in the code."""
        from safecheck.codecs.tile import coding

        return coding.decode(code, format, shape)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """See `RatedCodec.encode_to_size`; the dial is the step."""
        self._check(raster)
        from safecheck.codecs.tile import coding, rate

        analysis = coding.analyse(raster, self.transform, self.weighting, self.size)
        index, code, encodes = rate.search(
            lambda step: coding.write(analysis, step),
            coding.counts(analysis),
            coding.fixed_bytes(analysis),
            target_bytes,
        )
        settings = {**self.settings, "step": step_at(index)}
        return Encoded(code, settings, self._reached(raster, code, index, target_bytes), encodes)

    def _reached(self, raster: Raster, code: bytes, index: int, target_bytes: float) -> Reached:
        may_be_exact = step_at(index) < EXACT_BELOW_STEP and len(code) <= target_bytes * (1 + RATE_TOLERANCE)
        if may_be_exact and np.array_equal(self.decode(code, raster.format, raster.shape), raster.samples):
            return Reached.REVERSIBLE_SMALLER
        if abs(len(code) - target_bytes) <= RATE_TOLERANCE * target_bytes:
            return Reached.ASKED
        if target_bytes < EXEMPT_BYTES:
            return Reached.SMALL_FRAME
        return Reached.CODEC_FLOOR if len(code) > target_bytes else Reached.CODEC_CEILING
