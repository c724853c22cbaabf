"""How often a frame is encoded on the way to a size: at most 6 times at the median of real frames and ratios."""

from __future__ import annotations

import statistics

import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Encoded, Reached
from safecheck.frames import SizeBasis
from tests.codecs import contract, images

RATIOS = (5, 10, 20)
CONTINUOUS = ("jpeg2000", "htj2k", "jpegxl")
WHOLE = ("jpeg", "jpegls")


def found(codec: str, name: str, ratio: float) -> Encoded | None:
    """A real frame at a ratio, where the codec takes the frame."""
    raster = images.real(name)
    rated = registry.rated(codec)
    if rated.refuses(raster.format, raster.shape) is not None:
        return None
    return rated.encode_to_size(raster, raster.size_bytes(SizeBasis.BITS_STORED) / ratio)


def check_encodes(codec: str, frames: tuple[str, ...], ratios: tuple[int, ...]) -> None:
    """Print what was reached in how many encodes, and hold the median."""
    counts = []
    for name in frames:
        for ratio in ratios:
            encoded = found(codec, name, ratio)
            if encoded is not None:
                dial = encoded.settings[registry.entry(codec).dial]
                print(f"{codec} {name} {ratio}:1 {encoded.reached} at {dial:.6g}, {encoded.encodes} encodes")  # noqa: T201
                assert encoded.reached in (Reached.ASKED, Reached.CODEC_CEILING, Reached.REVERSIBLE_SMALLER)
                counts.append(encoded.encodes)
    print(f"{codec}: median {statistics.median(counts)}, at most {max(counts)} of {len(counts)}")  # noqa: T201
    assert statistics.median(counts) <= 6


@pytest.mark.parametrize("codec", CONTINUOUS)
def test_the_asked_ratio_is_met_in_few_encodes(codec: str) -> None:
    check_encodes(codec, ("693_UNCR", "US1_UNCR"), (10, 20))


@pytest.mark.slow
@pytest.mark.parametrize("codec", CONTINUOUS)
def test_the_asked_ratio_is_met_in_few_encodes_on_every_frame(codec: str) -> None:
    check_encodes(codec, images.NAMES, RATIOS)


@pytest.mark.parametrize("codec", ["htj2k", "jpegxl"])
@pytest.mark.parametrize("target", [0, -1, float("nan"), float("inf")])
def test_only_positive_sizes_can_be_asked_for(codec: str, target: float) -> None:
    with pytest.raises(ValueError, match="expected a positive number"):
        registry.rated(codec).encode_to_size(contract.raster(contract.EIGHT, (64, 70), "slopes"), target)


@pytest.mark.parametrize("codec", WHOLE)
@pytest.mark.parametrize("target", [0, -1, float("nan"), float("inf")])
def test_only_positive_sizes_can_be_bracketed(codec: str, target: float) -> None:
    with pytest.raises(ValueError, match="expected a positive number"):
        registry.rated(codec).encode_to_size(contract.raster(contract.EIGHT, (64, 70), "slopes"), target)
