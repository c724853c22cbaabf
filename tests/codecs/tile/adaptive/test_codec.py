from __future__ import annotations

import hashlib
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from openjpeg.utils import decode, encode_array

from safecheck.codecs import registry
from safecheck.codecs.base import RATE_TOLERANCE, Reached
from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.settings import TRANSFORMS, WEIGHTINGS
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs import contract
from tests.codecs.tile import real_frames
from tests.codecs.tile.test_codec import FRAMES, GREY, back, noise, pattern


def adaptive(step: float = 1.0, transform: str = "cosine", weighting: str = "flat") -> Tiled:
    return Tiled("adaptive", transform, weighting, step)


def test_settings_give_an_equal_codec() -> None:
    codec = adaptive(17.3, "fourier", "perceptual")
    assert codec.settings["size"] == "adaptive"
    assert codec.version == "bitstream 2"
    contract.check_settings(codec)


@pytest.mark.parametrize("weighting", WEIGHTINGS)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_at_the_finest_step_samples_come_back(transform: str, weighting: str) -> None:
    largest = np.abs(back(adaptive(0.125, transform, weighting), noise((37, 70))).astype(int) - noise((37, 70)).samples)
    # A lone deviation by one in a smooth tile may lie below the dead zone; the perceptual table is coarser still.
    assert largest.max() <= (3 if weighting == "perceptual" else 1)


@pytest.mark.parametrize("signed", [False, True], ids=["unsigned", "signed"])
@pytest.mark.parametrize("bits", [1, 8, 12, 16])
@pytest.mark.parametrize("photometric", ["RGB", "MONOCHROME2"])
def test_every_depth_and_sign_comes_back_at_the_finest_step(bits: int, signed: bool, photometric: Any) -> None:
    form = PixelFormat(16, bits, signed, photometric)
    for kind in contract.KINDS:
        raster = contract.raster(form, (19, 33), kind)
        assert np.abs(back(adaptive(0.125), raster).astype(int) - raster.samples).max() <= (kind == "slopes")


@pytest.mark.parametrize("shape", [*contract.SHAPES, (130, 1), (64, 64), (63, 129)], ids=str)
@pytest.mark.parametrize("photometric", ["RGB", "MONOCHROME2"])
def test_frames_of_any_shape_come_back_and_constant_ones_exactly(shape: tuple[int, int], photometric: Any) -> None:
    form = PixelFormat(16, 16, True, photometric)
    for kind in ("lowest", "highest"):
        raster = contract.raster(form, shape, kind)
        assert np.array_equal(back(adaptive(1e6), raster), raster.samples)
    contract.check_round_trip(adaptive(200.0), contract.raster(form, shape, "slopes"))


