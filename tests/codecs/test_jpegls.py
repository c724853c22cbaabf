"""Near-lossless JPEG-LS: the promised error, the true precision, and what other decoders read."""

from __future__ import annotations

import importlib.util
from collections.abc import Callable
from pathlib import Path
from typing import Any

import imagecodecs
import jpeg_ls
import numpy as np
import pytest

from safecheck.codecs import jpegls_coding
from safecheck.codecs.base import Carriage, Reached
from safecheck.codecs.jpegls import JpegLs, highest_near
from safecheck.codecs.reversible import JpegLsLossless
from safecheck.errors import CannotEncode, CorruptCode
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs import contract, images
from tests.codecs.second_decoders import read_by_gdcm


@pytest.fixture
def without_pyjpegls(monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine without the library that writes the true precision."""
    honest: Callable[..., Any] = importlib.util.find_spec
    monkeypatch.setattr(
        importlib.util, "find_spec", lambda name, *rest: None if name == "_CharLS" else honest(name, *rest)
    )


@pytest.mark.parametrize("near", [1, 2, 7, 100, 255])
def test_no_sample_of_any_format_is_off_by_more_than_near(near: int) -> None:
    # ISO/IEC 14495-1 3.67: NEAR is the largest absolute difference. Noise over the whole range meets both ends of it.
    codec, taken, largest = JpegLs(near), 0, 0
    for form in contract.formats():
        for kind in contract.KINDS:
            before = contract.raster(form, (33, 47), kind)
            if codec.refuses(form, before.shape) is None:
                off = np.abs(contract.back(codec, before).astype(np.int64) - before.samples).max()
                largest = max(largest, int(off))
                taken += 1
    assert taken > 0
    assert largest == codec.error_bound == near


@pytest.mark.parametrize("name", images.NAMES)
def test_no_sample_of_a_real_frame_is_off_by_more_than_near(name: str) -> None:
    before = images.real(name)
    for near in (1, 5, 30):
        off = np.abs(contract.back(JpegLs(near), before).astype(np.int64) - before.samples).max()
        assert off == near


@pytest.mark.parametrize("bits", range(1, 17))
def test_near_ends_at_half_the_range_as_the_standard_says(bits: int) -> None:
    # ISO/IEC 14495-1 C.2.3: 0 to the smaller of 255 and MAXVAL / 2; CharLS refuses to read beyond (see its message).
    form = PixelFormat(16, bits, False, "MONOCHROME2")
    highest = highest_near(form)
    assert highest == min(255, (2**bits - 1) // 2)
    before = contract.raster(form, (33, 47), "noise")
    if highest:
        contract.check_round_trip(JpegLs(highest), before)
    if highest < 255:
        with pytest.raises(CannotEncode, match=f"jpegls: near is {highest + 1} with {bits} bits stored, expected"):
            JpegLs(highest + 1).encode(before)


@pytest.mark.parametrize("near", [0, 4])
@pytest.mark.parametrize("name", images.NAMES)
def test_three_other_decoders_read_the_same_samples(name: str, near: int, tmp_path: Path) -> None:
    # pyjpegls and GDCM carry CharLS in other builds than imagecodecs, which is ours. JPEG-LS decoding is exact in whole
    # numbers, so the samples are equal.
    before = images.real(name)
    codec = JpegLs(near) if near else JpegLsLossless()
    code = codec.encode(before)
    stored = codec.decode(code, before.format, before.shape).astype(np.int64) + codec.carriage(before.format).offset
    dtype = np.uint8 if before.format.bits_stored <= 8 else "<u2"
    buffer, told = jpeg_ls.decode_buffer(code)
    assert np.array_equal(np.frombuffer(bytes(buffer), dtype).reshape(stored.shape), stored)
    assert (told["bits_per_sample"], told["allowed_lossy_error"]) == (before.format.bits_stored, near)
    assert np.array_equal(imagecodecs.jpegls_decode(code), stored)
    assert np.array_equal(read_by_gdcm(codec, code, before, tmp_path), stored)


@pytest.mark.parametrize("bits", range(1, 17))
@pytest.mark.parametrize("signed", [False, True], ids=["unsigned", "signed"])
def test_the_precision_of_the_code_is_the_bits_stored(bits: int, signed: bool) -> None:
    # One bit is the exception: ISO/IEC 14495-1 C.2.2 has 2 as the least precision.
    form = PixelFormat(16, bits, signed, "MONOCHROME2")
    code = JpegLsLossless().encode(contract.raster(form, (33, 47), "noise"))
    told = jpeg_ls.CharLS._CharLS.read_header(code)
    assert told["bits_per_sample"] == max(bits, 2)
    assert JpegLsLossless().carriage(form) == Carriage(max(bits, 2), 1 << (bits - 1) if signed else 0)


def test_the_true_precision_makes_smaller_codes() -> None:
    # Why pyjpegls writes: imagecodecs knows 8 and 16 bits only.
    gains = []
    for name in images.NAMES:
        before = images.real(name)
        whole = jpegls_coding._write_bytes(before, 0)
        gains.append(len(whole) / len(JpegLsLossless().encode(before)) - 1)
    assert all(0 <= gain < 0.04 for gain in gains)
    assert max(gains) > 0.03


@pytest.mark.usefixtures("without_pyjpegls")
def test_without_pyjpegls_the_row_says_another_precision_and_the_promise_holds() -> None:
    form = PixelFormat(16, 12, True, "MONOCHROME2")
    for codec in (JpegLs(3), JpegLsLossless()):
        assert codec.carriage(form) == Carriage(16, 2048, clipped_on_reading=not codec.reversible)
        assert codec.version.startswith("charls")
        for kind in contract.KINDS:
            before = contract.raster(form, (33, 47), kind)
            contract.check_round_trip(codec, before)
            code = codec.encode(before)
            assert jpeg_ls.CharLS._CharLS.read_header(code)["bits_per_sample"] == 16


@pytest.mark.usefixtures("without_pyjpegls")
def test_without_pyjpegls_what_is_rebuilt_beyond_the_bits_is_clipped_by_at_most_near() -> None:
    form = PixelFormat(16, 12, False, "MONOCHROME2")
    near_the_top = np.random.default_rng(4).integers(4060, 4096, (33, 47)).astype(np.uint16)
    before = Raster(near_the_top, form)
    code = JpegLs(5).encode(before)
    assert int(imagecodecs.jpegls_decode(code).max()) > 4095
    assert int(JpegLs(5).decode(code, form, before.shape).max()) == 4095
    outside = Raster(np.full((33, 47), 4200, np.uint16), PixelFormat(16, 16, False, "MONOCHROME2"))
    beyond = jpegls_coding._write_bytes(outside, 5)
    assert np.abs(contract.back(JpegLs(5), before).astype(np.int64) - before.samples).max() <= 5
    with pytest.raises(CorruptCode, match="above 4095 by more than 5"):
        JpegLs(5).decode(beyond, form, before.shape)


@pytest.mark.parametrize("ratio", [8, 20])
@pytest.mark.parametrize("name", ["693_UNCR", "MR2_UNCR", "US1_UNCR"])
def test_two_largest_errors_lie_around_the_asked_size(name: str, ratio: int) -> None:
    raster = images.real(name)
    target = raster.size_bytes(SizeBasis.BITS_STORED) / ratio
    encoded = JpegLs().encode_to_size(raster, target)
    assert encoded.reached is Reached.BRACKET
    assert encoded.neighbour is not None
    assert len(encoded.code) <= target < len(encoded.neighbour.code)
    assert encoded.neighbour.settings == {"near": int(encoded.settings["near"]) - 1}


def test_the_ends_of_near_say_what_stopped_the_search() -> None:
    chest = images.real("RG1_UNCR")
    floor = JpegLs().encode_to_size(chest, chest.size_bytes(SizeBasis.BITS_STORED) / 20)
    assert (floor.reached, floor.settings) == (Reached.CODEC_FLOOR, {"near": 255})
    head = images.real("693_UNCR")
    smaller = JpegLs().encode_to_size(head, head.size_bytes(SizeBasis.BITS_STORED) / 4)
    assert (smaller.reached, smaller.settings) == (Reached.REVERSIBLE_SMALLER, {"near": 1})
    ceiling = JpegLs().encode_to_size(head, head.size_bytes(SizeBasis.BITS_STORED) / 5)
    assert (ceiling.reached, ceiling.settings) == (Reached.CODEC_CEILING, {"near": 1})


def test_one_bit_has_no_near_lossless_code() -> None:
    form = PixelFormat(8, 1, False, "MONOCHROME2")
    raster = contract.raster(form, (33, 47), "noise")
    with pytest.raises(CannotEncode, match="near is 1 with 1 bits stored, expected a reversible codec"):
        JpegLs().encode_to_size(raster, 100)


def test_a_code_is_read_whatever_its_near_and_a_reversible_one_is_not_near_lossless() -> None:
    raster = images.real("MR2_UNCR")
    code = JpegLs(9).encode(raster)
    nine = JpegLs(9).decode(code, raster.format, raster.shape)
    assert np.array_equal(JpegLs(1).decode(code, raster.format, raster.shape), nine)
    with pytest.raises(CorruptCode, match="coding parameters"):
        JpegLs(1).decode(JpegLsLossless().encode(raster), raster.format, raster.shape)


def test_noise_that_grows_beyond_twice_its_size_is_written_all_the_same() -> None:
    # The public call of pyjpegls makes room for twice the samples: too little for the header of one pixel.
    form = PixelFormat(8, 8, False, "MONOCHROME2")
    raster = Raster(np.array([[200]], np.uint8), form)
    with pytest.raises(RuntimeError, match="too small"):
        jpeg_ls.encode_buffer(raster.samples.tobytes(), 1, 1, 1, 8)
    contract.check_round_trip(JpegLsLossless(), raster)
