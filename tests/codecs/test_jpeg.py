"""Sequential JPEG: tables, precision, colour, and what other decoders read."""

from __future__ import annotations

import io
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from PIL import Image

from safecheck.codecs.base import Carriage, Reached
from safecheck.codecs.jpeg import Jpeg
from safecheck.errors import CannotEncode, CorruptCode
from safecheck.frames import PixelFormat, Raster, SizeBasis
from tests.codecs import contract, images
from tests.codecs.second_decoders import read_by_gdcm

# ITU-T T.81 Annex K, Tables K.1 and K.2, row by row (verified in copies of the libjpeg family that cite the annex).
LUMINANCE = np.array(
    [
        *(16, 11, 10, 16, 24, 40, 51, 61, 12, 12, 14, 19, 26, 58, 60, 55),
        *(14, 13, 16, 24, 40, 57, 69, 56, 14, 17, 22, 29, 51, 87, 80, 62),
        *(18, 22, 37, 56, 68, 109, 103, 77, 24, 35, 55, 64, 81, 104, 113, 92),
        *(49, 64, 78, 87, 103, 121, 120, 101, 72, 92, 95, 98, 112, 100, 103, 99),
    ]
)
CHROMINANCE = np.full((8, 8), 99)
CHROMINANCE[:4, :4] = [[17, 18, 24, 47], [18, 21, 26, 66], [24, 26, 56, 99], [47, 66, 99, 99]]
ZIGZAG = sorted(range(64), key=lambda at: (at // 8 + at % 8, at // 8 if (at // 8 + at % 8) % 2 else at % 8))


def segments(code: bytes) -> list[tuple[int, bytes]]:
    """(marker, content) up to the first scan, by the layout of ITU-T T.81 B.1.1."""
    at, found = 2, list[tuple[int, bytes]]()
    while not found or found[-1][0] != 0xDA:
        assert code[at] == 0xFF
        length = int.from_bytes(code[at + 2 : at + 4])
        found.append((code[at + 1], code[at + 4 : at + 2 + length]))
        at += 2 + length
    return found


def tables(code: bytes) -> dict[int, npt.NDArray[np.int64]]:
    """Quantiser tables by number, row by row."""
    found = {}
    for marker, content in segments(code):
        if marker == 0xDB:
            assert len(content) == 65
            table = np.zeros(64, np.int64)
            table[ZIGZAG] = list(content[1:])
            found[content[0]] = table
    return found


def green() -> Raster:
    """One channel of the ultrasound frame."""
    samples = np.ascontiguousarray(images.real("US1_UNCR").samples[..., 1])
    return Raster(samples, PixelFormat(8, 8, False, "MONOCHROME2"))


@pytest.mark.parametrize("quality", [1, 10, 50, 75, 90, 100])
@pytest.mark.parametrize("bits", [8, 12])
def test_the_tables_are_those_of_annex_k_scaled(quality: int, bits: int) -> None:
    # Scale of the Independent JPEG Group: 5000 / quality below 50, else 200 - 2 quality, in per cent; held to 1 to 255
    # (jpeg_quality_scaling and jpeg_add_quant_table of libjpeg; from memory).
    raster = contract.raster(PixelFormat(16, bits, False, "MONOCHROME2"), (64, 70), "slopes")
    scale = 5000 // quality if quality < 50 else 200 - 2 * quality
    expected = np.clip((LUMINANCE * scale + 50) // 100, 1, 255)
    assert np.array_equal(tables(Jpeg(quality).encode(raster))[0], expected)


def test_colour_has_the_second_table_of_annex_k_and_no_subsampling() -> None:
    code = Jpeg(50).encode(images.real("US1_UNCR"))
    found = tables(code)
    assert np.array_equal(found[0], LUMINANCE)
    assert np.array_equal(found[1], CHROMINANCE.ravel())
    frame = dict(segments(code))[0xC0]
    # T.81 B.2.2: identifier, sampling factors, table of each component.
    assert [frame[6 + 3 * number + 1] for number in range(3)] == [0x11] * 3


@pytest.mark.parametrize("bits", range(1, 13))
@pytest.mark.parametrize("signed", [False, True], ids=["unsigned", "signed"])
def test_up_to_eight_bits_are_baseline_and_up_to_twelve_extended(bits: int, signed: bool) -> None:
    form = PixelFormat(16, bits, signed, "MONOCHROME2")
    code = Jpeg().encode(contract.raster(form, (64, 70), "slopes"))
    process, precision = (0xC0, 8) if bits <= 8 else (0xC1, 12)
    frame = dict(segments(code))[process]
    assert frame[0] == precision
    offset = 1 << (bits - 1) if signed else 0
    assert Jpeg().carriage(form) == Carriage(precision, offset, clipped_on_reading=bits < precision)


def test_the_huffman_tables_are_made_for_the_frame() -> None:
    # T.81 Table K.3 to K.6: the typical tables have 12 and 162 symbols.
    code = Jpeg(50).encode(green())
    lengths = [sum(content[1:17]) for marker, content in segments(code) if marker == 0xC4]
    assert lengths
    assert all(length not in (12, 162) for length in lengths)


@pytest.mark.parametrize("quality", [25, 75, 95])
def test_pillow_reads_eight_bits_within_three_levels(quality: int) -> None:
    # JPEG decoders may differ: ITU-T T.83 bounds the inverse cosine transform, not the samples, and colour rounds
    # again; 1 to 3 grey levels are commonly seen (common practice, no source). Pillow carries another libjpeg-turbo.
    codec = Jpeg(quality)
    for raster in (green(), images.real("US1_UNCR")):
        code = codec.encode(raster)
        with Image.open(io.BytesIO(code)) as image:
            second = np.asarray(image).astype(np.int64)
        assert np.abs(second - codec.decode(code, raster.format, raster.shape)).max() <= 3


@pytest.mark.parametrize("quality", [50, 90, 100])
@pytest.mark.parametrize("name", ["MR2_UNCR", "RG3_UNCR"])
def test_gdcm_reads_twelve_bits_within_three_levels(name: str, quality: int, tmp_path: Path) -> None:
    # GDCM carries the Independent JPEG Group's own library, built for 12 bits.
    raster, codec = images.real(name), Jpeg(quality)
    code = codec.encode(raster)
    first = codec.decode(code, raster.format, raster.shape)
    assert np.abs(read_by_gdcm(codec, code, raster, tmp_path) - first).max() <= 3


def test_gdcm_reads_signed_samples_as_their_row_says(tmp_path: Path) -> None:
    form = PixelFormat(16, 12, True, "MONOCHROME2")
    raster, codec = contract.raster(form, (64, 70), "slopes"), Jpeg(90)
    code = codec.encode(raster)
    stored = read_by_gdcm(codec, code, raster, tmp_path) - codec.carriage(form).offset
    assert np.abs(stored - codec.decode(code, form, raster.shape)).max() <= 3


@pytest.mark.parametrize("name", ["MR2_UNCR", "RG3_UNCR"])
def test_the_finest_quality_of_twelve_bits_is_off_by_few_of_4096_levels(name: str) -> None:
    # Steps of 1 in an orthonormal 8 x 8 transform: RMSE about sqrt(1/12) and the rounding of samples; computed from the
    # stated definition, with room for both. Eight bits in place of twelve would be off by up to 15.
    raster = images.real(name)
    error = contract.back(Jpeg(100), raster).astype(np.float64) - raster.samples
    assert np.sqrt(np.mean(error**2)) < 0.6


@pytest.mark.parametrize(
    ("form", "message"),
    [
        (PixelFormat(16, 13, False, "MONOCHROME2"), "grey with 13 bits stored, expected at most 12"),
        (PixelFormat(16, 16, True, "MONOCHROME1"), "grey with 16 bits stored, expected at most 12"),
        (PixelFormat(16, 12, False, "RGB"), "colour with 12 bits stored, expected at most 8"),
    ],
    ids=["13 bits", "16 bits", "colour"],
)
def test_what_has_too_many_bits_is_refused_by_name(form: PixelFormat, message: str) -> None:
    with pytest.raises(CannotEncode, match=f"jpeg: {message}"):
        Jpeg().encode(contract.raster(form, (64, 70), "slopes"))


def test_a_side_beyond_the_librarys_limit_is_refused_by_name() -> None:
    form = PixelFormat(8, 8, False, "MONOCHROME2")
    assert Jpeg().encode(Raster(np.zeros((1, 65500), np.uint8), form))
    with pytest.raises(CannotEncode, match="1 x 65501 pixels, expected at most 65500"):
        Jpeg().encode(Raster(np.zeros((1, 65501), np.uint8), form))


@pytest.mark.parametrize("bits", [6, 10])
def test_overshoot_beyond_the_bits_stored_is_clipped_when_read(bits: int) -> None:
    # A coarse code of stripes between the ends of the range rings beyond them, where 8 or 12 bits have room.
    form = PixelFormat(16, bits, False, "MONOCHROME2")
    samples = np.zeros((64, 64), np.uint16)
    samples[:, ::3] = form.highest
    codec = Jpeg(30 if bits == 6 else 1)
    code = codec.encode(Raster(samples, form))
    whole = PixelFormat(16, codec.carriage(form).precision, False, "MONOCHROME2")
    assert codec.decode(code, whole, (64, 64)).max() > form.highest
    assert codec.decode(code, form, (64, 64)).max() == form.highest


@pytest.mark.parametrize("ratio", [5, 10, 20])
@pytest.mark.parametrize("name", ["MR2_UNCR", "RG3_UNCR", "US1_UNCR"])
def test_two_qualities_lie_around_the_asked_size(name: str, ratio: int) -> None:
    raster = images.real(name)
    target = raster.size_bytes(SizeBasis.BITS_STORED) / ratio
    encoded = Jpeg().encode_to_size(raster, target)
    assert encoded.reached is Reached.BRACKET
    assert encoded.neighbour is not None
    assert len(encoded.code) <= target < len(encoded.neighbour.code)
    assert encoded.neighbour.settings == {"quality": int(encoded.settings["quality"]) + 1}


def test_a_cut_code_is_not_filled_with_grey() -> None:
    raster = green()
    code = Jpeg().encode(raster)
    with pytest.raises(CorruptCode, match="does not begin and end with its markers"):
        Jpeg().decode(code[: len(code) // 2], raster.format, raster.shape)


def test_a_progressive_code_is_not_ours() -> None:
    raster = green()
    buffer = io.BytesIO()
    Image.fromarray(raster.samples).save(buffer, "JPEG", quality=90, progressive=True)
    with pytest.raises(CorruptCode, match="process in the header"):
        Jpeg().decode(buffer.getvalue(), raster.format, raster.shape)
