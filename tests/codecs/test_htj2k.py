"""HTJ2K: what the code stream says, what other decoders read, and why one of them is not ours."""

from __future__ import annotations

import sys
from typing import Any

import imagecodecs
import numpy as np
import openjpeg.utils
import pytest

from safecheck.codecs.base import Carriage, Reached
from safecheck.codecs.htj2k import Htj2k, Htj2kLossless
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs import contract, images


@pytest.mark.parametrize("codec", [Htj2k(0.0005), Htj2kLossless()], ids=["irreversible", "reversible"])
@pytest.mark.parametrize("name", images.NAMES)
def test_two_other_decoders_read_the_same_samples(name: str, codec: Htj2k | Htj2kLossless) -> None:
    # imagecodecs carries another build of OpenJPEG, and OpenJPH, which rounds the 9/7 transform in its own order: at
    # most 1 apart on grey. On 8-bit colour OpenJPH wraps around where the transform overshoots; see the test below.
    before = images.real(name)
    code = codec.encode(before)
    first = codec.decode(code, before.format, before.shape).astype(np.int64)
    narrow = [imagecodecs.jpeg2k_decode(code)]
    if codec.reversible or before.format.channels == 1:
        narrow.append(imagecodecs.htj2k_decode(code))
    for second in narrow:
        clipped = np.clip(second.astype(np.int64), before.format.lowest, before.format.highest)
        assert np.abs(clipped - first).max() <= (0 if codec.reversible else 1)


def test_the_decoder_of_imagecodecs_wraps_around_in_colour() -> None:
    # Why OpenJPEG reads: here white comes back as black, and the error is the whole range.
    before = images.real("US1_UNCR")
    code = Htj2k(0.01).encode(before)
    theirs = np.abs(imagecodecs.htj2k_decode(code).astype(np.int64) - before.samples).max()
    ours = np.abs(contract.back(Htj2k(0.01), before).astype(np.int64) - before.samples).max()
    assert theirs == 255
    assert ours < 32


def test_the_decoder_of_imagecodecs_takes_damage_for_samples(monkeypatch: pytest.MonkeyPatch) -> None:
    # Why OpenJPEG reads: an error inside a row is reported to nobody, and the rows that follow were never filled.
    heard: list[Any] = []
    monkeypatch.setattr(sys, "unraisablehook", heard.append)
    before = contract.raster(PixelFormat(16, 12, False, "MONOCHROME2"), (96, 90), "slopes")
    code = Htj2kLossless().encode(before)
    silent = 0
    for damaged in contract.corruptions(code, 60, 3):
        if damaged[:160] == code[:160] and len(damaged) > len(code) // 2:
            try:
                imagecodecs.htj2k_decode(damaged)
            except imagecodecs.Htj2kError:
                continue
            silent += bool(heard)
            heard.clear()
    assert silent > 0


@pytest.mark.parametrize("bits", range(1, 17))
@pytest.mark.parametrize("signed", [False, True], ids=["unsigned", "signed"])
def test_the_code_says_eight_or_sixteen_bits_and_the_sign(bits: int, signed: bool) -> None:
    form = PixelFormat(16, bits, signed, "MONOCHROME2")
    for codec in (Htj2k(), Htj2kLossless()):
        code = codec.encode(contract.raster(form, (64, 70), "slopes"))
        told = openjpeg.utils.get_parameters(code)
        assert (told["precision"], told["is_signed"]) == (8 if bits <= 8 else 16, signed)
        assert codec.carriage(form) == Carriage(
            told["precision"], clipped_on_reading=not codec.reversible and told["precision"] > form.bits_stored
        )


def test_a_reversible_code_is_no_irreversible_one() -> None:
    before = images.real("MR2_UNCR")
    with pytest.raises(CorruptCode, match="coding style"):
        Htj2k().decode(Htj2kLossless().encode(before), before.format, before.shape)
    with pytest.raises(CorruptCode, match="coding style"):
        Htj2kLossless().decode(Htj2k().encode(before), before.format, before.shape)


def test_overshoot_beyond_the_bits_stored_is_clipped_when_read() -> None:
    form = PixelFormat(16, 12, True, "MONOCHROME2")
    samples = np.full((64, 64), form.lowest, np.int16)
    samples[:, ::3] = form.highest
    code = Htj2k(0.01).encode(Raster(samples, form))
    raw = openjpeg.utils.decode(code)
    assert raw.min() < form.lowest
    assert raw.max() > form.highest
    ours = Htj2k(0.01).decode(code, form, (64, 64))
    assert (ours.min(), ours.max()) == (form.lowest, form.highest)


def test_a_coarser_step_gives_a_smaller_code_and_a_larger_error() -> None:
    before = images.real("MR2_UNCR")
    sizes, errors = [], []
    for step in (5e-5, 2e-4, 1e-3):
        code = Htj2k(step).encode(before)
        sizes.append(len(code))
        after = Htj2k(step).decode(code, before.format, before.shape).astype(np.float64)
        errors.append(float(np.sqrt(np.mean((after - before.samples) ** 2))))
    assert sizes == sorted(sizes, reverse=True)
    assert errors == sorted(errors)


def test_below_its_ceiling_the_reversible_code_is_said_to_be_smaller() -> None:
    before = images.real("693_UNCR")
    target = before.size_bytes(SizeBasis.BITS_STORED) / 2
    assert Htj2k().encode_to_size(before, target).reached is Reached.REVERSIBLE_SMALLER
