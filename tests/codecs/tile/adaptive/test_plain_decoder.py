from __future__ import annotations

import numpy as np
import pytest

from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.settings import TRANSFORMS
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract
from tests.codecs.tile import real_frames
from tests.codecs.tile.adaptive import plain_decoder


def check(codec: Tiled, raster: Raster) -> bytes:
    code = codec.encode(raster)
    expected = plain_decoder.decode(code).reshape(raster.samples.shape)
    assert np.array_equal(codec.decode(code, raster.format, raster.shape), expected)
    return code


@pytest.mark.parametrize("step", [0.125, 3.0, 60.0])
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_a_decoder_written_from_the_document_reads_the_same(transform: str, step: float) -> None:
    whole = real_frames.grey("mr-small")
    raster = Raster(whole.samples[:, :60], whole.format)
    check(Tiled("adaptive", transform, "perceptual" if step == 3 else "flat", step), raster)


@pytest.mark.parametrize("several", [False, True], ids=["one-value", "several-values"])
@pytest.mark.parametrize("colour", [False, True], ids=["grey", "colour"])
def test_padding_and_colour_are_read_the_same(colour: bool, several: bool) -> None:
    form = PixelFormat(16, 12, True, "RGB" if colour else "MONOCHROME2")
    samples = contract.raster(form, (45, 78), "slopes").samples.copy()
    rows, columns = np.mgrid[:45, :78]
    padding = (rows - 22) ** 2 + (columns - 37) ** 2 > 600
    padding[3:5, 60] = False
    samples[padding] = -2000
    if several:
        samples[padding & (rows % 3 == 0)] = -1999
    for weighting in ("flat", "perceptual"):
        check(Tiled("adaptive", "cosine", weighting, 25.0), Raster(samples, form, padding))


@pytest.mark.parametrize("step", [2.0, 40.0])
@pytest.mark.parametrize("colour", [False, True], ids=["grey", "colour"])
def test_lettering_is_read_the_same(colour: bool, step: float) -> None:
    whole = real_frames.ultrasound() if colour else real_frames.ultrasound_green()
    raster = Raster(np.ascontiguousarray(whole.samples[20:115, 10:170]), whole.format)
    code = check(Tiled("adaptive", step=step), raster)
    assert code[46] == 1


@pytest.mark.parametrize("shape", [(1, 1), (1, 9), (67, 2)])
def test_small_frames_are_read_the_same(shape: tuple[int, int]) -> None:
    form = PixelFormat(16, 16, False, "MONOCHROME2")
    check(Tiled("adaptive", step=0.3), contract.raster(form, shape, "noise"))
