"""Where libraries are called: their exceptions have our names, and what they do wrong in silence is caught."""

from __future__ import annotations

import ast
import importlib
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import openjpeg.utils
import pytest

from safecheck.codecs import selftest
from safecheck.codecs.base import Codec
from safecheck.codecs.htj2k import Htj2k, Htj2kLossless
from safecheck.codecs.jpeg import Jpeg
from safecheck.codecs.jpeg2000 import Jpeg2000
from safecheck.codecs.jpegls import JpegLs
from safecheck.codecs.jpegxl import JpegXl, JpegXlLossless
from safecheck.codecs.library_calls import LIBRARY_ERRORS
from safecheck.codecs.reversible import Jpeg2000Lossless, JpegLsLossless
from safecheck.codecs.rle import RleLossless
from safecheck.errors import CannotEncode, CodecError, CodecUnavailable, CorruptCode
from safecheck.frames import PixelFormat, Raster
from tests.codecs import contract

FORM = PixelFormat(16, 12, False, "MONOCHROME2")
RASTER = contract.raster(FORM, (64, 70), "slopes")

Call = tuple[Any, str]
CHARLS = (importlib.import_module("_CharLS"), "_encode")
SEAMS: dict[str, tuple[Codec, Call, Call]] = {
    "jpeg2000": (Jpeg2000(4), (openjpeg.utils, "encode_array"), (openjpeg.utils, "decode")),
    "jpeg": (Jpeg(), (imagecodecs, "jpeg8_encode"), (imagecodecs, "jpeg8_decode")),
    "jpegls": (JpegLs(), CHARLS, (imagecodecs, "jpegls_decode")),
    "htj2k": (Htj2k(), (imagecodecs, "htj2k_encode"), (openjpeg.utils, "decode")),
    "jpegxl": (JpegXl(), (imagecodecs, "jpegxl_encode"), (imagecodecs, "jpegxl_decode")),
    "jpegls-reversible": (JpegLsLossless(), CHARLS, (imagecodecs, "jpegls_decode")),
    "jpeg2000-reversible": (Jpeg2000Lossless(), (imagecodecs, "jpeg2k_encode"), (imagecodecs, "jpeg2k_decode")),
    "htj2k-reversible": (Htj2kLossless(), (imagecodecs, "htj2k_encode"), (openjpeg.utils, "decode")),
    "jpegxl-reversible": (JpegXlLossless(), (imagecodecs, "jpegxl_encode"), (imagecodecs, "jpegxl_decode")),
    "rle-reversible": (RleLossless(), (imagecodecs, "packbits_encode"), (imagecodecs, "packbits_decode")),
}
CLIPPED = ("jpeg", "jpegls", "htj2k")
"""What they decode beyond the format's range is clipped, as a quantiser's overshoot."""


@pytest.fixture(params=SEAMS)
def seam(request: pytest.FixtureRequest) -> tuple[Codec, Call, Call]:
    return SEAMS[request.param]


def raising(error: type[Exception]) -> Callable[..., Any]:
    def function(*args: object, **kwargs: object) -> None:
        raise error("what the library said")

    return function


def returning(value: object) -> Callable[..., Any]:
    def function(*args: object, **kwargs: object) -> object:
        return value

    return function


@pytest.mark.parametrize("error", LIBRARY_ERRORS, ids=lambda error: error.__name__)
def test_what_a_library_raises_has_our_name(
    seam: tuple[Codec, Call, Call], error: type[Exception], monkeypatch: pytest.MonkeyPatch
) -> None:
    codec, encode, decode = seam
    code = codec.encode(RASTER)
    monkeypatch.setattr(*encode, raising(error))
    monkeypatch.setattr(*decode, raising(error))
    with pytest.raises(CannotEncode, match=f"{codec.name}: .* wrote no code: what the library said"):
        codec.encode(RASTER)
    with pytest.raises(CorruptCode, match=f"{codec.name}: .* cannot read the code: what the library said"):
        codec.decode(code, FORM, RASTER.shape)


def test_no_exception_of_imagecodecs_slips_by() -> None:
    for name in ("Jpeg2kError", "JpeglsError", "Jpeg8Error", "Htj2kError", "JpegxlError", "PackbitsError"):
        error = getattr(imagecodecs, name)
        assert issubclass(error, LIBRARY_ERRORS)
    # A part that a build lacks raises an ImportError at its first call; `available` is asked before.
    assert issubclass(imagecodecs.DelayedImportError, ImportError)


