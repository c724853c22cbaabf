from __future__ import annotations

import contextlib
import time
from collections import Counter

import numpy as np
import pytest

from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.stream import HEADER_BYTES
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract
from tests.codecs.tile import real_frames
from tests.codecs.tile.test_stream import resealed

GREY = PixelFormat(16, 12, False, "MONOCHROME2")
COLOUR = PixelFormat(8, 8, True, "RGB")


def rasters() -> dict[str, tuple[Tiled, Raster]]:
    rng = np.random.default_rng(3)
    padded = contract.raster(GREY, (64, 70), "slopes").samples.copy()
    padding = rng.random((64, 70)) < 0.2
    padded[padding] = rng.integers(0, 3, np.count_nonzero(padding))
    letters = np.ascontiguousarray(real_frames.ultrasound_green().samples[20:115, 10:170])
    return {
        "grey": (Tiled(step=4.0), contract.raster(GREY, (48, 50), "slopes")),
        "noise": (Tiled(16, "walsh-hadamard", "flat", 300.0), contract.raster(GREY, (40, 40), "noise")),
        "padding": (Tiled(step=20.0), Raster(padded, GREY, padding)),
        "colour": (Tiled(64, "fourier", "perceptual", 2.0), contract.raster(COLOUR, (40, 70), "slopes")),
        "adaptive": (Tiled("adaptive", step=4.0), contract.raster(GREY, (48, 50), "slopes")),
        "adaptive lettering": (Tiled("adaptive", step=30.0), Raster(letters, real_frames.ultrasound_green().format)),
        "adaptive noise": (Tiled("adaptive", "walsh-hadamard", step=300.0), contract.raster(GREY, (40, 70), "noise")),
        "adaptive padding": (Tiled("adaptive", step=20.0), Raster(padded, GREY, padding)),
        "adaptive colour": (
            Tiled("adaptive", "fourier", "perceptual", 2.0),
            contract.raster(COLOUR, (40, 70), "slopes"),
        ),
    }


NAMES = (
    "grey",
    "noise",
    "padding",
    "colour",
    "adaptive",
    "adaptive lettering",
    "adaptive noise",
    "adaptive padding",
    "adaptive colour",
)


@pytest.mark.parametrize("name", NAMES)
def test_corruptions_are_told_or_give_the_declared_shape(name: str) -> None:
    # 2,500 for each of nine kinds of code, five of them adaptive; of every second one the checksum is computed again.
    codec, before = rasters()[name]
    code = codec.encode(before)
    usual = _seconds(codec, code, before)
    seen: Counter[str] = Counter()
    for number, damaged in enumerate(contract.corruptions(code, 2500, seed=len(code))):
        sealed = number % 2 == 1
        if sealed and len(damaged) >= HEADER_BYTES:
            # The length of the payload stands before the checksum.
            length = (len(damaged) - HEADER_BYTES).to_bytes(4, "little")
            damaged = resealed(damaged[: HEADER_BYTES - 8] + length + damaged[HEADER_BYTES - 4 :])
        began = time.perf_counter()
        try:
            samples = codec.decode(damaged, before.format, before.shape)
        except CorruptCode:
            seen["told"] += 1
        else:
            assert samples.shape == before.samples.shape
            assert samples.dtype == before.samples.dtype
            assert before.format.lowest <= int(samples.min())
            assert int(samples.max()) <= before.format.highest
            assert sealed or damaged == code or np.array_equal(samples, codec.decode(code, before.format, before.shape))
            seen["decoded"] += 1
        if time.perf_counter() - began > 10 * usual:
            assert min(_seconds(codec, damaged, before) for _ in range(3)) <= 10 * usual
    assert seen["told"] >= 1250
    assert seen["decoded"] > 0


def _seconds(codec: Tiled, code: bytes, before: Raster) -> float:
    shortest = float("inf")
    for _ in range(5):
        began = time.perf_counter()
        with contextlib.suppress(CorruptCode):
            codec.decode(code, before.format, before.shape)
        shortest = min(shortest, time.perf_counter() - began)
    return shortest
