"""Every codec of the registry against the one contract."""

from __future__ import annotations

import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Codec, RatedCodec
from safecheck.frames import PixelFormat
from tests.codecs import contract

QUICK: dict[str, dict[str, int]] = {"jpegxl": {"effort": 3}}
"""Settings for checks over very many rasters: the effort decides how small a code is, not what it holds."""
GREY = PixelFormat(16, 12, False, "MONOCHROME2")
SIGNED = PixelFormat(16, 11, True, "MONOCHROME2")
COLOUR = PixelFormat(8, 8, False, "RGB")


@pytest.fixture(params=registry.names())
def name(request: pytest.FixtureRequest) -> str:
    return str(request.param)


@pytest.fixture
def codec(name: str) -> Codec:
    return registry.codec(name)


def test_the_registry_tells_the_truth_of_a_codec_it_has_not_loaded(name: str, codec: Codec) -> None:
    contract.check_entry(name, codec)


def test_settings_round_trip(codec: Codec) -> None:
    contract.check_settings(codec)


def test_shape_type_and_constants_survive_in_every_format(name: str) -> None:
    codec, taken = registry.codec(name, **QUICK.get(name, {})), 0
    for form in contract.formats():
        for shape in contract.SHAPES:
            for kind in contract.KINDS:
                before = contract.raster(form, shape, kind)
                if codec.refuses(form, shape) is None:
                    contract.check_round_trip(codec, before)
                    taken += 1
                else:
                    contract.check_refusal(codec, before)
    # Two of the six shapes are taken by all; colour of one bit by some.
    assert taken >= 0.3 * len(list(contract.formats())) * len(contract.SHAPES) * len(contract.KINDS)


def test_the_code_holds_every_bit_of_every_format(codec: Codec) -> None:
    for form in contract.formats():
        if codec.refuses(form, (64, 70)) is None:
            contract.check_carriage(codec, form)


@pytest.mark.parametrize("form", [GREY, SIGNED, COLOUR], ids=["grey", "signed", "colour"])
def test_the_same_raster_gives_the_same_bytes(codec: Codec, form: PixelFormat) -> None:
    contract.check_determinism(codec, contract.raster(form, (64, 70), "noise"))


def test_values_beyond_the_bits_stored_are_refused(codec: Codec) -> None:
    contract.check_values_beyond_the_bits(codec)


def test_a_code_of_another_frame_is_corrupt(codec: Codec) -> None:
    contract.check_other_frame_is_corrupt(codec)


@pytest.mark.parametrize(("form", "seed"), [(GREY, 1), (SIGNED, 2), (COLOUR, 3)], ids=["grey", "signed", "colour"])
def test_damage_is_told_or_gives_the_declared_shape(codec: Codec, form: PixelFormat, seed: int) -> None:
    seen = contract.check_corruption(codec, contract.raster(form, (96, 90), "slopes"), 250, seed)
    assert seen["corrupt"] > 0


@pytest.mark.parametrize("name", registry.rated_names(), indirect=True)
@pytest.mark.parametrize("ratio", [1.5, 4, 10, 1e5])
@pytest.mark.parametrize("form", [GREY, SIGNED, COLOUR], ids=["grey", "signed", "colour"])
def test_the_asked_size_is_met_or_it_is_said_why_not(codec: Codec, form: PixelFormat, ratio: float) -> None:
    assert isinstance(codec, RatedCodec)
    for kind in contract.KINDS:
        contract.check_size(codec, contract.raster(form, (96, 90), kind), ratio)