@settings(deadline=None, max_examples=60)
@given(
    hnp.arrays(np.uint16, hnp.array_shapes(min_dims=2, max_dims=2, max_side=70), elements=st.integers(0, 4095)),
    st.floats(0.2, 3000),
    st.sampled_from(TRANSFORMS),
)
def test_the_error_is_bounded_by_the_step(samples: npt.NDArray[np.uint16], step: float, transform: str) -> None:
    # Parseval: the error energy of a tile is that of its coefficients, each wrong by less than 1.1 steps.
    codec = adaptive(step, transform)
    error = back(codec, Raster(samples, GREY)).astype(float) - samples
    coded = np.prod([-(-side // 64) * 64 for side in samples.shape])
    assert np.sqrt((error**2).sum()) <= np.sqrt(samples.size) * 0.5 + 1.1 * codec.step * np.sqrt(coded)


@settings(deadline=None, max_examples=60)
@given(st.data())
def test_padding_comes_back_exactly(data: st.DataObject) -> None:
    shape = data.draw(st.tuples(st.integers(1, 70), st.integers(1, 70)))
    colour = data.draw(st.booleans())
    form = PixelFormat(16, 12, True, "RGB" if colour else "MONOCHROME2")
    samples = data.draw(hnp.arrays(np.int16, (*shape, 3) if colour else shape, elements=st.integers(-2048, 2047)))
    padding = data.draw(hnp.arrays(np.bool_, shape))
    if data.draw(st.booleans()):
        samples[padding] = -2000
    raster = Raster(samples, form, padding)
    assert np.array_equal(back(adaptive(500.0), raster)[padding], samples[padding])


@pytest.mark.parametrize("ratio", [5, 10, 20, 40])
@pytest.mark.parametrize("name", FRAMES)
def test_the_asked_size_is_met_in_at_most_four_encodes(name: str, ratio: int) -> None:
    raster = real_frames.grey(name)
    target = raster.size_bytes(SizeBasis.BITS_STORED) / ratio
    encoded = adaptive().encode_to_size(raster, target)
    assert abs(len(encoded.code) / target - 1) <= RATE_TOLERANCE
    assert encoded.reached is Reached.ASKED
    assert encoded.encodes <= 4
    again = registry.from_settings("tiled", encoded.settings)
    assert again.encode(raster) == encoded.code


def test_a_reversible_code_that_is_smaller_is_told() -> None:
    raster = real_frames.grey("ct-small")
    encoded = adaptive().encode_to_size(raster, raster.size_bytes(SizeBasis.BITS_STORED) / 1.01)
    assert encoded.reached is Reached.REVERSIBLE_SMALLER
    assert np.array_equal(adaptive().decode(encoded.code, raster.format, raster.shape), raster.samples)


def test_a_frame_of_padding_alone_comes_back() -> None:
    samples = np.full((70, 90), 7, np.uint16)
    assert np.array_equal(back(adaptive(9.0), Raster(samples, GREY, np.ones((70, 90), np.bool_))), samples)


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "ct-small", "mr-small"])
def test_an_octave_coarser_never_gives_a_larger_code(name: str) -> None:
    raster = real_frames.grey(name)
    sizes = [len(adaptive(0.125 * 2.0**octave).encode(raster)) for octave in range(20)]
    assert sizes == sorted(sizes, reverse=True)


@lru_cache(maxsize=1)
def border_filled() -> npt.NDArray[np.integer[Any]]:
    """The CT with its padding filled by the median of the content's border, which is best for OpenJPEG."""
    raster = real_frames.grey("ct")
    assert raster.padding is not None
    inside = ~raster.padding
    eroded = inside.copy()
    for axis in (0, 1):
        for shift in (-1, 1):
            eroded &= np.roll(inside, shift, axis)
    samples = raster.samples.copy()
    samples[raster.padding] = np.median(raster.samples[inside & ~eroded])
    return samples


def gains_db(name: str) -> list[float]:
    """PSNR over that of OpenJPEG at 5, 10, 20 and 40 : 1 at its achieved size, over pixels that are not padding."""
    raster = real_frames.ultrasound_green() if name == "us-green" else real_frames.grey(name)
    inside = np.ones(raster.shape, np.bool_) if raster.padding is None else ~raster.padding
    samples = raster.samples if raster.padding is None else border_filled()
    gains = []
    for ratio in (5, 10, 20, 40):
        theirs = bytes(encode_array(samples, bits_stored=raster.format.bits_stored, compression_ratios=[ratio]))
        ours = adaptive().encode_to_size(raster, len(theirs) / (1 + RATE_TOLERANCE)).code
        assert len(ours) <= len(theirs)
        found = (decode(theirs), adaptive().decode(ours, raster.format, raster.shape))
        errors = [np.mean((each.astype(float) - raster.samples)[inside] ** 2) for each in found]
        gains.append(float(10 * np.log10(errors[0] / errors[1])))
    return gains


def test_it_is_ahead_of_openjpeg_by_a_decibel_in_the_mean_and_nowhere_behind() -> None:
    # Outside truth: OpenJPEG 9/7, the same frames and sizes, in this run; as the project's goals have it.
    gains = [gains_db(name) for name in (*FRAMES, "us-green")]
    assert np.min(gains) >= -0.2
    assert np.mean(gains) >= 1.0


# Regression guards, not truth: SHA-256 (first 16 digits) of codes as this version wrote them. They tell a processor or
# a change that gives other bytes; when the bitstream is changed on purpose, they change with its version.
CODES = {("cosine", "flat"): "4b75425a74f56009", ("fourier", "perceptual"): "5d21fe270516f045"}


@pytest.mark.parametrize("key", CODES, ids=str)
def test_code_bytes_are_those_of_other_processors(key: tuple[str, str]) -> None:
    samples = pattern((75, 150), 12)
    codec = adaptive(9.0, *key)
    code = codec.encode(Raster(samples.astype(np.uint16), GREY, samples % 97 == 3))
    code += codec.encode(Raster(pattern((30, 71, 3), 8).astype(np.uint8), real_frames.ultrasound().format))
    assert hashlib.sha256(code).hexdigest()[:16] == CODES[key]
