"""JPEG-LS as both of its codecs write it: CharLS, at the true precision where pyjpegls is on the machine.

The JPEG-LS of imagecodecs cannot be told a precision and writes 8 or 16 bits; pyjpegls writes the bits stored, and its
code is up to 3 % smaller. It has no wheel for the newest Python, so imagecodecs writes in its place there, and the
row's precision and version say so. imagecodecs reads both. Neither takes a sign: signed samples are offset by half
their range.
"""

from __future__ import annotations

import importlib
import importlib.util

from safecheck.codecs.base import Carriage, Codec, admit, fitted
from safecheck.codecs.libraries import carried_by, imagecodecs_with
from safecheck.codecs.library_calls import reading, writing
from safecheck.codecs.offsets import narrow_type, offset_of, to_signed, to_unsigned, within
from safecheck.codecs.stream_headers import check_jpegls
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["carriage", "read", "version", "write"]

_LEAST_PRECISION = 2
"""ISO/IEC 14495-1 C.2.2: P is 2 to 16."""
_BY_PIXEL = 2
"""Interleave mode of colour."""
_HEADROOM_BYTES = 4096


def _writes_true_precision() -> bool:
    """Whether the library that can be told a precision is here."""
    return importlib.util.find_spec("_CharLS") is not None


def version() -> str:
    """Name the library that writes, with its version, and the one that reads where it is another."""
    reader = carried_by(imagecodecs_with("JPEGLS").jpegls_version(), "imagecodecs")
    return f"{carried_by('CharLS', 'pyjpegls')}, read by {reader}" if _writes_true_precision() else reader


def carriage(form: PixelFormat, *, reversible: bool) -> Carriage:
    """Unsigned, at the bits stored (at least 2), or in whole bytes where only imagecodecs writes."""
    precision = _precision(form)
    return Carriage(precision, offset_of(form), clipped_on_reading=not reversible and precision > form.bits_stored)


def _precision(form: PixelFormat) -> int:
    """Bits a sample that the code stream declares."""
    true = max(form.bits_stored, _LEAST_PRECISION)
    return true if _writes_true_precision() else 8 * narrow_type(form).itemsize


def write(codec: Codec, raster: Raster, near: int) -> bytes:
    """Write a raster with a largest error.

    Raises
    ------
    CannotEncode
        Where the codec refuses, or the library does.
    CodecUnavailable
        Where the library is missing.
    """
    admit(codec, raster)
    imagecodecs_with("JPEGLS")
    with writing(codec.name, "CharLS"):
        code = (_write_true if _writes_true_precision() else _write_bytes)(raster, near)
        check_jpegls(code, _precision(raster.format), raster.format.channels, raster.shape, range(near, near + 1))
    return code


def _write_true(raster: Raster, near: int) -> bytes:
    """Write with pyjpegls.

    Its public call makes room for twice the samples, too little for the header of a few pixels; the one below makes
    room for twice the bytes it is handed, and reads no more of them than the frame has.
    """
    form = raster.format
    mode = _BY_PIXEL if form.channels == 3 else 0
    samples = to_unsigned(raster).tobytes()
    room = bytes(len(samples) + _HEADROOM_BYTES)
    library = importlib.import_module("_CharLS")
    return bytes(library._encode(samples + room, near, mode, *raster.shape, form.channels, form.bits_stored))


def _write_bytes(raster: Raster, near: int) -> bytes:
    """Write with imagecodecs, into a buffer of ours: noise can come out larger than it went in."""
    unsigned = to_unsigned(raster)
    room = 2 * unsigned.nbytes + _HEADROOM_BYTES
    return bytes(imagecodecs_with("JPEGLS").jpegls_encode(unsigned, level=near, out=room))


def read(codec: Codec, code: bytes, form: PixelFormat, shape: tuple[int, int], nears: range) -> Samples:
    """Read a code back with the CharLS in imagecodecs; its own header tells the largest error, out of those expected.

    Raises
    ------
    CorruptCode
        If the bytes cannot be read, or give another shape, precision or range.
    CodecUnavailable
        Where the library is missing.
    """
    library = imagecodecs_with("JPEGLS")
    near = check_jpegls(code, _precision(form), form.channels, shape, nears)
    with reading(codec.name, "CharLS"):
        decoded = library.jpegls_decode(code)
    samples = to_signed(decoded, form)
    if near and int(samples.max()) > form.highest + near:
        raise CorruptCode(f"{codec.name}: decoded to a value above {form.highest} by more than {near}")
    return fitted(within(samples, form) if near else samples, codec.name, form, shape)
