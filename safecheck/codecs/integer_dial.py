"""A dial of whole numbers: the two settings around an asked size, as a code and its neighbour."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from safecheck.codecs import search
from safecheck.codecs.base import Codec, Encoded, Reached
from safecheck.codecs.reversible import best_reversible
from safecheck.frames import Raster

__all__ = ["WholeDial", "encode_around"]


@dataclass(frozen=True, slots=True)
class WholeDial:
    """A dial of whole numbers."""

    lowest: int
    highest: int
    start: int
    """Setting tried first."""
    rising: bool
    """Whether turning up makes the code larger."""
    guess: Callable[[search.Step], float] | None = None
    """First code -> setting at which the asked size is expected; None where nothing is known of it."""


def encode_around(codec: Callable[[int], Codec], raster: Raster, target_bytes: float, dial: WholeDial) -> Encoded:
    """Write the raster with the two settings around the asked size.

    Parameters
    ----------
    codec
        Setting -> codec.
    raster
        What to write.
    target_bytes
        Positive.
    dial
        Range and direction.

    Returns
    -------
    Encoded
        The setting whose code is the larger one within the asked size, with its neighbour, above that size. One code
        alone at an end of the dial.

    Raises
    ------
    ValueError
        If ``target_bytes`` is not positive and finite.
    CannotEncode, CodecUnavailable
        As the codec's `encode`.
    """
    if not 0 < target_bytes < math.inf:
        raise ValueError(f"asked for {target_bytes} bytes, expected a positive number")
    codes: dict[int, bytes] = {}

    def encode(setting: int) -> bytes:
        codes[setting] = codec(setting).encode(raster)
        return codes[setting]

    steps = search.bracket(
        encode, target_bytes, dial.lowest, dial.highest, dial.start, rising=dial.rising, guess=dial.guess
    )
    first = steps[0]
    settings = codec(first.dial).settings
    if len(steps) == 1:
        end: search.End = "floor" if len(first.code) > target_bytes else "ceiling"
        reached = search.tell(end, target_bytes, lambda: best_reversible(raster).size_bytes)
        return Encoded(first.code, settings, reached, len(codes))
    second = steps[1]
    beside = Encoded(second.code, codec(second.dial).settings, Reached.BRACKET, len(codes))
    return Encoded(first.code, settings, Reached.BRACKET, len(codes), beside)
