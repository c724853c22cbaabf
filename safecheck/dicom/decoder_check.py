"""Which decoders work on this machine: a seeded pattern through each reversible syntax and back, by both decoders."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.dicom.decoder_libraries import load_imagecodecs
from safecheck.dicom.decoders import DECODERS
from safecheck.dicom.frame_pixels import read_frame_pixels, second_frame_pixels
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.dicom.syntaxes import ROOT, syntax_of
from safecheck.errors import InputRefused
from safecheck.frames import Samples

__all__ = ["DecoderCheck", "check_decoders"]

_ROWS, _COLUMNS, _BITS = 67, 83, 12


@dataclass(frozen=True, slots=True)
class DecoderCheck:
    """What one syntax gave."""

    syntax: str
    """Name of the transfer syntax."""
    library: str
    """Pinned decoder."""
    second_library: str
    """Second decoder, '' where none is installed with the program or this machine lacks it."""
    available: bool
    """This machine has the pinned decoder."""
    exact: bool | None
    """The pinned decoder gave the samples that were coded, bit for bit; None where nothing here writes the syntax."""
    agree: bool | None
    """The second decoder gave the same; None where there is none."""


def check_decoders() -> tuple[DecoderCheck, ...]:
    """Check every syntax of `DECODERS`, in their order."""
    samples = np.random.default_rng(20).integers(0, 1 << _BITS, (_ROWS, _COLUMNS)).astype(np.uint16)
    return tuple(_check(uid, samples) for uid in DECODERS)


def _check(uid: str, samples: Samples) -> DecoderCheck:
    decoder = DECODERS[uid]
    second_library = decoder.second_library if decoder.second_available else ""
    exact = agree = None
    code = _written(uid, samples) if decoder.available else None
    if code is not None:
        exact, agree = _round_trip(uid, code, samples)
    return DecoderCheck(syntax_of(uid).name, decoder.library, second_library, decoder.available, exact, agree)


def _written(uid: str, samples: Samples) -> bytes | None:
    """Code of the samples; None where nothing here writes the syntax."""
    encode = _ENCODERS.get(uid.removeprefix(ROOT))
    if encode is None:
        return None
    try:
        return encode(samples)
    except ImportError:
        return None


def _round_trip(uid: str, code: bytes, samples: Samples) -> tuple[bool, bool | None]:
    syntax = syntax_of(uid)
    try:
        first = read_frame_pixels(code, syntax, _HEADER, little_endian=True).samples
        second = second_frame_pixels(code, syntax, _HEADER)
    except InputRefused:
        return False, None
    return bool(np.array_equal(first, samples)), None if second is None else bool(np.array_equal(second, first))


_HEADER = PixelHeader(
    rows=_ROWS,
    columns=_COLUMNS,
    channels=1,
    bits_allocated=16,
    bits_stored=_BITS,
    high_bit=_BITS - 1,
    signed=False,
    photometric="MONOCHROME2",
    planes=False,
    frames=1,
    overlay_bits=frozenset(),
)


def _rle(samples: npt.NDArray[Any]) -> bytes:
    """RLE Lossless (PS3.5 Annex G): rows of the high bytes, then of the low ones."""
    planes = [(samples >> 8).astype(np.uint8), (samples & 0xFF).astype(np.uint8)]
    segments = []
    for plane in planes:
        coded = b"".join(bytes(load_imagecodecs().packbits_encode(row.tobytes())) for row in plane)
        segments.append(coded + b"\x00" * (len(coded) % 2))
    starts = [64, 64 + len(segments[0])] + [0] * 13
    return np.array([2, *starts], dtype="<u4").tobytes() + b"".join(segments)


def _lossless_jpeg(samples: npt.NDArray[Any]) -> bytes:
    return bytes(load_imagecodecs().jpeg8_encode(samples, lossless=True, predictor=1, bitspersample=_BITS))


def _jpeg_ls(samples: npt.NDArray[Any]) -> bytes:
    return bytes(load_imagecodecs().jpegls_encode(samples))


def _jpeg2000(samples: npt.NDArray[Any]) -> bytes:
    return bytes(
        load_imagecodecs().jpeg2k_encode(samples, level=0, reversible=True, codecformat="J2K", bitspersample=_BITS)
    )


def _htj2k(samples: npt.NDArray[Any]) -> bytes:
    return bytes(load_imagecodecs().htj2k_encode(samples, reversible=True, tlm=True))


def _jpeg_xl(samples: npt.NDArray[Any]) -> bytes:
    return bytes(load_imagecodecs().jpegxl_encode(samples, lossless=True, bitspersample=_BITS))


_ENCODERS: dict[str, Callable[[npt.NDArray[Any]], bytes]] = {
    ".5": _rle,
    ".4.57": _lossless_jpeg,
    ".4.70": _lossless_jpeg,
    ".4.80": _jpeg_ls,
    ".4.81": _jpeg_ls,
    ".4.90": _jpeg2000,
    ".4.91": _jpeg2000,
    ".4.201": _htj2k,
    ".4.202": _htj2k,
    ".4.203": _htj2k,
    ".4.110": _jpeg_xl,
    ".4.112": _jpeg_xl,
}
"""By the end of the UID; baseline, extended, progressive and recompressed JPEG have no reversible form."""
