"""Headers of standard code streams, held against the format before anything is decoded.

Decoders trust a header: one flipped bit there changes the precision or the sign of every sample, or has them set up a
million tiles. Our codecs read only what they wrote, so whatever else a header says is a corrupt code. The same check
after encoding finds a library that quietly wrote another precision or another transform than it was told.

Sources: ISO/IEC 15444-1 Annex A (SIZ, COD), 15444-15 (CAP), 14495-1 Annex C (SOF55, LSE, SOS) and 10918-1 Annex B
(SOF, SOS), from memory; the layouts are confirmed in tests by a second library reading the same streams.
"""

from __future__ import annotations

import struct

from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat

__all__ = ["MOST_LEVELS", "check_htj2k", "check_jpeg", "check_jpeg2000", "check_jpegls"]

MOST_LEVELS = 5
"""Wavelet decompositions written by OpenJPEG when not told otherwise."""

_SOC, _SIZ, _CAP, _COD = b"\xff\x4f", b"\xff\x51", b"\xff\x50", b"\xff\x52"
_SOI, _EOI = b"\xff\xd8", b"\xff\xd9"
_SOF55, _LSE, _SOS = 0xF7, 0xF8, 0xDA
_SOF0, _SOF1, _DQT, _DHT = 0xC0, 0xC1, 0xDB, 0xC4
_HIGH_THROUGHPUT = 0x4000
"""Rsiz of a code stream with the CAP segment of Part 15."""
_HT_BLOCKS = 0x40
_WRITTEN_OUT = 12
"""Beyond so many bits CharLS writes the default coding parameters out."""
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
    size = _SOC + _siz(form, shape, form.bits_stored, 0)
    if not code.startswith(size):
        raise CorruptCode("JPEG 2000: size, precision, sign or channels in the header are not the frame's")
    found = code[len(size) : len(size) + 14]
    if len(found) < 14 or found[9] > MOST_LEVELS or found not in _cods(form, found[9], reversible):
        raise CorruptCode("JPEG 2000: the coding style in the header is not the one that was asked for")


def check_htj2k(code: bytes, form: PixelFormat, shape: tuple[int, int], precision: int, *, reversible: bool) -> None:
    """Hold SIZ, CAP and COD of an HTJ2K code stream against what OpenJPH writes for us: one tile, one layer, RPCL.

    Parameters
    ----------
    code
        Code stream without file boxes.
    form, shape
        Expected pixel format and (rows, columns).
    precision
        Expected bits per sample in the stream.
    reversible
        5/3 wavelet and reversible colour transform, rather than 9/7.

    Raises
    ------
    CorruptCode
        If the header says anything else.
    """
    size = _SOC + _siz(form, shape, precision, _HIGH_THROUGHPUT)
    if not code.startswith(size):
        raise CorruptCode("HTJ2K: size, precision, sign or channels in the header are not the frame's")
    capability = _CAP + struct.pack(">HI", 8, 1 << 17)
    colour = int(form.channels == 3)
    style = struct.pack(">HBBHBBBBBB", 12, 0, 2, 1, colour, MOST_LEVELS, 4, 4, _HT_BLOCKS, int(reversible))
    found = code[len(size) :]
    # The two bytes between tell which options the blocks use; they follow from the quantiser.
    if not found.startswith(capability) or not found.startswith(_COD + style, len(capability) + 2):
        raise CorruptCode("HTJ2K: the coding style in the header is not the one that was asked for")


def _siz(form: PixelFormat, shape: tuple[int, int], precision: int, capabilities: int) -> bytes:
    """SIZ marker segment: one tile as large as the image, no subsampling."""
    rows, columns = shape
    component = bytes(((precision - 1) | (0x80 if form.signed else 0), 1, 1))
    extents = (columns, rows, 0, 0, columns, rows, 0, 0)
    length = 38 + 3 * form.channels
    return _SIZ + struct.pack(">HH8IH", length, capabilities, *extents, form.channels) + component * form.channels


