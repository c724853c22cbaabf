"""Reversible codecs: exact by other libraries' reading too, and the smaller of them named."""

from __future__ import annotations

import imagecodecs
import numpy as np
import openjpeg.utils
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.codecs import registry
from safecheck.codecs.base import Codec
from safecheck.codecs.jpeg2000 import Jpeg2000
from safecheck.codecs.reversible import Jpeg2000Lossless, JpegLsLossless, best_reversible, cheapest
from safecheck.errors import CannotEncode, CorruptCode
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract, images


def quick(name: str) -> Codec:
    """A codec by name, with its least effort."""
    return registry.codec(name, **({"effort": 1} if name == "jpegxl-reversible" else {}))


@given(
    bits=st.integers(1, 16),
    signed=st.booleans(),
    colour=st.booleans(),
    rows=st.integers(1, 20),
    columns=st.integers(1, 20),
    seed=st.integers(0, 2**32 - 1),
)
@settings(deadline=None, max_examples=150)
def test_any_small_raster_comes_back_exactly(
    bits: int, signed: bool, colour: bool, rows: int, columns: int, seed: int
) -> None:
    form = PixelFormat(16, bits, signed, "RGB" if colour else "MONOCHROME1")
    before = contract.raster(form, (rows, columns), "noise", seed)
    for codec in map(quick, registry.reversible_names()):
        if codec.refuses(form, before.shape) is None:
            contract.check_round_trip(codec, before)


@pytest.mark.parametrize("name", images.NAMES)
def test_real_frames_come_back_exactly(name: str) -> None:
    before = images.real(name)
    for codec in map(quick, registry.reversible_names()):
        assert np.array_equal(contract.back(codec, before), before.samples)


@pytest.mark.parametrize("name", images.NAMES)
def test_the_other_openjpeg_reads_our_lossless_jpeg2000(name: str) -> None:
    before = images.real(name)
    code = Jpeg2000Lossless().encode(before)
    assert np.array_equal(openjpeg.utils.decode(code), before.samples)
    told = openjpeg.utils.get_parameters(code)
    assert (told["precision"], told["is_signed"]) == (before.format.bits_stored, before.format.signed)


@pytest.mark.parametrize("name", images.NAMES)
def test_our_decoders_read_what_the_other_library_wrote(name: str) -> None:
    before = images.real(name)
    theirs = openjpeg.utils.encode_array(
        before.samples,
        bits_stored=before.format.bits_stored,
        photometric_interpretation=1 if before.format.channels == 3 else 0,
    )
    assert np.array_equal(Jpeg2000Lossless().decode(theirs, before.format, before.shape), before.samples)


def test_the_smaller_reversible_code_is_named() -> None:
    # Both win somewhere, so neither would do alone.
    for name, expected in (("693_UNCR", "jpegls-reversible"), ("US1_UNCR", "jpeg2000-reversible")):
        before = images.real(name)
        sizes = {codec.name: len(codec.encode(before)) for codec in (JpegLsLossless(), Jpeg2000Lossless())}
        smallest = best_reversible(before)
        assert smallest.codec == expected
        assert smallest.size_bytes == sizes[expected] == min(sizes.values())


def test_one_bit_colour_has_a_reversible_code_all_the_same() -> None:
    before = contract.raster(PixelFormat(8, 1, False, "RGB"), (40, 40), "noise")
    assert best_reversible(before).codec == "jpegls-reversible"


def test_a_frame_too_long_for_any_header_has_no_reversible_code() -> None:
    before = Raster(np.zeros((1, 65536), np.uint8), PixelFormat(8, 8, False, "MONOCHROME2"))
    with pytest.raises(CannotEncode, match="no reversible codec takes a frame of 1 x 65536 pixels"):
        best_reversible(before)


def test_the_cheapest_control_is_exact() -> None:
    assert cheapest().reversible


def test_noise_that_grows_is_written_all_the_same() -> None:
    # Eight bits of colour noise make a JPEG-LS code larger than the samples, beyond the library's own buffer.
    before = contract.raster(PixelFormat(8, 8, False, "RGB"), (64, 70), "noise")
    with pytest.raises(imagecodecs.JpeglsError, match="too small"):
        imagecodecs.jpegls_encode(before.samples)
    code = JpegLsLossless().encode(before)
    assert len(code) > before.samples.nbytes
    contract.check_round_trip(JpegLsLossless(), before)


def test_a_lossy_code_is_no_lossless_one() -> None:
    before = images.real("MR2_UNCR")
    with pytest.raises(CorruptCode, match="coding style"):
        Jpeg2000Lossless().decode(Jpeg2000(10).encode(before), before.format, before.shape)
