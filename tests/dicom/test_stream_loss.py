"""What code streams say about loss, held against what encoders were told to do."""

from __future__ import annotations

from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import pytest

from safecheck.dicom.jpegxl_head import Made, holds_jpeg, read_jpegxl_head
from safecheck.dicom.stream_loss import Verdict, look_into
from safecheck.dicom.syntaxes import Coding

RNG = np.random.default_rng(20)
GREY = RNG.integers(0, 4096, (61, 200)).astype(np.uint16)
BYTES = (GREY >> 4).astype(np.uint8)
COLOUR = np.stack([BYTES, BYTES[::-1], BYTES[:, ::-1]], axis=-1)


def verdict_of(coding: Coding, code: bytes | bytearray) -> Verdict:
    found = look_into(coding, bytes(code))
    assert found is not None
    return found.verdict


@pytest.mark.parametrize("samples", [GREY, BYTES, COLOUR], ids=["12-bit", "8-bit", "colour"])
@pytest.mark.parametrize("container", ["J2K", "JP2"])
def test_jpeg_2000_filter_is_found(samples: npt.NDArray[Any], container: str) -> None:
    reversible = imagecodecs.jpeg2k_encode(samples, reversible=True, codecformat=container)
    irreversible = imagecodecs.jpeg2k_encode(samples, level=40, reversible=False, codecformat=container)
    assert verdict_of(Coding.JPEG_2000, reversible) is Verdict.OPEN
    assert verdict_of(Coding.JPEG_2000, irreversible) is Verdict.IRREVERSIBLE


@pytest.mark.parametrize("samples", [GREY, BYTES], ids=["12-bit", "8-bit"])
def test_high_throughput_filter_is_found(samples: npt.NDArray[Any]) -> None:
    assert verdict_of(Coding.JPEG_2000, imagecodecs.htj2k_encode(samples, reversible=True)) is Verdict.OPEN
    assert (
        verdict_of(Coding.JPEG_2000, imagecodecs.htj2k_encode(samples, level=0.01, reversible=False))
        is Verdict.IRREVERSIBLE
    )


def test_a_component_with_its_own_irreversible_filter_is_found() -> None:
    # COC (ISO/IEC 15444-1 A.6.2) put before the first tile: component 0, 9/7.
    code = imagecodecs.jpeg2k_encode(BYTES, reversible=True, codecformat="J2K")
    tile = code.index(b"\xff\x90")
    changed = code[:tile] + bytes.fromhex("ff53 0009 00 00 05 04 04 00 00") + code[tile:]
    assert verdict_of(Coding.JPEG_2000, changed) is Verdict.IRREVERSIBLE


@pytest.mark.parametrize("near", [0, 1, 2, 7])
def test_near_of_jpeg_ls_is_found(near: int) -> None:
    found = look_into(Coding.JPEG_LS, bytes(imagecodecs.jpegls_encode(GREY, level=near)))
    assert found is not None
    assert found.verdict is (Verdict.IRREVERSIBLE if near else Verdict.REVERSIBLE)
    assert f"NEAR of {near}" in found.evidence


def test_near_is_found_behind_a_preset_segment() -> None:
    code = imagecodecs.jpegls_encode(BYTES, level=3)
    # LSE with preset parameters (T.87 C.2.4.1) after SOI.
    changed = code[:2] + bytes.fromhex("fff8 000d 01 00ff 0012 0043 0114 0040") + code[2:]
    assert verdict_of(Coding.JPEG_LS, changed) is Verdict.IRREVERSIBLE


def test_cosine_and_predictive_jpeg_are_told_apart() -> None:
    assert verdict_of(Coding.JPEG, imagecodecs.jpeg8_encode(BYTES, level=90)) is Verdict.IRREVERSIBLE
    assert verdict_of(Coding.JPEG, imagecodecs.ljpeg_encode(GREY, bitspersample=12)) is Verdict.REVERSIBLE


