"""Other decoders than the pinned ones agree: CharLS, gdcm, Pillow, OpenJPEG and pydicom, as their wheels hold them."""

from __future__ import annotations

import struct
import warnings
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import openjpeg
import pytest
from pydicom.pixels.utils import pixel_array

from safecheck.dicom.decoders import DECODERS
from safecheck.dicom.jpegxl_head import bare_codestream, holds_jpeg
from safecheck.dicom.reader import open_instance
from safecheck.dicom.stream_facts import coded_length, read_jpeg, read_jpeg2000, read_jpegxl
from safecheck.dicom.syntaxes import SYNTAXES
from safecheck.errors import InputRefused
from tests.dicom.factory import J, header_for, instance_at, noise, real_file, write_instance

Array = npt.NDArray[Any]


def by_plugin(path: Path, plugin: str) -> Array:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        return pixel_array(path, index=0, decoding_plugin=plugin)


@pytest.mark.parametrize(
    ("name", "plugin"),
    [
        ("MR_small_jpeg_ls_lossless.dcm", "pyjpegls"),
        ("emri_small_jpeg_ls_lossless.dcm", "pyjpegls"),
        ("JPEGLSNearLossless_16.dcm", "pyjpegls"),
        ("MR_small_jpeg_ls_lossless.dcm", "gdcm"),
        ("JPEG-LL.dcm", "gdcm"),
        ("JPGLosslessP14SV1_1s_1f_8b.dcm", "gdcm"),
        ("bad_sequence.dcm", "gdcm"),
        ("SC_rgb_jpeg_gdcm.dcm", "gdcm"),
        ("693_J2KR.dcm", "gdcm"),
        ("RG3_J2KR.dcm", "pillow"),
        ("US1_J2KR.dcm", "pillow"),
        ("MR_small_RLE.dcm", "pydicom"),
        ("emri_small_RLE.dcm", "pydicom"),
    ],
)
def test_real_files_decode_alike(name: str, plugin: str) -> None:
    with open_instance(instance_at(real_file(name))) as reader:
        assert np.array_equal(reader.frame(1).raster.samples, by_plugin(real_file(name), plugin))


@pytest.mark.parametrize("signed", [False, True])
@pytest.mark.parametrize("suffix", ["201", "202", "203"])
def test_htj2k_decodes_alike_with_openjpeg(tmp_path: Path, suffix: str, signed: bool) -> None:
    samples = noise((70, 90), 12, signed=signed, dtype="i2" if signed else "u2")
    code = bytes(imagecodecs.htj2k_encode(samples, reversible=True, tlm=True))
    instance = write_instance(tmp_path, header_for(samples, BitsStored=12), [code], J + suffix)
    with open_instance(instance) as reader:
        assert np.array_equal(reader.frame(1).raster.samples, samples)
    assert np.array_equal(openjpeg.decode(code, j2k_format=0), samples)


def test_every_still_image_syntax_has_one_pinned_decoder() -> None:
    # Every syntax for still images: JPEG .50 .51 .53 .55 .57 .70, JPEG-LS, JPEG 2000, HTJ2K, JPEG XL, RLE.
    suffixes = ("50", "51", "53", "55", "57", "70", "80", "81", "90", "91", "110", "111", "112", "201", "202", "203")
    assert set(DECODERS) == {J + suffix for suffix in suffixes} | {"1.2.840.10008.1.2.5"}
    assert set(DECODERS) <= set(SYNTAXES)


# --- what code streams say of themselves


@pytest.mark.parametrize("bits", [2, 8, 9, 12, 16])
@pytest.mark.parametrize(
    "shape", [(1, 1), (8, 8), (64, 64), (17, 300), (600, 512), (256, 256), (40, 64), (100, 120), (90, 160)]
)
def test_the_head_of_a_jpeg_xl_stream_is_read(shape: tuple[int, int], bits: int) -> None:
    samples = noise((max(shape[0], 1), max(shape[1], 2)), bits, dtype="u1" if bits <= 8 else "u2")[:, : shape[1]]
    for boxed in (False, True):
        code = bytes(
            imagecodecs.jpegxl_encode(
                np.ascontiguousarray(samples), lossless=True, effort=3, bitspersample=bits, usecontainer=boxed
            )
        )
        facts = read_jpegxl(code)
        assert (facts.rows, facts.columns, facts.channels, facts.precision) == (*shape, 1, bits)
        assert bare_codestream(code)[:2] == b"\xff\x0a"
        assert not holds_jpeg(code)


@pytest.mark.parametrize("options", [{"lossless": True}, {"distance": 1.0}], ids=["lossless", "lossy"])
def test_the_head_of_a_colour_jpeg_xl_stream_is_read(options: dict[str, Any]) -> None:
    facts = read_jpegxl(bytes(imagecodecs.jpegxl_encode(np.zeros((20, 30, 3), dtype="u1"), **options)))
    assert (facts.rows, facts.columns, facts.channels, facts.precision) == (20, 30, 3, 8)


def test_a_jpeg_xl_stream_with_an_alpha_channel_is_refused() -> None:
    code = bytes(imagecodecs.jpegxl_encode(np.zeros((20, 30, 4), dtype="u1"), lossless=True))
    with pytest.raises(InputRefused, match=r"^decode"):
        read_jpegxl(code)


def test_a_jpeg_xl_stream_of_floating_point_samples_is_refused() -> None:
    code = bytes(imagecodecs.jpegxl_encode(np.zeros((20, 30), dtype="f4"), lossless=True))
    with pytest.raises(InputRefused, match=r"^bits"):
        read_jpegxl(code)


def test_the_head_of_a_jpeg_2000_stream_is_read() -> None:
    samples = noise((33, 47), 11, signed=True, dtype="i2")
    facts = read_jpeg2000(
        bytes(imagecodecs.jpeg2k_encode(samples, level=0, reversible=True, codecformat="J2K", bitspersample=11))
    )
    assert (facts.rows, facts.columns, facts.channels) == (33, 47, 1)
    assert (facts.precision, facts.signed, facts.process) == (11, True, "jpeg2000")


@pytest.mark.parametrize(
    ("name", "process", "precision"),
    [("JPGExtended.dcm", "extended", 12), ("JPEG-LL.dcm", "lossless", 16), ("JPEGLSNearLossless_08.dcm", "jpeg-ls", 8)],
)
def test_the_head_of_a_jpeg_stream_is_read(name: str, process: str, precision: int) -> None:
    content = real_file(name).read_bytes()
    facts = read_jpeg(content[content.index(b"\xff\xd8\xff") :])
    assert (facts.process, facts.precision, facts.channels) == (process, precision, 1)


@pytest.mark.parametrize("padding", [b"", b"\x00", b"\xff", b"\x00\x00"])
def test_padding_after_the_end_marker_is_not_counted(padding: bytes) -> None:
    assert coded_length(b"\xff\xd8\x01\xff\xd9" + padding) == 5
    assert coded_length(b"\xff\xd8\x01\xff" + padding) is None


def test_rle_segments_that_overlap_are_refused(tmp_path: Path) -> None:
    samples = noise((4, 4), 8, dtype="u1")
    for count, starts, reason in ((2, (64, 70), "length"), (1, (60,), "decode"), (1, (900,), "decode")):
        code = struct.pack("<I", count) + struct.pack(f"<{len(starts)}I", *starts)
        instance = write_instance(tmp_path, header_for(samples), [code.ljust(80, b"\x00")], "1.2.840.10008.1.2.5")
        with open_instance(instance) as reader, pytest.raises(InputRefused, match=f"^{reason}"):
            reader.frame(1)
