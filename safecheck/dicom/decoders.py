"""One pinned decoder for each transfer syntax, and a second, independent one where the machine has it.

Every decoder takes the code stream of one frame and gives (rows, columns) or (rows, columns, 3) integers as coded:
channels are neither scaled nor reordered, and only colour transforms that belong to the code stream are undone.
"""

from __future__ import annotations

import itertools
import struct
import sys
from collections.abc import Callable
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt
from pydicom.encaps import encapsulate
from pydicom.pixels.decoders.base import get_decoder
from pydicom.uid import RLELossless

from safecheck.dicom.decoder_libraries import OPENJPEG, is_here, load_imagecodecs, load_openjpeg
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.stream_facts import StreamFacts
from safecheck.dicom.syntaxes import ROOT
from safecheck.errors import InputRefused

__all__ = ["DECODERS", "Decoder", "decode", "rebuild_jpeg", "second_opinion"]

_PACKBITS_RUN = 128
"""Bytes that two bytes of PackBits can stand for at most (PS3.5 G.3.1)."""
_Array = npt.NDArray[Any]
_Decode = Callable[[bytes, PixelHeader, "StreamFacts | None"], _Array]


@dataclass(frozen=True, slots=True)
class Decoder:
    """Who decodes a syntax."""

    library: str
    part: str
    """What of imagecodecs it needs."""
    run: _Decode
    processes: tuple[str, ...] = ()
    """Processes that the code stream may name under this syntax; empty where it names none."""
    second_library: str = ""
    """'' where no second decoder is among the runtime dependencies."""
    second: _Decode | None = None
    second_part: str = ""
    """What of imagecodecs the second needs, or `OPENJPEG`; '' for nothing."""

    @property
    def available(self) -> bool:
        """Whether this machine has it."""
        return is_here(self.part)

    @property
    def second_available(self) -> bool:
        """Whether there is a second decoder, and this machine has it."""
        return self.second is not None and (not self.second_part or is_here(self.second_part))