def test_point_transform_of_lossless_jpeg_is_a_loss() -> None:
    # T.81 B.2.3: the low half of the scan header's last byte is the point transform.
    code = bytearray(imagecodecs.ljpeg_encode(GREY, bitspersample=12))
    scan = code.index(b"\xff\xda")
    code[scan + 2 + int.from_bytes(code[scan + 2 : scan + 4], "big") - 1] = 2
    found = look_into(Coding.JPEG, bytes(code))
    assert found is not None
    assert found.verdict is Verdict.IRREVERSIBLE
    assert "2 lowest bits" in found.evidence


@pytest.mark.parametrize(
    ("options", "made"),
    [
        ({"lossless": True}, Made.MODULAR),
        ({"lossless": False, "distance": 0.0}, Made.XYB),
        ({"distance": 1.0}, Made.XYB),
        ({"distance": 3.0}, Made.XYB),
    ],
    ids=["lossless", "distance 0", "distance 1", "distance 3"],
)
@pytest.mark.parametrize("samples", [GREY, BYTES, COLOUR, GREY[:64, :64]], ids=["12-bit", "8-bit", "colour", "square"])
def test_jpeg_xl_header_is_read(samples: npt.NDArray[Any], options: dict[str, Any], made: Made) -> None:
    # Options as given to libjxl by imagecodecs: 'lossless' is modular without XYB; a distance of 0 is not lossless.
    code = bytes(imagecodecs.jpegxl_encode(samples, **options))
    assert read_jpegxl_head(code).made is made
    assert not holds_jpeg(code)


def test_recompressed_jpeg_is_found_in_jpeg_xl() -> None:
    code = bytes(imagecodecs.jpegxl_encode_jpeg(imagecodecs.jpeg8_encode(COLOUR, level=90)))
    assert holds_jpeg(code)
    assert verdict_of(Coding.JPEG_XL, code) is Verdict.IRREVERSIBLE


def test_jpeg_xl_without_xyb_by_cosine_transform_is_lossy() -> None:
    # The recompressed JPEG's own code stream, without the data to rebuild the file.
    code = bytes(imagecodecs.jpegxl_encode_jpeg(imagecodecs.jpeg8_encode(COLOUR, level=90)))
    place = code.index(b"jxlc") if b"jxlc" in code else code.index(b"jxlp") + 4
    assert read_jpegxl_head(code[place + 4 :]).made is Made.COSINE
    assert verdict_of(Coding.JPEG_XL, code[place + 4 :]) is Verdict.IRREVERSIBLE


@pytest.mark.parametrize(
    ("coding", "code"),
    [
        (Coding.JPEG_2000, imagecodecs.jpeg2k_encode(BYTES, reversible=True, codecformat="J2K")),
        (Coding.JPEG_LS, imagecodecs.jpegls_encode(BYTES, level=2)),
        (Coding.JPEG, imagecodecs.jpeg8_encode(BYTES, level=90)),
        (Coding.JPEG_XL, imagecodecs.jpegxl_encode(BYTES, lossless=True)),
    ],
    ids=["JPEG 2000", "JPEG-LS", "JPEG", "JPEG XL"],
)
def test_cut_headers_are_never_taken_for_reversible_and_raise_nothing(coding: Coding, code: bytes) -> None:
    whole = look_into(coding, code)
    assert whole is not None
    for length in range(min(len(code), 120)):
        found = look_into(coding, code[:length])
        assert found is None or found.verdict is Verdict.UNTOLD or found == whole


def test_random_bytes_raise_nothing() -> None:
    starts = [b"\xff\x4f\xff\x51", b"\xff\xd8", b"\xff\x0a", b"\x00\x00\x00\x0cJXL \x0d\x0a\x87\x0a", b""]
    for _ in range(300):
        for start in starts:
            code = start + RNG.bytes(int(RNG.integers(0, 200)))
            for coding in Coding:
                look_into(coding, code)


@pytest.mark.parametrize("coding", [Coding.NATIVE, Coding.RLE, Coding.VIDEO])
def test_families_without_code_streams_say_nothing(coding: Coding) -> None:
    assert look_into(coding, b"\xff\xd8\xff\xda") is None
