from __future__ import annotations

import dataclasses
import zlib
from typing import Any

import pytest

from safecheck.codecs.tile import stream
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat

FORM = PixelFormat(16, 12, True, "MONOCHROME2")
SHAPE = (30, 40)
HEADER = stream.Header(
    transform=1, weighting=1, size=16, rows=30, columns=40, bits=12, signed=1, channels=1, padding=2, step=300,
    padding_values=(1, 2, 3), centres=(-2048, 0, 0), shifts=(1, -2, 3, -4, 5, -127),
)  # fmt: skip


def resealed(code: bytes) -> bytes:
    """The same bytes with the checksum that they ought to have."""
    at = stream.HEADER_BYTES - 4
    checksum = zlib.crc32(code[stream.HEADER_BYTES :], zlib.crc32(code[:at]))
    return code[:at] + checksum.to_bytes(4, "little") + code[stream.HEADER_BYTES :]


def test_a_header_comes_back() -> None:
    assert stream.read(stream.write(HEADER, b"payload"), FORM, SHAPE) == (HEADER, b"payload")


@pytest.mark.parametrize("at", range(0, 75, 3))
def test_any_changed_byte_is_told(at: int) -> None:
    code = bytearray(stream.write(HEADER, b"payload"))
    code[min(at, len(code) - 1)] ^= 0x10
    with pytest.raises(CorruptCode, match="tiled code"):
        stream.read(bytes(code), FORM, SHAPE)


@pytest.mark.parametrize(
    "change",
    [
        {"transform": 3},
        {"weighting": 2},
        {"size": 12},
        {"padding": 3},
        {"step": 60000},
        {"padding_values": (4096, 0, 0)},
        {"centres": (2048, 0, 0)},
    ],
    ids=lambda change: next(iter(change)),
)
def test_a_setting_out_of_range_is_told_though_the_checksum_fits(change: dict[str, Any]) -> None:
    code = stream.write(dataclasses.replace(HEADER, **change), b"")
    with pytest.raises(CorruptCode, match="out of range"):
        stream.read(code, FORM, SHAPE)


@pytest.mark.parametrize("change", [{"rows": 31}, {"columns": 1}, {"bits": 13}, {"signed": 0}, {"channels": 3}])
def test_another_shape_or_format_is_told(change: dict[str, int]) -> None:
    code = stream.write(dataclasses.replace(HEADER, **change), b"")  # type: ignore[arg-type]
    with pytest.raises(CorruptCode, match="another frame shape or pixel format"):
        stream.read(code, FORM, SHAPE)


def test_another_version_is_told() -> None:
    code = bytearray(stream.write(HEADER, b""))
    code[4] = 77
    with pytest.raises(CorruptCode, match="not a tiled code of version"):
        stream.read(resealed(bytes(code)), FORM, SHAPE)


@pytest.mark.parametrize("length", [0, 1, stream.HEADER_BYTES - 1])
def test_a_cut_header_is_told(length: int) -> None:
    with pytest.raises(CorruptCode, match="expected at least"):
        stream.read(stream.write(HEADER, b"")[:length], FORM, SHAPE)
