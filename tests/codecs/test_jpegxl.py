"""JPEG XL: what the code stream says, how samples are scaled, and what a distance does to values."""

from __future__ import annotations

import imagecodecs
import numpy as np
import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Carriage, Reached
from safecheck.codecs.jpegxl import JpegXl, JpegXlLossless
from safecheck.errors import CorruptCode, UsageError
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs import contract, images


def rmse(after: object, before: object) -> float:
    return float(np.sqrt(np.mean((np.asarray(after, np.float64) - np.asarray(before, np.float64)) ** 2)))


@pytest.mark.parametrize("bits", [9, 10, 12, 14])
def test_told_the_bits_the_library_scales_to_the_full_range_and_back(bits: int) -> None:
    # The other way is to scale to 16 bits here and back after: the same size within 1 %, the same error within 5 %.
    form = PixelFormat(16, bits, False, "MONOCHROME2")
    before = contract.raster(form, (128, 128), "slopes")
    noise = np.random.default_rng(5).normal(0, form.highest / 100, before.samples.shape)
    samples = np.clip(np.rint(before.samples + noise), 0, form.highest).astype(np.uint16)
    before = Raster(samples, form)
    ours = JpegXl(1.0).encode(before)
    scale = 65535 / form.highest
    wide = np.rint(samples * scale).astype(np.uint16)
    theirs = bytes(imagecodecs.jpegxl_encode(wide, distance=1.0, effort=7, bitspersample=16, numthreads=1))
    back = np.rint(imagecodecs.jpegxl_decode(theirs, numthreads=1) / scale)
    assert len(ours) == pytest.approx(len(theirs), rel=0.01)
    assert rmse(JpegXl(1.0).decode(ours, form, before.shape), samples) == pytest.approx(rmse(back, samples), rel=0.05)


def test_told_nothing_the_library_takes_twelve_bits_for_almost_black() -> None:
    before = images.real("MR2_UNCR")
    told_nothing = imagecodecs.jpegxl_encode(before.samples, distance=1.0, effort=7, numthreads=1)
    ours = JpegXl(1.0).encode(before)
    assert len(told_nothing) < len(ours) / 3
    dark = rmse(imagecodecs.jpegxl_decode(told_nothing), before.samples)
    assert dark > 2 * rmse(JpegXl(1.0).decode(ours, before.format, before.shape), before.samples)


@pytest.mark.parametrize("bits", range(1, 17))
@pytest.mark.parametrize("photometric", ["MONOCHROME2", "RGB"])
def test_the_precision_of_the_code_is_the_bits_stored(bits: int, photometric: str) -> None:
    for signed in (False, True):
        form = PixelFormat(16, bits, signed, "RGB" if photometric == "RGB" else "MONOCHROME2")
        raster = contract.raster(form, (40, 56), "slopes")
        offset = 1 << (bits - 1) if signed else 0
        for codec in (JpegXl(1.0, 3), JpegXlLossless(3)):
            assert codec.carriage(form) == Carriage(bits, offset)
            other = PixelFormat(16, bits - 1 if bits > 1 else 2, signed, form.photometric)
            with pytest.raises(CorruptCode, match="precision"):
                codec.decode(codec.encode(raster), other, raster.shape)


@pytest.mark.parametrize("shape", [(8, 8), (9, 8), (64, 64), (256, 256), (48, 64), (50, 60), (513, 700), (300, 8200)])
@pytest.mark.parametrize("codec", [JpegXl(4.0, 1), JpegXlLossless(1)], ids=["lossy", "reversible"])
def test_sizes_are_read_from_the_header_however_they_are_written(
    codec: JpegXl | JpegXlLossless, shape: tuple[int, int]
) -> None:
    # ISO/IEC 18181-1 writes heights in three ways and widths in four, or as one of seven ratios.
    form = PixelFormat(8, 8, False, "MONOCHROME2")
    raster = contract.raster(form, shape, "slopes")
    code = codec.encode(raster)
    assert codec.decode(code, form, shape).shape == shape
    with pytest.raises(CorruptCode, match="size in the header"):
        codec.decode(code, form, (shape[0], shape[1] + 1))


def test_a_distance_of_zero_is_not_lossless_and_is_refused() -> None:
    before = images.real("RG3_UNCR")
    code = imagecodecs.jpegxl_encode(before.samples, distance=0, effort=3, bitspersample=10, numthreads=1)
    after = imagecodecs.jpegxl_decode(code, numthreads=1)
    assert not np.array_equal(after, before.samples)
    with pytest.raises(UsageError, match=r"which would not be lossless, expected a number from 0\.01 to 25"):
        registry.codec("jpegxl", distance=0)


def test_a_lossless_code_is_no_lossy_one() -> None:
    before = images.real("US1_UNCR")
    with pytest.raises(CorruptCode, match="colour transform"):
        JpegXlLossless(1).decode(JpegXl(1.0, 1).encode(before), before.format, before.shape)
    with pytest.raises(CorruptCode, match="colour transform"):
        JpegXl(1.0, 1).decode(JpegXlLossless(1).encode(before), before.format, before.shape)


@pytest.mark.parametrize("name", images.NAMES)
def test_real_frames_come_back_exactly(name: str) -> None:
    before = images.real(name)
    assert np.array_equal(contract.back(JpegXlLossless(3), before), before.samples)


def test_a_distance_allows_more_error_where_values_are_high() -> None:
    # The trap of a distance of appearance: samples are declared as sRGB.
    form = PixelFormat(16, 12, False, "MONOCHROME2")
    noise = np.random.default_rng(2).normal(0, 40, (128, 128))
    errors = []
    for level in (400, 3600):
        before = Raster(np.clip(np.rint(level + noise), 0, 4095).astype(np.uint16), form)
        errors.append(rmse(contract.back(JpegXl(1.0), before), before.samples))
    assert errors[1] > errors[0]


def test_the_finest_distance_is_still_too_small_a_code_for_some_frames() -> None:
    # 14 bits of CT: the library's least distance, 0.01, already gives 10:1, so 8:1 is beyond its ceiling.
    before = images.real("693_UNCR")
    encoded = JpegXl().encode_to_size(before, before.size_bytes(SizeBasis.BITS_STORED) / 8)
    assert encoded.reached is Reached.CODEC_CEILING
    assert encoded.settings["distance"] == 0.01


def test_boxes_of_another_length_are_corrupt() -> None:
    before = contract.raster(PixelFormat(16, 16, False, "MONOCHROME2"), (64, 70), "slopes")
    code = JpegXlLossless(1).encode(before)
    assert code[4:8] == b"JXL "
    with pytest.raises(CorruptCode, match="boxes are not those of one code stream"):
        JpegXlLossless(1).decode(code + b"\x00", before.format, before.shape)
