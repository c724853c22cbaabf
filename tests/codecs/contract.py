"""The one suite of checks that every codec meets, whatever its library.

`test_contract` runs it over the registry; a codec's own tests may call single checks with rasters of their own.
"""

from __future__ import annotations

import contextlib
import json
import time
from collections import Counter
from collections.abc import Iterator
from typing import Literal

import numpy as np
import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import EXEMPT_BYTES, RATE_TOLERANCE, Codec, RatedCodec, Reached
from safecheck.errors import CannotEncode, CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples, SizeBasis

EIGHT = PixelFormat(8, 8, False, "MONOCHROME2")
Kind = Literal["slopes", "noise", "lowest", "highest"]
KINDS: tuple[Kind, ...] = ("slopes", "noise", "lowest", "highest")
EXACT_CONSTANTS = ("jpeg2000", "tiled")
"""Irreversible codecs that give constant grey frames back exactly."""
SHAPES = ((1, 1), (1, 9), (9, 1), (3, 5), (33, 47), (64, 70))
"""Odd, thin and tiny ones; the last two are taken by every codec."""


def formats() -> Iterator[PixelFormat]:
    """Yield signs x bits 1 to 16 x sample types x grey and colour."""
    for bits in range(1, 17):
        for allocated in (8, 16):
            if bits <= allocated:
                for signed in (False, True):
                    yield PixelFormat(allocated, bits, signed, "MONOCHROME2")
                    yield PixelFormat(allocated, bits, signed, "RGB")


def raster(form: PixelFormat, shape: tuple[int, int], kind: Kind, seed: int = 0) -> Raster:
    """Make a raster over the whole range of its format."""
    full = shape if form.channels == 1 else (*shape, 3)
    rng = np.random.default_rng(seed)
    if kind == "slopes":
        rows, columns = np.mgrid[: shape[0], : shape[1]]
        grey = (np.sin(rows / 9) * np.cos(columns / 13) + 1) / 2
        planes = grey if form.channels == 1 else np.stack([grey, grey[::-1], 1 - grey], axis=-1)
        values = np.rint(form.lowest + planes * (form.highest - form.lowest))
    elif kind == "noise":
        values = rng.integers(form.lowest, form.highest + 1, full)
    else:
        values = np.full(full, form.lowest if kind == "lowest" else form.highest)
    return Raster(values.astype(form.dtype), form)


def back(codec: Codec, before: Raster) -> Samples:
    """Write and read."""
    return codec.decode(codec.encode(before), before.format, before.shape)


def check_entry(name: str, codec: Codec) -> None:
    """The registry says of a codec, unloaded, what the codec says of itself."""
    entry = registry.entry(name)
    assert isinstance(codec, Codec)
    assert codec.name == name
    assert codec.archive_can_write is entry.archive_can_write
    assert isinstance(codec, RatedCodec) is entry.rated
    assert codec.version.strip() == codec.version != ""


def check_settings(codec: Codec) -> None:
    """Settings go to canonical text and back to an equal codec."""
    text = registry.settings_text(codec.settings)
    again = registry.from_settings(codec.name, json.loads(text))
    assert again == codec
    assert hash(again) == hash(codec)
    assert registry.settings_text(again.settings) == text


def check_round_trip(codec: Codec, before: Raster) -> None:
    """Shape and sample type survive, all values within the error that is promised; constants stay."""
    samples = back(codec, before)
    assert samples.shape == before.samples.shape
    assert samples.dtype == before.samples.dtype
    assert before.format.lowest <= int(samples.min())
    assert int(samples.max()) <= before.format.highest
    off_by = int(np.abs(samples.astype(np.int64) - before.samples).max())
    if codec.error_bound is not None:
        assert off_by <= codec.error_bound
    if before.samples.min() == before.samples.max():
        assert off_by <= constants_may_move(codec, before.format)