def _cods(form: PixelFormat, levels: int, reversible: bool) -> tuple[bytes, ...]:
    """COD marker segments that our encoders may write: LRCP, one layer, 64 x 64 blocks, colour transform or none."""
    transforms = (0, 1) if form.channels == 3 else (0,)
    return tuple(
        _COD + struct.pack(">HBBHBBBBBB", 12, 0, 0, 1, colour, levels, 4, 4, 0, int(reversible))
        for colour in transforms
    )


def check_jpegls(code: bytes, precision: int, channels: int, shape: tuple[int, int], nears: range) -> int:
    """Hold the header of a JPEG-LS code stream against the frame: one scan, default parameters.

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
    nears
        Largest errors that may stand in the header.

    Returns
    -------
    int
        The one that does.

    Raises
    ------
    CorruptCode
        If the header says anything else, or the end marker is missing: a decoder may spend seconds on a cut stream.
    """
    if not code.startswith(_SOI) or not code.endswith(_EOI):
        raise CorruptCode("JPEG-LS: the code does not begin and end with its markers")
    frame = struct.pack(">BHHB", precision, *shape, channels)
    frame += b"".join(bytes((number, 0x11, 0)) for number in range(1, channels + 1))
    found = _segments(code)
    near = found[-1][1][-3] if found and len(found[-1][1]) > 3 else -1
    scan = bytes((channels,)) + b"".join(bytes((number, 0)) for number in range(1, channels + 1))
    scan += bytes((max(near, 0), 2 if channels > 1 else 0, 0))
    presets = [(_LSE, _defaults(precision, near))] if precision > _WRITTEN_OUT else []
    if near not in nears or found != [(_SOF55, frame), *presets, (_SOS, scan)]:
        raise CorruptCode("JPEG-LS: size, precision, channels or coding parameters are not the frame's")
    return near


def _defaults(precision: int, near: int) -> bytes:
    """MAXVAL, T1 to T3 and RESET by default beyond 12 bits (ISO/IEC 14495-1 C.2.4.1.1)."""
    return struct.pack(">B5H", 1, (1 << precision) - 1, 18 + 3 * near, 67 + 5 * near, 276 + 7 * near, 64)


def check_jpeg(code: bytes, precision: int, channels: int, shape: tuple[int, int]) -> None:
    """Hold the header of a JPEG code stream against the frame: sequential, one scan, no subsampling.

    Parameters
    ----------
    code
        Code stream.
    precision
        Expected bits per sample in the stream: 8, baseline, or 12, extended.
    channels
        Expected components.
    shape
        Expected (rows, columns).

    Raises
    ------
    CorruptCode
        If the header says anything else, or the end marker is missing: decoders fill what is cut off with grey.
    """
    if not code.startswith(_SOI) or not code.endswith(_EOI):
        raise CorruptCode("JPEG: the code does not begin and end with its markers")
    tables = (0, 1, 1)[:channels]
    frame = struct.pack(">BHHB", precision, *shape, channels)
    frame += b"".join(bytes((number, 0x11, table)) for number, table in enumerate(tables, 1))
    scan = bytes((channels,)) + b"".join(bytes((number, 17 * table)) for number, table in enumerate(tables, 1))
    scan += bytes((0, 63, 0))
    found = [(marker, content) for marker, content in _segments(code) if marker not in (_DQT, _DHT)]
    if found != [(_SOF0 if precision == 8 else _SOF1, frame), (_SOS, scan)]:
        raise CorruptCode("JPEG: size, precision, channels or process in the header are not the frame's")


def _segments(code: bytes) -> list[tuple[int, bytes]]:
    """List (marker, content) up to the first scan, without those that change no sample."""
    at, found = 2, list[tuple[int, bytes]]()
    while at + 4 <= len(code) and code[at] == 0xFF:
        marker, length = code[at + 1], int.from_bytes(code[at + 2 : at + 4], "big")
        content = code[at + 4 : at + 2 + length]
        # Two that do change samples: APP8 of a colour transform outside the standard, and Adobe's APP14.
        if marker not in _SKIPPED or content.startswith((b"mrfx", b"Adobe")):
            found.append((marker, content))
        if marker == _SOS or length < 2:
            break
        at += 2 + length
    return found
