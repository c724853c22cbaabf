"""Sign, bits and colour through every syntax that can be written here: the samples come back exactly."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import pytest
from pydicom.pixels.encoders.base import get_encoder
from pydicom.uid import RLELossless

from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from tests.dicom.factory import BIG_ENDIAN, DEFLATED, EXPLICIT, IMPLICIT, RLE, J, header_for, noise, write_instance

Array = npt.NDArray[Any]
SHAPE = (21, 34)

FORMATS = [
    pytest.param(8, 8, False, id="8 in 8"),
    pytest.param(8, 6, False, id="6 in 8"),
    pytest.param(8, 8, True, id="8 in 8 signed"),
    pytest.param(8, 7, True, id="7 in 8 signed"),
    pytest.param(16, 8, False, id="8 in 16"),
    pytest.param(16, 10, False, id="10 in 16"),
    pytest.param(16, 12, False, id="12 in 16"),
    pytest.param(16, 16, False, id="16 in 16"),
    pytest.param(16, 12, True, id="12 in 16 signed"),
    pytest.param(16, 14, True, id="14 in 16 signed"),
    pytest.param(16, 16, True, id="16 in 16 signed"),
]


def grey(allocated: int, stored: int, *, signed: bool) -> Array:
    return noise(SHAPE, stored, signed=signed, dtype=f"{'i' if signed else 'u'}{allocated // 8}")


def unsigned(samples: Array) -> Array:
    """The bits as they lie, for codes that know no sign."""
    return samples.view(f"u{samples.dtype.itemsize}")


def rle(samples: Array, bits: int) -> bytes:
    colour = samples.ndim == 3
    options: dict[str, Any] = {
        "rows": samples.shape[0],
        "columns": samples.shape[1],
        "samples_per_pixel": 3 if colour else 1,
        "bits_allocated": 8 * samples.dtype.itemsize,
        "bits_stored": 8 * samples.dtype.itemsize,
        "pixel_representation": int(samples.dtype.kind == "i"),
        "photometric_interpretation": "RGB" if colour else "MONOCHROME2",
        "number_of_frames": 1,
        "planar_configuration": 0,
        "encoding_plugin": "pydicom",
    }
    return get_encoder(RLELossless).encode(samples, **options)


def jpeg_ls(samples: Array, bits: int) -> bytes:
    return bytes(imagecodecs.jpegls_encode(unsigned(samples)))


def lossless_jpeg(samples: Array, bits: int) -> bytes:
    code = unsigned(samples)
    precision = 8 * samples.dtype.itemsize if samples.dtype.kind == "i" else bits
    colour = "RGB" if samples.ndim == 3 else None
    if precision <= 8:
        code = code.astype(np.uint8)
    return bytes(
        imagecodecs.jpeg8_encode(
            code, lossless=True, predictor=1, bitspersample=precision, colorspace=colour, outcolorspace=colour
        )
    )


def jpeg2000(samples: Array, bits: int) -> bytes:
    return bytes(imagecodecs.jpeg2k_encode(samples, level=0, reversible=True, codecformat="J2K", bitspersample=bits))


def htj2k(samples: Array, bits: int) -> bytes:
    return bytes(imagecodecs.htj2k_encode(samples, reversible=True, tlm=True))


def jpeg_xl(samples: Array, bits: int) -> bytes:
    if bits <= 8:
        samples = samples.astype(np.uint8)
    return bytes(imagecodecs.jpegxl_encode(samples, lossless=True, bitspersample=bits))


CODES = [
    pytest.param(RLE, rle, id="RLE"),
    pytest.param(J + "57", lossless_jpeg, id="lossless JPEG .57"),
    pytest.param(J + "70", lossless_jpeg, id="lossless JPEG .70"),
    pytest.param(J + "80", jpeg_ls, id="JPEG-LS .80"),
    pytest.param(J + "81", jpeg_ls, id="JPEG-LS .81"),
    pytest.param(J + "90", jpeg2000, id="JPEG 2000 .90"),
    pytest.param(J + "91", jpeg2000, id="JPEG 2000 .91"),
    pytest.param(J + "201", htj2k, id="HTJ2K .201"),
    pytest.param(J + "202", htj2k, id="HTJ2K .202"),
    pytest.param(J + "203", htj2k, id="HTJ2K .203"),
    pytest.param(J + "110", jpeg_xl, id="JPEG XL .110"),
    pytest.param(J + "112", jpeg_xl, id="JPEG XL .112"),
]
NATIVE = [
    pytest.param(IMPLICIT, id="implicit"),
    pytest.param(EXPLICIT, id="explicit"),
    pytest.param(BIG_ENDIAN, id="big endian"),
    pytest.param(DEFLATED, id="deflated"),
]


@pytest.mark.parametrize("photometric", ["MONOCHROME1", "MONOCHROME2"])
@pytest.mark.parametrize(("allocated", "stored", "signed"), FORMATS)
@pytest.mark.parametrize("syntax", NATIVE)
def test_uncompressed_grey_comes_back(
    tmp_path: Path, syntax: str, allocated: int, stored: int, signed: bool, photometric: str
) -> None:
    samples = grey(allocated, stored, signed=signed)
    dataset = header_for(samples, BitsStored=stored, PhotometricInterpretation=photometric)
    pixels = samples.astype(samples.dtype.newbyteorder(">" if syntax == BIG_ENDIAN else "<")).tobytes()
    if syntax == BIG_ENDIAN and allocated == 8:
        pixels = np.frombuffer(pixels, dtype=">u2").astype("<u2").tobytes()  # words of two samples
    with open_instance(write_instance(tmp_path, dataset, pixels, syntax)) as reader:
        frame = reader.frame(1)
    assert np.array_equal(frame.raster.samples, samples)
    assert frame.raster.format.photometric == photometric
    assert (frame.raster.format.bits_stored, frame.raster.format.signed) == (stored, signed)
    assert frame.bits_used == stored
    if syntax == DEFLATED:  # the share of this frame in a file that is deflated as a whole
        assert 0 < frame.origin.source_bytes < samples.nbytes * 1.2
    else:
        assert frame.origin.source_bytes == samples.nbytes


@pytest.mark.parametrize(("allocated", "stored", "signed"), FORMATS)
@pytest.mark.parametrize(("syntax", "encode"), CODES)
def test_coded_grey_comes_back_and_a_second_decoder_agrees(
    tmp_path: Path, syntax: str, encode: Callable[[Array, int], bytes], allocated: int, stored: int, signed: bool
) -> None:
    samples = grey(allocated, stored, signed=signed)
    dataset = header_for(samples, BitsStored=stored)
    if signed and encode is jpeg_xl:
        code = jpeg_xl(unsigned(samples), 8 * samples.dtype.itemsize)
        with (
            open_instance(write_instance(tmp_path, dataset, [code], syntax)) as reader,
            pytest.raises(InputRefused, match=r"^sign"),
        ):
            reader.frame(1)
        return
    code = encode(samples, stored)
    with open_instance(write_instance(tmp_path, dataset, [code], syntax)) as reader:
        frame = reader.frame(1)
        second = reader.second_opinion(1)
    assert np.array_equal(frame.raster.samples, samples)
    assert second is None or np.array_equal(second, samples)
    assert (second is None) == (encode in (jpeg_ls, jpeg_xl))
    assert frame.origin.source_bytes - len(code) in ((0, 1) if encode in (rle, jpeg_xl) else (0,))


@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize(("syntax", "encode"), CODES)
def test_coded_colour_comes_back(tmp_path: Path, syntax: str, encode: Callable[[Array, int], bytes], bits: int) -> None:
    samples = noise((*SHAPE, 3), bits, dtype=f"u{bits // 8}")
    with open_instance(write_instance(tmp_path, header_for(samples), [encode(samples, bits)], syntax)) as reader:
        frame = reader.frame(1)
        second = reader.second_opinion(1)
    assert np.array_equal(frame.raster.samples, samples)
    assert second is None or np.array_equal(second, samples)
    assert frame.unit == "luma level"
    assert frame.raster.format.photometric == "RGB"


@pytest.mark.parametrize("planes", [0, 1])
@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize("syntax", NATIVE)
def test_uncompressed_colour_comes_back(tmp_path: Path, syntax: str, bits: int, planes: int) -> None:
    samples = noise((*SHAPE, 3), bits, dtype=f"u{bits // 8}")
    laid = np.moveaxis(samples, -1, 0) if planes else samples
    pixels = laid.astype(laid.dtype.newbyteorder(">" if syntax == BIG_ENDIAN else "<")).tobytes()
    if syntax == BIG_ENDIAN and bits == 8:
        pixels = np.frombuffer(pixels, dtype=">u2").astype("<u2").tobytes()
    dataset = header_for(samples, PlanarConfiguration=planes)
    with open_instance(write_instance(tmp_path, dataset, pixels, syntax)) as reader:
        assert np.array_equal(reader.frame(1).raster.samples, samples)


def smooth(shape: tuple[int, ...], highest: int) -> Array:
    rows, columns = np.mgrid[: shape[0], : shape[1]]
    grey_levels = (np.sin(rows / 9) + np.cos(columns / 7) + 2) / 4 * highest
    return grey_levels if len(shape) == 2 else np.stack([grey_levels, grey_levels[::-1], highest - grey_levels], -1)


def progressive(samples: Array, bits: int) -> bytes:
    """Progressive JPEG by Pillow, whose libjpeg is another build than the one under test."""
    import io

    from PIL import Image

    out = io.BytesIO()
    Image.fromarray(samples).save(out, "JPEG", quality=95, progressive=True)
    return out.getvalue()


def by_pillow(code: bytes) -> Array:
    import io

    from PIL import Image

    return np.asarray(Image.open(io.BytesIO(code)))


@pytest.mark.parametrize("syntax", [J + "53", J + "55"], ids=[".53", ".55"])
@pytest.mark.parametrize("colour", [False, True], ids=["grey", "colour"])
def test_progressive_jpeg_equals_another_decoder(tmp_path: Path, syntax: str, colour: bool) -> None:
    samples = np.round(smooth((40, 56, 3) if colour else (40, 56), 255)).astype(np.uint8)
    code = progressive(samples, 8)
    dataset = header_for(samples, PhotometricInterpretation="YBR_FULL_422" if colour else "MONOCHROME2")
    with open_instance(write_instance(tmp_path, dataset, [code], syntax)) as reader:
        ours = reader.frame(1).raster.samples
    # Decoders of the cosine transform may differ by a few levels where channels are subsampled.
    assert np.abs(ours.astype(int) - by_pillow(code).astype(int)).max() <= (3 if colour else 1)


def test_extended_jpeg_of_12_bits_comes_back_near_its_source(tmp_path: Path) -> None:
    samples = np.round(smooth((40, 56), 4095)).astype(np.uint16)
    code = bytes(imagecodecs.jpeg8_encode(samples, 98, bitspersample=12))
    with open_instance(write_instance(tmp_path, header_for(samples, BitsStored=12), [code], J + "51")) as reader:
        ours = reader.frame(1).raster.samples
    assert np.abs(ours.astype(int) - samples.astype(int)).max() <= 16  # quantiser steps at this setting


@pytest.mark.parametrize("photometric", ["YBR_FULL_422", "YBR_FULL"])
def test_recompressed_jpeg_gives_the_samples_of_the_jpeg_itself(tmp_path: Path, photometric: str) -> None:
    samples = np.round(smooth((40, 56, 3), 255)).astype(np.uint8)
    jpeg = bytes(imagecodecs.jpeg8_encode(samples, 90))
    boxed = bytes(imagecodecs.jpegxl_encode_jpeg(jpeg))
    read = []
    for syntax, code in ((J + "50", jpeg), (J + "111", boxed)):
        dataset = header_for(samples, PhotometricInterpretation=photometric)
        with open_instance(write_instance(tmp_path, dataset, [code], syntax)) as reader:
            read.append(reader.frame(1))
    assert np.array_equal(read[0].raster.samples, read[1].raster.samples)
    assert "decoded as the JPEG stream it was made from" in read[1].origin.notes


@pytest.mark.parametrize("offset_table", [True, False], ids=["with offsets", "without offsets"])
def test_frames_are_found_with_and_without_an_offset_table(tmp_path: Path, offset_table: bool) -> None:
    frames = [noise(SHAPE, 12, seed=seed) for seed in range(5)]
    dataset = header_for(frames[0], BitsStored=12, NumberOfFrames=5)
    codes = [jpeg_ls(each, 12) for each in frames]
    instance = write_instance(tmp_path, dataset, codes, J + "80", offset_table=offset_table)
    with open_instance(instance) as reader:
        for number in (3, 1, 5, 2, 4):
            assert np.array_equal(reader.frame(number).raster.samples, frames[number - 1])


def test_an_encapsulated_uncompressed_file_is_read(tmp_path: Path) -> None:
    frames = [noise(SHAPE, 12, seed=seed) for seed in range(2)]
    dataset = header_for(frames[0], BitsStored=12, NumberOfFrames=2)
    codes = [each.astype("<u2").tobytes() for each in frames]
    with open_instance(write_instance(tmp_path, dataset, codes, "1.2.840.10008.1.2.1.98")) as reader:
        assert np.array_equal(reader.frame(2).raster.samples, frames[1])


def test_deflating_is_what_the_deflated_file_was_written_with(tmp_path: Path) -> None:
    """Guards the matrix above: the file's data set is unreadable until inflated."""
    samples = noise(SHAPE, 12)
    instance = write_instance(tmp_path, header_for(samples, BitsStored=12), samples.tobytes(), DEFLATED)
    content = instance.source.path.read_bytes()
    assert samples.tobytes() not in content
    start = 144 + int.from_bytes(content[140:144], "little")
    assert samples.tobytes() in zlib.decompress(content[start:], -zlib.MAX_WBITS)
