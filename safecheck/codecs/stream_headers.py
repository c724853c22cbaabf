"""Headers of standard code streams, held against the format before anything is decoded.

Decoders trust a header: one flipped bit there changes the precision or the sign of every sample, or has them set up a
million tiles. Our codecs read only what they wrote, so whatever else a header says is a corrupt code. The same check
after encoding finds a library that quietly wrote another precision or another transform than it was told.

Sources: ISO/IEC 15444-1 Annex A (SIZ, COD) and ISO/IEC 14495-1 Annex C (SOF55, SOS), from memory; the layouts are
confirmed in tests by a second library reading the same streams.
"""

from __future__ import annotations

import struct

from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat

__all__ = ["MOST_LEVELS", "check_jpeg2000", "check_jpegls"]

MOST_LEVELS = 5
"""Wavelet decompositions written by OpenJPEG when not told otherwise."""

_SOC, _SIZ, _COD = b"\xff\x4f", b"\xff\x51", b"\xff\x52"
_SOI, _EOI = b"\xff\xd8", b"\xff\xd9"
_SOF55, _LSE, _SOS = 0xF7, 0xF8, 0xDA
_DEFAULTS_16 = struct.pack(">B5H", 1, 0xFFFF, 18, 67, 276, 64)
"""MAXVAL, T1 to T3 and RESET by default for 16 bits (ISO/IEC 14495-1 C.2.4.1.1), which CharLS writes out."""
_SKIPPED = frozenset({*range(0xE0, 0xF0), 0xFE})
"""APPn and COM: they describe, and change no sample."""


def check_jpeg2000(
    code: bytes,
    form: PixelFormat,
    shape: tuple[int, int],
    *,
    reversible: bool,
) -> None:
    """Hold SIZ and COD of a JPEG 2000 code stream against what our encoders write: one tile, one layer.

    Parameters
    ----------
    code
        Code stream without file boxes.
    form, shape
        Expected pixel format and (rows, columns).
    reversible
        5/3 wavelet and reversible colour transform, rather than 9/7.

    Raises
    ------
    CorruptCode
        If the header says anything else.
    """
    size = _SOC + _siz(form, shape)
    if not code.startswith(size):
        raise CorruptCode("JPEG 2000: size, precision, sign or channels in the header are not the frame's")
    found = code[len(size) : len(size) + 14]
    if len(found) < 14 or found[9] > MOST_LEVELS or found not in _cods(form, found[9], reversible):
        raise CorruptCode("JPEG 2000: the coding style in the header is not the one that was asked for")


def _siz(form: PixelFormat, shape: tuple[int, int]) -> bytes:
    """SIZ marker segment: one tile as large as the image, no subsampling."""
    rows, columns = shape
    component = bytes(((form.bits_stored - 1) | (0x80 if form.signed else 0), 1, 1))
    extents = (columns, rows, 0, 0, columns, rows, 0, 0)
    length = 38 + 3 * form.channels
    return _SIZ + struct.pack(">HH8IH", length, 0, *extents, form.channels) + component * form.channels


def _cods(form: PixelFormat, levels: int, reversible: bool) -> tuple[bytes, ...]:
    """COD marker segments that our encoders may write: LRCP, one layer, 64 x 64 blocks, colour transform or none."""
    transforms = (0, 1) if form.channels == 3 else (0,)
    return tuple(
        _COD + struct.pack(">HBBHBBBBBB", 12, 0, 0, 1, colour, levels, 4, 4, 0, int(reversible))
        for colour in transforms
    )


def check_jpegls(code: bytes, precision: int, channels: int, shape: tuple[int, int]) -> None:
    """Hold the header of a JPEG-LS code stream against the frame: reversible, one scan, default parameters.

    Parameters
    ----------
    code
        Code stream.
    precision
        Expected bits per sample in the stream.
    channels
        Expected components.
    shape
        Expected (rows, columns).

    Raises
    ------
    CorruptCode
        If the header says anything else, or the end marker is missing: a decoder may spend seconds on a cut stream.
    """
    if not code.startswith(_SOI) or not code.endswith(_EOI):
        raise CorruptCode("JPEG-LS: the code does not begin and end with its markers")
    frame = struct.pack(">BHHB", precision, *shape, channels)
    frame += b"".join(bytes((number, 0x11, 0)) for number in range(1, channels + 1))
    scan = bytes((channels,)) + b"".join(bytes((number, 0)) for number in range(1, channels + 1))
    scan += bytes((0, 2 if channels > 1 else 0, 0))
    presets = [(_LSE, _DEFAULTS_16)] if precision == 16 else []
    if _segments(code) != [(_SOF55, frame), *presets, (_SOS, scan)]:
        raise CorruptCode("JPEG-LS: size, precision, channels or coding parameters are not the frame's")


def _segments(code: bytes) -> list[tuple[int, bytes]]:
    """List (marker, content) up to the first scan, without those that change no sample."""
    at, found = 2, list[tuple[int, bytes]]()
    while at + 4 <= len(code) and code[at] == 0xFF:
        marker, length = code[at + 1], int.from_bytes(code[at + 2 : at + 4], "big")
        content = code[at + 4 : at + 2 + length]
        # The one APP8 that does change samples: a colour transform before coding, outside the standard.
        if marker not in _SKIPPED or content.startswith(b"mrfx"):
            found.append((marker, content))
        if marker == _SOS or length < 2:
            break
        at += 2 + length
    return found
