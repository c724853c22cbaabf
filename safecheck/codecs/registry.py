"""The only registry: names to codecs. Codecs that an archive can write stand first.

A codec's module, and with it a library, loads when the codec is first asked for.
"""

from __future__ import annotations

import dataclasses
import importlib
import importlib.util
import json
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import cast

import numpy as np

from safecheck.codecs.base import Codec, RatedCodec, Settings
from safecheck.errors import CannotEncode, CodecUnavailable, UsageError
from safecheck.frames import PixelFormat, Raster

__all__ = [
    "ENTRIES",
    "Entry",
    "available",
    "codec",
    "entry",
    "from_settings",
    "load_kernels",
    "names",
    "rated",
    "rated_names",
    "reversible_form",
    "reversible_names",
    "settings_text",
]


@dataclass(frozen=True, slots=True)
class Entry:
    """Where a codec is found, and what can be said of it without loading it."""

    module: str
    kind: str
    """Name of the class in the module."""
    library: str
    """Distribution, or distributions, that carry it."""
    needs: str
    """Modules, parted by spaces, whose presence tells whether the codec works here."""
    dial: str
    """Name of the setting by which its size is set; '' where it cannot be asked for a size."""
    archive_can_write: bool
    reversible_form: tuple[str, Settings] | None = None
    """Name and settings of the codec of the same family that gives every sample back."""

    @property
    def rated(self) -> bool:
        """Whether it can be asked for a size."""
        return bool(self.dial)


_IMAGECODECS = ("imagecodecs", "imagecodecs")
_CHARLS = ("imagecodecs, and pyjpegls to write the true precision", "imagecodecs")
_OPENJPEG = ("pylibjpeg-openjpeg", "openjpeg")
_BOTH = ("imagecodecs and pylibjpeg-openjpeg", "imagecodecs openjpeg")
_NONE: Settings = MappingProxyType({})

ENTRIES: Mapping[str, Entry] = MappingProxyType(
    {
        "jpeg2000": Entry(
            "safecheck.codecs.jpeg2000", "Jpeg2000", *_OPENJPEG, "ratio", True, ("jpeg2000-reversible", _NONE)
        ),
        "jpeg": Entry("safecheck.codecs.jpeg", "Jpeg", *_IMAGECODECS, "quality", True),
        "jpegls": Entry("safecheck.codecs.jpegls", "JpegLs", *_CHARLS, "near", True, ("jpegls-reversible", _NONE)),
        "htj2k": Entry("safecheck.codecs.htj2k", "Htj2k", *_BOTH, "step", True, ("htj2k-reversible", _NONE)),
        "jpegxl": Entry(
            "safecheck.codecs.jpegxl", "JpegXl", *_IMAGECODECS, "distance", True, ("jpegxl-reversible", _NONE)
        ),
        "jpegls-reversible": Entry("safecheck.codecs.reversible", "JpegLsLossless", *_CHARLS, "", True),
        "jpeg2000-reversible": Entry("safecheck.codecs.reversible", "Jpeg2000Lossless", *_IMAGECODECS, "", True),
        "htj2k-reversible": Entry("safecheck.codecs.htj2k", "Htj2kLossless", *_BOTH, "", True),
        "jpegxl-reversible": Entry("safecheck.codecs.jpegxl", "JpegXlLossless", *_IMAGECODECS, "", True),
        "rle-reversible": Entry("safecheck.codecs.rle", "RleLossless", *_IMAGECODECS, "", True),
        # The finest step there is.
        "tiled": Entry(
            "safecheck.codecs.tile.codec",
            "Tiled",
            "numba",
            "numba",
            "step",
            False,
            ("tiled", MappingProxyType({"step": 0.125})),
        ),
    }
)
"""Every codec, in the order in which outputs name them."""


def names() -> tuple[str, ...]:
    """Names of all codecs, those that an archive can write first."""
    return tuple(ENTRIES)


def rated_names() -> tuple[str, ...]:
    """Names of the codecs that can be asked for a size: what a plan may propose."""
    return tuple(name for name, found in ENTRIES.items() if found.rated)


