"""A small PNG writer and the reader of what it writes: lossless, the same bytes each time, open in any viewer.

Only grey of 8 or 16 bits and colour of 8 bits per channel, not interlaced, no filters (ISO/IEC 15948).
"""

from __future__ import annotations

import struct
import zlib
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.errors import DossierError

__all__ = ["png_bytes", "png_pixels"]

_SIGNATURE = b"\x89PNG\r\n\x1a\n"
_GREY, _COLOUR = 0, 2
_LARGEST_SIDE = 4096


def png_bytes(pixels: npt.NDArray[np.uint8] | npt.NDArray[np.uint16]) -> bytes:
    """Write pixels as PNG.

    Parameters
    ----------
    pixels
        (rows, columns) of 8 or 16 bits, or (rows, columns, 3) of 8 bits; at most 4096 a side.

    Raises
    ------
    ValueError
        If the shape or type is another.
    """
    if pixels.dtype not in (np.uint8, np.uint16) or not all(0 < n <= _LARGEST_SIDE for n in pixels.shape[:2]):
        raise ValueError(f"pixels of type {pixels.dtype} and shape {pixels.shape} are not written as PNG")
    if pixels.ndim not in (2, 3) or (pixels.ndim == 3 and (pixels.shape[2] != 3 or pixels.dtype != np.uint8)):
        raise ValueError(f"pixels of shape {pixels.shape} are not written as PNG")
    rows, columns = pixels.shape[:2]
    kind = _GREY if pixels.ndim == 2 else _COLOUR
    header = struct.pack(">IIBBBBB", columns, rows, pixels.dtype.itemsize * 8, kind, 0, 0, 0)
    big_endian = np.ascontiguousarray(pixels, dtype=pixels.dtype.newbyteorder(">"))
    lines = big_endian.view(np.uint8).reshape(rows, -1)
    filtered = np.concatenate([np.zeros((rows, 1), np.uint8), lines], axis=1)
    body = _chunk(b"IHDR", header) + _chunk(b"IDAT", zlib.compress(filtered.tobytes(), 9)) + _chunk(b"IEND", b"")
    return _SIGNATURE + body


def _chunk(kind: bytes, data: bytes) -> bytes:
    """Length, kind, data and CRC-32."""
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def png_pixels(data: bytes) -> npt.NDArray[Any]:
    """Read pixels that `png_bytes` wrote.

    Raises
    ------
    DossierError
        If the bytes are not such a PNG.
    """
    try:
        return _parsed(data)
    except (struct.error, zlib.error, ValueError, KeyError) as error:
        raise DossierError("a picture of the dossier is not as it was written") from error


def _parsed(data: bytes) -> npt.NDArray[Any]:
    """Read the chunks and check sizes before anything is inflated."""
    chunks = _chunks(data)
    columns, rows, bits, kind, *rest = struct.unpack(">IIBBBBB", chunks[b"IHDR"])
    if not (0 < rows <= _LARGEST_SIDE and 0 < columns <= _LARGEST_SIDE) or any(rest):
        raise ValueError("header")
    channels = {(_GREY, 8): 1, (_GREY, 16): 1, (_COLOUR, 8): 3}[kind, bits]
    line = 1 + columns * channels * bits // 8
    # One byte more than expected is asked for, so that a longer stream shows itself and is never inflated whole.
    raw = zlib.decompressobj().decompress(chunks[b"IDAT"], rows * line + 1)
    lines = np.frombuffer(raw, np.uint8).reshape(rows, line)
    if lines[:, 0].any():
        raise ValueError("filter")
    pixels = np.ascontiguousarray(lines[:, 1:]).view(f">u{bits // 8}").astype(f"u{bits // 8}")
    return pixels.reshape(rows, columns, 3) if channels == 3 else pixels.reshape(rows, columns)


def _chunks(data: bytes) -> dict[bytes, bytes]:
    """Split into chunks, each with its CRC checked."""
    if not data.startswith(_SIGNATURE):
        raise ValueError("signature")
    found: dict[bytes, bytes] = {}
    position = len(_SIGNATURE)
    while position < len(data):
        (length,) = struct.unpack_from(">I", data, position)
        end = position + 8 + length
        kind, body = data[position + 4 : position + 8], data[position + 8 : end]
        if struct.unpack_from(">I", data, end)[0] != zlib.crc32(kind + body) or kind in found:
            raise ValueError("chunk")
        found[kind] = body
        position = end + 4
    if list(found) != [b"IHDR", b"IDAT", b"IEND"]:
        raise ValueError("chunks")
    return found