def test_no_exception_of_pylibjpeg_openjpeg_slips_by() -> None:
    # The wheel carries its source, Python and Cython: every class it raises by name is one that we map.
    folder = Path(openjpeg.utils.__file__).parent
    raised = set(re.findall(r"\braise (\w+)\(", (folder / "_openjpeg.pyx").read_text(encoding="utf-8")))
    tree = ast.parse((folder / "utils.py").read_text(encoding="utf-8"))
    for node in ast.walk(tree):
        if isinstance(node, ast.Raise) and isinstance(node.exc, ast.Call) and isinstance(node.exc.func, ast.Name):
            raised.add(node.exc.func.id)
    assert raised
    builtins = importlib.import_module("builtins")
    for name in raised:
        assert issubclass(getattr(builtins, name), LIBRARY_ERRORS), name


@pytest.mark.parametrize(
    "garbage",
    [b"", b"\x00", b"\xff", b"\xff\x4f\xff\x51", b"\xff\xd8\xff\xd9", b"not a code at all", bytes(5000)],
    ids=["empty", "zero", "marker", "soc", "soi eoi", "text", "zeros"],
)
def test_what_is_no_code_is_corrupt(seam: tuple[Codec, Call, Call], garbage: bytes) -> None:
    with pytest.raises(CorruptCode):
        seam[0].decode(garbage, FORM, RASTER.shape)


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        (np.zeros((64, 71), np.uint16), r"decoded to uint16 of shape \(64, 71\)"),
        (np.zeros((64, 70, 1), np.uint16), r"of shape \(64, 70, 1\)"),
        (np.zeros((64, 70), np.float32), "decoded to float32"),
        (np.full((64, 70), 4096, np.uint16), "values from 4096 to 4096, expected 0 to 4095"),
    ],
    ids=["columns", "axes", "floats", "range"],
)
def test_a_decoder_that_gives_another_array_is_caught(
    seam: tuple[Codec, Call, Call], wrong: object, message: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    codec, _, decode = seam
    if codec.name == "rle-reversible" or (codec.name in CLIPPED and message.startswith("values")):
        pytest.skip("its planes are put together by us" if codec.name not in CLIPPED else "it clips by definition")
    code = codec.encode(RASTER)
    monkeypatch.setattr(*decode, returning(wrong))
    with pytest.raises(CorruptCode, match=message):
        codec.decode(code, FORM, RASTER.shape)


def test_a_library_that_writes_another_precision_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = openjpeg.utils.encode_array

    def told_sixteen(samples: object, bits_stored: int, **kwargs: object) -> bytes:
        return bytes(honest(samples, bits_stored=16, **kwargs))

    monkeypatch.setattr(openjpeg.utils, "encode_array", told_sixteen)
    with pytest.raises(CannotEncode, match=r"another code than asked for.*precision"):
        Jpeg2000(4).encode(RASTER)


def test_a_library_that_takes_the_ratio_for_none_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = openjpeg.utils.encode_array

    def ignoring(samples: object, bits_stored: int, **kwargs: object) -> bytes:
        kwargs.pop("compression_ratios")
        return bytes(honest(samples, bits_stored=bits_stored, **kwargs))

    monkeypatch.setattr(openjpeg.utils, "encode_array", ignoring)
    with pytest.raises(CannotEncode, match="the coding style in the header"):
        Jpeg2000(4).encode(RASTER)


def test_the_level_of_the_other_library_is_no_ratio() -> None:
    # imagecodecs takes `level` as a PSNR in dB: asked for 10, it does not give a tenth.
    code = imagecodecs.jpeg2k_encode(RASTER.samples, level=10, codecformat="j2k", bitspersample=12)
    assert RASTER.pixels * 12 / 8 / len(code) > 20


def test_imagecodecs_told_few_bits_of_sixteen_writes_sixteen() -> None:
    samples = np.zeros((40, 40), np.uint16)
    code = imagecodecs.jpeg2k_encode(samples, reversible=True, codecformat="j2k", bitspersample=6)
    assert openjpeg.utils.get_parameters(code)["precision"] == 16
    ours = Jpeg2000Lossless().encode(Raster(samples, PixelFormat(16, 6, False, "MONOCHROME2")))
    assert openjpeg.utils.get_parameters(ours)["precision"] == 6


def test_openjpeg_loses_noise_of_one_bit_a_channel_in_silence() -> None:
    # Why JPEG 2000 of one bit is refused: a code larger than the library's buffer, no error, other samples.
    form = PixelFormat(8, 1, False, "RGB")
    lost = 0
    for seed in range(6):
        samples = contract.raster(form, (33, 41), "noise", seed).samples
        code = openjpeg.utils.encode_array(samples, bits_stored=1, photometric_interpretation=1)
        lost += not np.array_equal(openjpeg.utils.decode(code), samples)
    assert lost > 0


def test_openjpeg_cannot_write_a_larger_frame_of_one_bit_noise() -> None:
    samples = contract.raster(PixelFormat(8, 1, False, "MONOCHROME2"), (200, 256), "noise").samples
    with pytest.raises(imagecodecs.Jpeg2kError, match="opj_encode"):
        imagecodecs.jpeg2k_encode(samples, reversible=True, codecformat="j2k", bitspersample=1)


@pytest.mark.parametrize("bits", range(2, 17))
def test_noise_of_two_bits_and_more_is_kept_by_jpeg_2000(bits: int) -> None:
    # Noise makes codes larger than the frame, which is where one bit goes wrong.
    form = PixelFormat(8 if bits <= 8 else 16, bits, False, "RGB")
    contract.check_round_trip(Jpeg2000Lossless(), contract.raster(form, (200, 128), "noise"))


def test_a_near_lossless_code_is_no_reversible_one() -> None:
    near = imagecodecs.jpegls_encode(RASTER.samples, level=2)
    with pytest.raises(CorruptCode, match="coding parameters"):
        JpegLsLossless().decode(bytes(near), FORM, RASTER.shape)


@pytest.mark.parametrize(
    ("part", "codec"),
    [
        ("JPEGLS", JpegLsLossless()),
        ("JPEGLS", JpegLs()),
        ("JPEG2K", Jpeg2000Lossless()),
        ("JPEG8", Jpeg()),
        ("HTJ2K", Htj2k()),
        ("HTJ2K", Htj2kLossless()),
        ("JPEGXL", JpegXl()),
        ("JPEGXL", JpegXlLossless()),
        ("PACKBITS", RleLossless()),
    ],
    ids=lambda value: value if isinstance(value, str) else value.name,
)
def test_a_build_without_a_part_makes_its_codec_unavailable(
    part: str, codec: Codec, monkeypatch: pytest.MonkeyPatch
) -> None:

    class Missing:
        available = False

    monkeypatch.setattr(imagecodecs, part, Missing)
    with pytest.raises(CodecUnavailable, match=f"without {part}"):
        codec.encode(RASTER)
    found = selftest.check(codec.name)
    assert (found.available, found.reversible_exact, found.detail) == (False, None, "not available here")


@pytest.mark.parametrize("name", SEAMS)
def test_the_selftest_sees_a_constant_picture(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    decode = SEAMS[name][2]
    honest = getattr(*decode)

    def constant(*args: object, **kwargs: object) -> object:
        found = honest(*args, **kwargs)
        return bytes(len(found)) if isinstance(found, bytes) else found * 0

    monkeypatch.setattr(*decode, constant)
    found = selftest.check(name)
    assert not found.available
    assert "came back off by" in found.detail


def test_the_selftest_sees_one_wrong_sample_in_a_reversible_codec(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = imagecodecs.jpegls_decode

    def off_by_one(code: bytes) -> object:
        samples = honest(code).copy()
        samples.flat[-1] ^= 1
        return samples

    monkeypatch.setattr(imagecodecs, "jpegls_decode", off_by_one)
    found = selftest.check("jpegls-reversible")
    assert found.reversible_exact is False
    assert "off by 1" in found.detail


def test_the_selftest_sees_two_decoders_disagree(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = imagecodecs.jpeg2k_decode
    monkeypatch.setattr(imagecodecs, "jpeg2k_decode", lambda code, **kwargs: honest(code, **kwargs) ^ 1)
    assert "two JPEG 2000 decoders disagree" in selftest.check("jpeg2000").detail


def test_every_codec_error_is_one_of_ours() -> None:
    assert issubclass(CannotEncode, CodecError)
    assert issubclass(CorruptCode, CodecError)
