from __future__ import annotations

import numpy as np
import pytest

from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.settings import SIZES, TRANSFORMS
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract
from tests.codecs.tile import plain_decoder, real_frames


def check(codec: Tiled, raster: Raster) -> None:
    code = codec.encode(raster)
    expected = plain_decoder.decode(code).reshape(raster.samples.shape)
    assert np.array_equal(codec.decode(code, raster.format, raster.shape), expected)


@pytest.mark.parametrize("step", [0.125, 3.0, 60.0])
@pytest.mark.parametrize("transform", TRANSFORMS)
@pytest.mark.parametrize("size", SIZES)
def test_a_decoder_written_from_the_document_reads_the_same(size: int, transform: str, step: float) -> None:
    whole = real_frames.grey("mr-small")
    raster = Raster(whole.samples[5:42, 9:60], whole.format)
    check(Tiled(size, transform, "perceptual" if step == 3 else "flat", step), raster)


@pytest.mark.parametrize("several", [False, True], ids=["one-value", "several-values"])
@pytest.mark.parametrize("colour", [False, True], ids=["grey", "colour"])
def test_padding_and_colour_are_read_the_same(colour: bool, several: bool) -> None:
    form = PixelFormat(16, 12, True, "RGB" if colour else "MONOCHROME2")
    samples = contract.raster(form, (45, 38), "slopes").samples.copy()
    rows, columns = np.mgrid[:45, :38]
    padding = (rows - 22) ** 2 + (columns - 17) ** 2 > 300
    padding[3:5, 30] = False
    samples[padding] = -2000
    if several:
        samples[padding & (rows % 3 == 0)] = -1999
    raster = Raster(samples, form, padding)
    for weighting in ("flat", "perceptual"):
        check(Tiled(8, "cosine", weighting, 25.0), raster)


@pytest.mark.parametrize("shape", [(1, 1), (1, 9), (17, 2)])
def test_small_frames_are_read_the_same(shape: tuple[int, int]) -> None:
    form = PixelFormat(16, 16, False, "MONOCHROME2")
    check(Tiled(16, "cosine", "flat", 0.3), contract.raster(form, shape, "noise"))
