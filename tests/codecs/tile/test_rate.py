from __future__ import annotations

import numpy as np
import pytest

from safecheck.codecs.tile import coding, rate
from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.steps import nearest_step
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs.tile import real_frames


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "mr-shoulder", "cr-leg"])
def test_a_sample_of_the_tiles_judges_the_size_within_some_per_cent(name: str) -> None:
    # Computed from the stated definition: the whole code less what does not depend on the step.
    analysis = coding.analyse(real_frames.grey(name), "cosine", "flat", 8)
    for step in (4.0, 16.0):
        whole = len(coding.write(analysis, nearest_step(step))) - coding.fixed_bytes(analysis)
        assert coding.sampled_bytes(analysis, nearest_step(step)) == pytest.approx(whole, rel=0.04)


def test_a_sample_is_not_taken_of_few_tiles_or_of_none_that_is_coded() -> None:
    form = PixelFormat(16, 12, False, "MONOCHROME2")
    few = coding.analyse(Raster(np.zeros((64, 64), np.uint16), form), "cosine", "flat", 8)
    assert coding.sampled_bytes(few, 100) is None
    padded = Raster(np.zeros((512, 512), np.uint16), form, np.ones((512, 512), np.bool_))
    assert coding.sampled_bytes(coding.analyse(padded, "cosine", "flat", 8), 100) is None


def test_the_sample_saves_encodes() -> None:
    raster = real_frames.grey("ct")
    target = raster.size_bytes(SizeBasis.BITS_STORED) / 10
    analysis = coding.analyse(raster, "cosine", "flat", 8)
    counts, fixed_bytes = coding.counts(analysis), coding.fixed_bytes(analysis)

    def write(step: int) -> bytes:
        return coding.write(analysis, step)

    _, code, without = rate.search(write, lambda _: None, counts, fixed_bytes, target)
    with_sample = Tiled().encode_to_size(raster, target)
    assert abs(len(with_sample.code) - target) <= 0.01 * target >= abs(len(code) - target)
    assert with_sample.encodes == 1 < without
