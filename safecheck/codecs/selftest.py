"""Which codecs work on this machine, and whether what is called reversible is.

The rasters are made here from whole numbers alone, so the same check runs everywhere and holds nobody's image.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np

from safecheck.codecs import registry
from safecheck.codecs.base import Codec, RatedCodec
from safecheck.codecs.libraries import imagecodecs_with
from safecheck.errors import CodecError, CodecUnavailable
from safecheck.frames import PixelFormat, Raster, Samples, SizeBasis

__all__ = ["CodecCheck", "check", "run"]

_SHAPE = (67, 83)
"""Odd, not square, above every codec's smallest side."""
_LARGEST_SHARE = 0.05
"""At a ratio of 2 no sample of these rasters may be off by more than this share of the range."""
_EVERY_DEPTH = range(1, 17)
_SOME_DEPTHS = (8, 12, 16)


@dataclass(frozen=True, slots=True)
class CodecCheck:
    """What was found of one codec on this machine."""

    codec: str
    library: str
    """Distribution that carries it."""
    version: str
    """Empty where the codec is not available."""
    available: bool
    """The library is here and did what was asked of it."""
    reversible_exact: bool | None
    """Every sample came back; None for codecs that are not reversible, or not available."""
    detail: str


def run() -> tuple[CodecCheck, ...]:
    """Check every codec of the registry, in its order."""
    return tuple(check(name) for name in registry.names())


def check(name: str) -> CodecCheck:
    """Check one codec of the registry.

    Raises
    ------
    UsageError
        If no codec has that name.
    """
    library = registry.entry(name).library
    missing = CodecCheck(name, library, "", False, None, "not available here")
    if not registry.available(name):
        return missing
    try:
        return _check(registry.codec(name), library)
    except CodecUnavailable:
        # A library that is here may have been built without the part that a codec needs.
        return missing


def _check(codec: Codec, library: str) -> CodecCheck:
    """Check a codec whose library is here."""
    version = codec.version
    rasters = _rasters(_EVERY_DEPTH if codec.reversible else _SOME_DEPTHS)
    taken = [raster for raster in rasters if codec.refuses(raster.format, raster.shape) is None]
    fault = next((fault for raster in taken if (fault := _fault(codec, raster))), "")
    exact = not fault if codec.reversible else None
    return CodecCheck(codec.name, library, version, not fault, exact, fault or _held(codec, taken))


def _held(codec: Codec, rasters: list[Raster]) -> str:
    """Say what was checked where nothing was found."""
    depths = sorted({raster.format.bits_stored for raster in rasters})
    text = f"{len(rasters)} rasters of {depths[0]} to {depths[-1]} bits, grey and colour, signed and unsigned"
    if codec.reversible:
        return f"bit-exact on {text}"
    if codec.error_bound is not None:
        return f"no sample off by more than promised on {text}"
    if codec.name != "jpeg2000":
        return f"written and read: {text}"
    agreed = "a second decoder agrees, within 1 in colour" if _second_decoder() else "no second decoder here"
    return f"written and read: {text}; {agreed}"


def _fault(codec: Codec, raster: Raster) -> str:
    """Say what is wrong with a raster that was written and read; empty where nothing is."""
    form = raster.format
    name = f"{form.bits_stored} bits {'signed' if form.signed else 'unsigned'} {form.photometric}"
    try:
        code, allowed = _written(codec, raster)
        back = codec.decode(code, form, raster.shape)
    except CodecUnavailable:
        raise
    except CodecError as error:
        return f"{name}: {error}"
    largest = int(np.abs(back.astype(np.int64) - raster.samples.astype(np.int64)).max())
    if largest > allowed:
        return f"{name}: a sample came back off by {largest}"
    if codec.name == "jpeg2000" and not _decoders_agree(code, back):
        return f"{name}: two JPEG 2000 decoders disagree"
    return ""


def _written(codec: Codec, raster: Raster) -> tuple[bytes, float]:
    """Code of about half the bits-stored size, or of a reversible codec; and the largest error that is allowed."""
    if codec.reversible or not isinstance(codec, RatedCodec):
        return codec.encode(raster), 0.0
    encoded = codec.encode_to_size(raster, raster.size_bytes(SizeBasis.BITS_STORED) / 2)
    promised = registry.from_settings(codec.name, encoded.settings).error_bound
    if promised is not None:
        return encoded.code, promised
    return encoded.code, _LARGEST_SHARE * (raster.format.highest - raster.format.lowest)


def _second_decoder() -> bool:
    """Whether the other JPEG 2000 decoder is here."""
    try:
        return bool(registry.codec("jpeg2000-reversible").version)
    except CodecUnavailable:
        return False


def _decoders_agree(code: bytes, decoded: Samples) -> bool:
    """Whether imagecodecs reads the same samples, in colour within 1; true where it is missing.

    The irreversible colour transform is rounded from single precision, which builds of OpenJPEG do in unlike order.
    """
    if not _second_decoder():
        return True
    second = imagecodecs_with("JPEG2K")
    try:
        again = second.jpeg2k_decode(code, numthreads=1)
    except RuntimeError:
        return False
    apart = np.abs(again.astype(np.int64) - decoded.astype(np.int64)).max()
    return bool(apart <= (0 if decoded.ndim == 2 else 1))


def _rasters(depths: Iterable[int]) -> Iterator[Raster]:
    """Yield slopes with a little noise over the whole range of each format, grey and colour."""
    rows, columns = np.mgrid[: _SHAPE[0], : _SHAPE[1]].astype(np.int64)
    slope = np.abs((rows * 1000 + columns * 613) % 131072 - 65536)
    # Multiplicative hashing: as good as noise here, and the same on every machine and NumPy.
    noise = ((rows * _SHAPE[1] + columns) * 2654435761 % (1 << 32)) >> 23
    grey = np.clip(slope + noise, 0, 65535)
    photometrics: tuple[Literal["MONOCHROME2", "RGB"], ...] = ("MONOCHROME2", "RGB")
    for bits in depths:
        for signed in (False, True):
            for photometric in photometrics:
                form = PixelFormat(8 if bits <= 8 else 16, bits, signed, photometric)
                planes = grey if form.channels == 1 else np.stack([grey, grey[::-1], grey[:, ::-1]], axis=-1)
                yield Raster(((planes >> (16 - bits)) + form.lowest).astype(form.dtype), form)