def constants_may_move(codec: Codec, form: PixelFormat) -> int:
    """Largest error of a constant frame at a codec's default settings.

    Colour transforms round, and so do quantisers; that of JPEG XL, whose distance is one of appearance, by up to 0.4 %
    of the range at a distance of 1 (as measured over all grey levels of 8, 12 and 16 bits; no source).
    """
    if codec.reversible or (codec.name in EXACT_CONSTANTS and form.channels == 1):
        return 0
    return max(1, (form.highest - form.lowest) // 200) if codec.name == "jpegxl" else 1


def check_refusal(codec: Codec, before: Raster) -> None:
    """What a codec says it refuses, it refuses by name."""
    if codec.refuses(before.format, before.shape) is not None:
        with pytest.raises(CannotEncode, match=codec.name):
            codec.encode(before)


def check_determinism(codec: Codec, before: Raster) -> None:
    """The same raster gives the same bytes, and writing leaves it untouched."""
    kept = before.samples.copy()
    assert codec.encode(before) == codec.encode(Raster(kept.copy(), before.format))
    assert np.array_equal(before.samples, kept)


def check_carriage(codec: Codec, form: PixelFormat) -> None:
    """The code holds every bit stored, and a sign where no offset takes it away."""
    carriage = codec.carriage(form)
    assert carriage.precision >= form.bits_stored
    assert carriage.offset in (0, -form.lowest)
    assert carriage.scale == 1.0
    lowest, highest = form.lowest + carriage.offset, form.highest + carriage.offset
    assert highest < 1 << (carriage.precision - (1 if lowest < 0 else 0))
    # A code of a reversible codec, or one of the bits stored, holds nothing that could be clipped.
    irreversible = not codec.reversible and carriage.precision > form.bits_stored
    assert carriage.clipped_on_reading is irreversible


def check_values_beyond_the_bits(codec: Codec) -> None:
    """Samples outside their own format are refused, never clipped in silence."""
    for form, value, message in (
        (PixelFormat(16, 12, False, "MONOCHROME2"), 4096, r"0 to 4096, expected 0 to 4095"),
        (PixelFormat(16, 12, True, "MONOCHROME2"), -2049, r"-2049 to 0, expected -2048 to 2047"),
    ):
        samples = np.zeros((64, 64), form.dtype)
        samples[5, 7] = value
        with pytest.raises(CannotEncode, match=message):
            codec.encode(Raster(samples, form))


def check_other_frame_is_corrupt(codec: Codec) -> None:
    """A code of one format and shape is no code of another."""
    form = PixelFormat(16, 12, False, "MONOCHROME2")
    code = codec.encode(raster(form, (64, 70), "slopes"))
    others = (
        (form, (70, 64)),
        (form, (64, 71)),
        (PixelFormat(16, 12, True, "MONOCHROME2"), (64, 70)),
        (PixelFormat(16, 12, False, "RGB"), (64, 70)),
        (EIGHT, (64, 70)),
    )
    for other, shape in others:
        if other.signed and codec.carriage(other).offset:
            continue  # No sign in such a code's header; the row tells the offset.
        if codec.name == "rle-reversible" and shape[0] * shape[1] == 64 * 70 and other.channels == 1 and other != EIGHT:
            continue  # Neither sign nor size in its header: the row tells them.
        with pytest.raises(CorruptCode):
            codec.decode(code, other, shape)


def check_size(codec: RatedCodec, before: Raster, ratio: float) -> Reached:
    """The asked size is met, or it is said why not; the settings that were found write the same code again."""
    target = before.size_bytes(SizeBasis.BITS_STORED) / ratio
    encoded = codec.encode_to_size(before, target)
    size = len(encoded.code)
    if encoded.reached is Reached.ASKED:
        assert abs(size / target - 1) <= RATE_TOLERANCE
    elif encoded.reached is Reached.CODEC_FLOOR:
        assert size > target
    elif encoded.reached in (Reached.CODEC_CEILING, Reached.REVERSIBLE_SMALLER):
        assert size < target
    elif encoded.reached is Reached.SMALL_FRAME:
        assert target < EXEMPT_BYTES
    elif encoded.reached is Reached.BRACKET:
        assert encoded.neighbour is not None
        assert encoded.neighbour.reached is Reached.BRACKET
        assert size <= target < len(encoded.neighbour.code)
        dials = [found.settings[codec.dial] for found in (encoded, encoded.neighbour)]
        assert abs(float(dials[0]) - float(dials[1])) == 1
        assert registry.from_settings(codec.name, encoded.neighbour.settings).encode(before) == encoded.neighbour.code
    assert (encoded.neighbour is not None) is (encoded.reached is Reached.BRACKET)
    assert registry.from_settings(codec.name, encoded.settings).encode(before) == encoded.code
    assert encoded == codec.encode_to_size(before, target)
    return encoded.reached


def corruptions(code: bytes, count: int, seed: int) -> Iterator[bytes]:
    """Yield seeded damage: flipped bits, overwritten headers, cuts, bursts, moved blocks."""
    rng = np.random.default_rng(seed)
    for number in range(count):
        damaged = bytearray(code)
        at = int(rng.integers(len(damaged)))
        kind = number % 5
        if kind == 0:
            damaged[at] ^= 1 << int(rng.integers(8))
        elif kind == 1:
            damaged[int(rng.integers(min(len(damaged), 160)))] = int(rng.integers(256))
        elif kind == 2:
            del damaged[at:]
        elif kind == 3:
            burst = rng.bytes(int(rng.integers(1, 40)))
            damaged[at : at + len(burst)] = burst
        else:
            length = int(rng.integers(1, 60))
            damaged[at:at] = damaged[:length] if number % 2 else bytes(length)
        yield bytes(damaged)


def check_corruption(codec: Codec, before: Raster, count: int, seed: int) -> Counter[str]:
    """Damage gives `CorruptCode` or an array of the declared shape and range, within ten times the usual time."""
    code = codec.encode(before)
    usual = _seconds(codec, code, before, 5)
    seen: Counter[str] = Counter()
    for damaged in corruptions(code, count, seed):
        began = time.perf_counter()
        try:
            samples = codec.decode(damaged, before.format, before.shape)
        except CorruptCode:
            seen["corrupt"] += 1
        else:
            seen["decoded"] += 1
            assert samples.shape == before.samples.shape
            assert samples.dtype == before.samples.dtype
            assert before.format.lowest <= int(samples.min())
            assert int(samples.max()) <= before.format.highest
        if time.perf_counter() - began > 10 * usual:
            # The machine may have been busy elsewhere: the best of three more tells.
            assert _seconds(codec, damaged, before, 3) <= 10 * usual, damaged.hex()
    return seen


def _seconds(codec: Codec, code: bytes, before: Raster, times: int) -> float:
    """Shortest time of several readings."""
    shortest = float("inf")
    for _ in range(times):
        began = time.perf_counter()
        with contextlib.suppress(CorruptCode):
            codec.decode(code, before.format, before.shape)
        shortest = min(shortest, time.perf_counter() - began)
    return shortest