def reversible_names() -> tuple[str, ...]:
    """Names of the codecs without a dial, which give every sample back: for controls and the ledger."""
    return tuple(name for name, found in ENTRIES.items() if not found.rated)


def entry(name: str) -> Entry:
    """Look a codec up without loading it.

    Raises
    ------
    UsageError
        If no codec has that name.
    """
    try:
        return ENTRIES[name]
    except KeyError:
        raise UsageError(f"codec {name!r} is unknown, expected one of {', '.join(ENTRIES)}") from None


def available(name: str) -> bool:
    """Whether this machine has the library that a codec needs.

    Raises
    ------
    UsageError
        If no codec has that name.
    """
    return all(importlib.util.find_spec(module) is not None for module in entry(name).needs.split())


def codec(name: str, **settings: str | float | bool) -> Codec:
    """Make a codec; settings not named keep their defaults.

    Parameters
    ----------
    name
        One of `names`.
    **settings
        The codec's own.

    Raises
    ------
    UsageError
        If no codec has that name, or a setting is unknown or out of range.
    CodecUnavailable
        If the codec's module cannot be loaded here.
    """
    kind = _kind(name)
    known = [field.name for field in dataclasses.fields(cast("type", kind)) if field.init]
    for key in settings:
        if key not in known:
            expected = f"one of {', '.join(known)}" if known else "none"
            raise UsageError(f"codec {name}: setting {key!r} is unknown, expected {expected}")
    try:
        return kind(**settings)
    except (TypeError, ValueError, CannotEncode) as error:
        raise UsageError(f"codec {name}: {error}") from error


def rated(name: str, **settings: str | float | bool) -> RatedCodec:
    """Make a codec that can be asked for a size.

    Raises
    ------
    UsageError
        As in `codec`, and if the codec has no dial.
    CodecUnavailable
        As in `codec`.
    """
    if not entry(name).rated:
        raise UsageError(f"codec {name} cannot be asked for a size, expected one of {', '.join(rated_names())}")
    return cast("RatedCodec", codec(name, **settings))


def reversible_form(name: str) -> Codec | None:
    """Make the codec of the same family that gives every sample back: its own reversible control.

    Parameters
    ----------
    name
        Of a rated codec.

    Returns
    -------
    Codec or None
        None where the family has no such form.

    Raises
    ------
    UsageError
        If no codec has that name.
    CodecUnavailable
        If the codec's module cannot be loaded here.
    """
    form = entry(name).reversible_form
    return codec(form[0], **form[1]) if form else None


def load_kernels(adaptive: bool = False) -> None:
    """Compile what the codecs compile, or take it from the disk: once in a parent process, before workers start.

    What chosen tile sizes need of it takes as long again, and is asked for by `adaptive`.
    """
    samples = (np.arange(48 * 40).reshape(48, 40) * 7 % 4096).astype(np.uint16)
    padding = np.zeros(samples.shape, dtype=np.bool_)
    padding[:8] = True
    form = PixelFormat(16, 12, False, "MONOCHROME2")
    raster = Raster(samples, form, padding)
    for size in (8, "adaptive") if adaptive else (8,):
        tiled = cast(RatedCodec, codec("tiled", size=size))
        tiled.decode(tiled.encode_to_size(raster, 600.0).code, form, raster.shape)


def from_settings(name: str, settings: Settings) -> Codec:
    """Make the codec that has these settings, all of them named.

    Raises
    ------
    UsageError
        As in `codec`, and if a setting is missing.
    CodecUnavailable
        As in `codec`.
    """
    made = codec(name, **settings)
    missing = sorted(set(made.settings) - set(settings))
    if missing:
        raise UsageError(f"codec {name}: setting {missing[0]!r} is missing")
    return made


def settings_text(settings: Settings) -> str:
    """Settings as JSON with sorted keys and no spaces: equal text for equal codecs."""
    return json.dumps(dict(settings), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def _kind(name: str) -> type[Codec]:
    """Load a codec's class."""
    found = entry(name)
    try:
        module = importlib.import_module(found.module)
    except ImportError as error:
        raise CodecUnavailable(f"codec {name} is not available here: {found.library} is missing") from error
    return cast("type[Codec]", getattr(module, found.kind))
