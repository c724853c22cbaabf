"""RLE Lossless: the layout of PS3.5 Annex G, and another decoder."""

from __future__ import annotations

import struct

import numpy as np
import pytest
from pydicom.pixels.decoders.base import get_decoder
from pydicom.uid import RLELossless

from safecheck.codecs.rle import RleLossless
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract, images
from tests.codecs.second_decoders import dataset

GREY = PixelFormat(16, 12, False, "MONOCHROME2")


@pytest.mark.parametrize("name", images.NAMES)
def test_pydicom_reads_the_same_samples(name: str) -> None:
    # pydicom's own decoder, in Python, written to PS3.5 Annex G.
    before = images.real(name)
    code = RleLossless().encode(before)
    decoder = get_decoder(RLELossless)
    made = dataset(RleLossless(), code, before)
    samples, _ = decoder.as_array(made, decoding_plugin="pydicom", raw=True)
    assert np.array_equal(samples, before.samples)


def test_the_header_and_the_planes_are_those_of_the_standard() -> None:
    # PS3.5 G.5: sixteen 32-bit numbers, little-endian: how many segments, where each begins. G.2: most significant byte
    # first. G.3.1: rows are packed one by one, segments of even length. Packets by hand: 3 times 1 is (-2, 1); 1 2 3 is
    # (2, 1 2 3).
    raster = Raster(np.array([[0x101, 0x102, 0x103], [0x104, 0x104, 0x104]], np.uint16), GREY)
    code = RleLossless().encode(raster)
    first = bytes((254, 1, 254, 1))
    second = bytes((2, 1, 2, 3, 254, 4))
    assert code == struct.pack("<16I", 2, 64, 64 + len(first), *[0] * 13) + first + second


def test_segments_have_even_length() -> None:
    raster = Raster(np.array([[1, 2]], np.uint8), PixelFormat(8, 8, False, "MONOCHROME2"))
    code = RleLossless().encode(raster)
    assert code[64:] == bytes((1, 1, 2, 0))
    contract.check_round_trip(RleLossless(), raster)


@pytest.mark.parametrize(
    ("place", "value", "message"),
    [
        (0, 3, "does not name 2 segments"),
        (4, 66, "does not name 2 segments"),
        (8, 2**32 - 1, "begins where it should not"),
        (8, 64, "begins where it should not"),
        (60, 1, "does not name 2 segments"),
    ],
    ids=["count", "first", "beyond", "empty", "one more"],
)
def test_a_header_that_names_other_segments_is_corrupt(place: int, value: int, message: str) -> None:
    raster = contract.raster(GREY, (64, 70), "slopes")
    code = bytearray(RleLossless().encode(raster))
    code[place : place + 4] = struct.pack("<I", value)
    with pytest.raises(CorruptCode, match=message):
        RleLossless().decode(bytes(code), GREY, raster.shape)


def test_a_plane_that_is_too_short_is_corrupt() -> None:
    code = RleLossless().encode(contract.raster(GREY, (63, 70), "slopes"))
    with pytest.raises(CorruptCode, match="a segment of 4410 bytes, expected 64 x 70"):
        RleLossless().decode(code, GREY, (64, 70))