def _rle(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    """RLE Lossless (PS3.5 Annex G): a byte plane per segment, the most significant byte of each channel first."""
    depth = header.bits_allocated // 8
    if len(code) < 64:
        raise InputRefused("truncated", "the RLE header is cut")
    count, *starts = struct.unpack_from("<16I", code)
    if count != header.channels * depth:
        raise InputRefused("length", f"{count} RLE segments, expected {header.channels * depth}")
    bounds = [*starts[:count], len(code)]
    if bounds[0] < 64 or any(a >= b for a, b in itertools.pairwise(bounds)):
        raise InputRefused("decode", "the RLE segments overlap or lie outside the frame")
    pixels = header.rows * header.columns
    if any((b - a) * _PACKBITS_RUN // 2 < pixels for a, b in itertools.pairwise(bounds)):
        raise InputRefused("truncated", "an RLE segment is too short for the samples of the frame")
    out = np.empty((pixels, header.channels, depth), dtype=np.uint8)
    for segment in range(count):
        # With room for one run of padding and no more: what unpacks to far more than the frame is refused.
        plane = load_imagecodecs().packbits_decode(
            code[bounds[segment] : bounds[segment + 1]], out=pixels + _PACKBITS_RUN
        )
        if len(plane) < pixels:
            raise InputRefused("truncated", "an RLE segment holds fewer samples than the frame")
        channel, byte = divmod(segment, depth)
        out[:, channel, depth - 1 - byte] = np.frombuffer(plane, dtype=np.uint8, count=pixels)
    return out.view(f"<u{depth}").reshape(header.shape).astype(header.container, copy=False)


def _rle_second(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    options: dict[str, Any] = {
        "rows": header.rows,
        "columns": header.columns,
        "samples_per_pixel": header.channels,
        "bits_allocated": header.bits_allocated,
        "bits_stored": header.bits_allocated,
        "pixel_representation": 0,
        "photometric_interpretation": "RGB" if header.channels == 3 else "MONOCHROME2",
        "planar_configuration": 0,
        "number_of_frames": 1,
        "pixel_keyword": "PixelData",
        "decoding_plugin": "pydicom",
    }
    with quiet_library():
        fragments = encapsulate([code], has_bot=False)
        return get_decoder(RLELossless).as_array(fragments, index=0, raw=True, **options)[0]


def _jpeg(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:
    if header.channels == 1 or facts is None:
        return np.asarray(load_imagecodecs().jpeg8_decode(code))
    marked = facts.coded_colour or ("RGB" if header.photometric == "RGB" else "YBR")
    if facts.process == "lossless":
        marked = "RGB"  # no transform belongs to the lossless process: channels as they are
    colours = {"RGB": "RGB", "YBR": "YCBCR"}
    return np.asarray(load_imagecodecs().jpeg8_decode(code, colorspace=colours[marked], outcolorspace="RGB"))


def _jpeg_lossless_second(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    return np.asarray(load_imagecodecs().jpegsof3_decode(code))


def _jpeg_ls(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    return np.asarray(load_imagecodecs().jpegls_decode(code))


def _jpeg2000(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    return np.asarray(load_imagecodecs().jpeg2k_decode(code, numthreads=1))


def _jpeg2000_second(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    return np.asarray(load_openjpeg().decode(code, j2k_format=0))


def _htj2k_second(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    """OpenJPH. Its binding drops the library's errors and gives an array half filled: hence never the pinned one."""
    dropped: list[object] = []
    before = sys.unraisablehook
    sys.unraisablehook = dropped.append
    try:
        samples = np.asarray(load_imagecodecs().htj2k_decode(code))
    finally:
        sys.unraisablehook = before
    if dropped:
        raise InputRefused("decode", "the decoder dropped an error")
    return samples


def _jpeg_xl(code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:  # noqa: ARG001
    return np.asarray(load_imagecodecs().jpegxl_decode(code, numthreads=1))


def rebuild_jpeg(code: bytes) -> bytes:
    """JPEG stream that a JPEG XL container was made from, byte for byte.

    Raises
    ------
    InputRefused
        'decode'.
    """
    try:
        return bytes(load_imagecodecs().jpegxl_decode_jpeg(code, numthreads=1))
    except Exception as error:
        raise InputRefused("decode", f"{type(error).__name__} from the decoder") from None


_TURBO, _SOF3 = "libjpeg-turbo (imagecodecs)", "jpegsof3 (imagecodecs)"
_OPENJPEG = "OpenJPEG (imagecodecs)"
_LOSSLESS = Decoder(_TURBO, "JPEG8", _jpeg, ("lossless",), _SOF3, _jpeg_lossless_second, "JPEGSOF3")
_J2K = Decoder(
    _OPENJPEG, "JPEG2K", _jpeg2000, ("jpeg2000",), "OpenJPEG (pylibjpeg-openjpeg)", _jpeg2000_second, OPENJPEG
)
_HT = Decoder(_OPENJPEG, "JPEG2K", _jpeg2000, ("htj2k",), "OpenJPH (imagecodecs)", _htj2k_second, "HTJ2K")
_XL = Decoder("libjxl (imagecodecs)", "JPEGXL", _jpeg_xl)

DECODERS: MappingProxyType[str, Decoder] = MappingProxyType(
    {
        f"{ROOT}.5": Decoder("PackBits (imagecodecs)", "PACKBITS", _rle, (), "pydicom", _rle_second),
        f"{ROOT}.4.50": Decoder(_TURBO, "JPEG8", _jpeg, ("baseline",)),
        f"{ROOT}.4.51": Decoder(_TURBO, "JPEG8", _jpeg, ("baseline", "extended")),
        f"{ROOT}.4.53": Decoder(_TURBO, "JPEG8", _jpeg, ("progressive",)),
        f"{ROOT}.4.55": Decoder(_TURBO, "JPEG8", _jpeg, ("progressive",)),
        f"{ROOT}.4.57": _LOSSLESS,
        f"{ROOT}.4.70": _LOSSLESS,
        f"{ROOT}.4.80": Decoder("CharLS (imagecodecs)", "JPEGLS", _jpeg_ls, ("jpeg-ls",)),
        f"{ROOT}.4.81": Decoder("CharLS (imagecodecs)", "JPEGLS", _jpeg_ls, ("jpeg-ls",)),
        f"{ROOT}.4.90": _J2K,
        f"{ROOT}.4.91": _J2K,
        f"{ROOT}.4.201": _HT,
        f"{ROOT}.4.202": _HT,
        f"{ROOT}.4.203": _HT,
        f"{ROOT}.4.110": _XL,
        f"{ROOT}.4.111": _XL,
        f"{ROOT}.4.112": _XL,
    }
)
"""Pinned decoder by transfer syntax UID; uncompressed syntaxes need none."""


def decode(uid: str, code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:
    """Decode one frame with the pinned decoder.

    Parameters
    ----------
    uid
        Transfer syntax, a key of `DECODERS`.
    code
        Code stream of the frame.
    header, facts
        What the header and the code stream declare; already held against each other.

    Returns
    -------
    numpy.ndarray
        `header.shape`, integers as coded.

    Raises
    ------
    InputRefused
        'decode': the library refuses the stream, or gives another shape or type; 'truncated', 'length' for RLE.
    """
    return _checked(DECODERS[uid].run, code, header, facts)


def second_opinion(uid: str, code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array | None:
    """Decode one frame with the second decoder of its syntax; None where there is none, or not on this machine.

    Raises
    ------
    InputRefused
        As `decode`.
    """
    decoder = DECODERS[uid]
    if decoder.second is None or not decoder.second_available:
        return None
    return _checked(decoder.second, code, header, facts)


def _checked(run: _Decode, code: bytes, header: PixelHeader, facts: StreamFacts | None) -> _Array:
    try:
        samples = run(code, header, facts)
    except InputRefused:
        raise
    except ImportError:
        raise InputRefused("decode", "the decoder is not available here") from None
    except Exception as error:
        # The one seam to the decoding libraries, which share no base of errors.
        raise InputRefused("decode", f"{type(error).__name__} from the decoder") from None
    if samples.shape != header.shape:
        raise InputRefused("length", "the code stream holds another number of samples than the header declares")
    if samples.dtype.kind not in "iu" or samples.dtype.itemsize > 2:
        raise InputRefused("bits", "the code stream holds samples that are not 8 or 16 bit integers")
    return samples
