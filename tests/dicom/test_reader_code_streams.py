"""Code streams held against the header: what contradicts it is refused by its reason, what is harmless is noted."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import pytest
from pydicom.dataset import Dataset

from safecheck.dicom import frame_pixels
from safecheck.dicom.decoders import DECODERS
from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.frames import Frame
from tests.dicom.factory import EXPLICIT, RLE, J, header_for, noise, write_instance

Array = npt.NDArray[Any]
GREY = noise((12, 10), 12)
SIGNED = noise((12, 10), 12, signed=True, dtype="i2")


def read(folder: Path, dataset: Dataset, pixels: Any, syntax: str = EXPLICIT, modality: str = "CT") -> Frame:
    with open_instance(write_instance(folder, dataset, pixels, syntax, modality=modality)) as reader:
        return reader.frame(1)


def grey_header(**changes: object) -> Dataset:
    return header_for(GREY, **{"BitsStored": 12, **changes})


def j2k(samples: Array, bits: int, **options: Any) -> bytes:
    return bytes(
        imagecodecs.jpeg2k_encode(samples, level=0, reversible=True, codecformat="J2K", bitspersample=bits, **options)
    )


@pytest.mark.parametrize("signed", [False, True])
def test_a_sign_that_header_and_code_stream_dispute_is_refused(tmp_path: Path, signed: bool) -> None:
    samples = SIGNED if signed else GREY >> 1
    dataset = header_for(samples, BitsStored=12, PixelRepresentation=int(not signed))
    with pytest.raises(InputRefused, match=r"^sign"):
        read(tmp_path, dataset, [j2k(samples, 12)], J + "90")


def test_a_lossy_code_of_signed_samples_that_has_no_sign_is_refused(tmp_path: Path) -> None:
    code = bytes(imagecodecs.jpeg8_encode(GREY, 95, bitspersample=12))
    with pytest.raises(InputRefused, match=r"^sign"):
        read(tmp_path, header_for(SIGNED, BitsStored=12), [code], J + "51")


def test_decoded_values_beyond_the_declared_bits_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^range"):
        read(tmp_path, grey_header(BitsStored=11), [j2k(GREY, 12)], J + "90")


def test_signed_decoded_values_beyond_the_declared_bits_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^range"):
        read(tmp_path, header_for(SIGNED, BitsStored=11), [j2k(SIGNED, 12)], J + "90")


def test_a_code_stream_of_more_bits_than_allocated_is_refused(tmp_path: Path) -> None:
    dataset = header_for(GREY.astype("u1"))
    with pytest.raises(InputRefused, match=r"^bits"):
        read(tmp_path, dataset, [j2k(GREY, 12)], J + "90")


@pytest.mark.parametrize(("change"), [{"Rows": 11}, {"Columns": 11}])
def test_a_code_stream_of_another_size_is_refused(tmp_path: Path, change: dict[str, object]) -> None:
    for syntax, code in (
        (J + "90", j2k(GREY, 12)),
        (J + "80", bytes(imagecodecs.jpegls_encode(GREY))),
        (J + "110", bytes(imagecodecs.jpegxl_encode(GREY, lossless=True))),
    ):
        with pytest.raises(InputRefused, match=r"^length"):
            read(tmp_path, grey_header(**change), [code], syntax)


def coded_streams() -> dict[str, bytes]:
    """Code stream of `GREY` by syntax."""
    return {
        J + "51": bytes(imagecodecs.jpeg8_encode(GREY, 95, bitspersample=12)),
        J + "70": bytes(imagecodecs.jpeg8_encode(GREY, lossless=True, bitspersample=12)),
        J + "80": bytes(imagecodecs.jpegls_encode(GREY)),
        J + "90": j2k(GREY, 12),
        J + "201": bytes(imagecodecs.htj2k_encode(GREY, reversible=True)),
        J + "110": bytes(imagecodecs.jpegxl_encode(GREY, lossless=True)),
        J + "111": bytes(imagecodecs.jpegxl_encode_jpeg(imagecodecs.jpeg8_encode((GREY >> 4).astype("u1"), 95))),
    }


@pytest.mark.parametrize("syntax", list(coded_streams()))
def test_no_decoder_sees_a_code_stream_of_another_size_than_the_header(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, syntax: str
) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("a decoder was called")

    for name in ("decode", "second_opinion", "rebuild_jpeg"):
        monkeypatch.setattr(frame_pixels, name, refuse)
    instance = write_instance(tmp_path, grey_header(Rows=11), [coded_streams()[syntax]], syntax)
    with open_instance(instance) as reader:
        with pytest.raises(InputRefused, match=r"^length"):
            reader.frame(1)
        if DECODERS[syntax].second is not None:
            with pytest.raises(InputRefused, match=r"^length"):
                reader.second_opinion(1)


def test_no_memory_is_spent_on_rle_segments_that_cannot_hold_the_frame(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("memory was taken")

    monkeypatch.setattr("safecheck.dicom.decoders.np.empty", refuse)
    # PackBits at its densest: each pair stands for 128 equal bytes (PS3.5 G.3.1); the frame has one byte more.
    code = struct.pack("<16I", 1, 64, *[0] * 14) + b"\x81\x00" * 50
    dataset = header_for(np.zeros((1, 6401), dtype="u1"))
    with pytest.raises(InputRefused, match=r"^truncated: an RLE segment is too short"):
        read(tmp_path, dataset, [code], RLE)


def test_an_rle_segment_that_unpacks_to_more_than_the_frame_is_refused(tmp_path: Path) -> None:
    code = struct.pack("<16I", 1, 64, *[0] * 14) + b"\x81\x00" * 50
    with pytest.raises(InputRefused, match=r"^decode"):
        read(tmp_path, header_for(np.zeros((8, 8), dtype="u1")), [code], RLE)


def test_rle_at_its_densest_is_read(tmp_path: Path) -> None:
    code = struct.pack("<16I", 1, 64, *[0] * 14) + b"\x81\x07" * 50
    samples = np.full((80, 80), 7, dtype="u1")
    assert np.array_equal(read(tmp_path, header_for(samples), [code], RLE).raster.samples, samples)


def test_a_code_stream_of_another_process_than_its_syntax_is_refused(tmp_path: Path) -> None:
    code = bytes(imagecodecs.jpeg8_encode(GREY, lossless=True, bitspersample=12))
    with pytest.raises(InputRefused, match=r"^syntax"):
        read(tmp_path, grey_header(), [code], J + "51")
    with pytest.raises(InputRefused, match=r"^syntax"):
        read(tmp_path, grey_header(), [bytes(imagecodecs.htj2k_encode(GREY, reversible=True))], J + "90")


@pytest.mark.parametrize("syntax", [J + "80", J + "90", J + "70", J + "201"])
def test_a_code_stream_without_its_end_is_refused(tmp_path: Path, syntax: str) -> None:
    code = {
        J + "80": bytes(imagecodecs.jpegls_encode(GREY)),
        J + "90": j2k(GREY, 12),
        J + "70": bytes(imagecodecs.jpeg8_encode(GREY, lossless=True, bitspersample=12)),
        J + "201": bytes(imagecodecs.htj2k_encode(GREY, reversible=True)),
    }[syntax]
    for kept in (len(code) // 2, len(code) - 2, 3):
        with pytest.raises(InputRefused, match=r"^(truncated|decode)"):
            read(tmp_path, grey_header(), [code[:kept] + b"\x01"], syntax)


@pytest.mark.parametrize("junk", [b"\x00" * 80, bytes(range(1, 200)), b"\x04" + b"\x00" * 200])
@pytest.mark.parametrize("syntax", [RLE, J + "50", J + "70", J + "80", J + "90", J + "201", J + "110", J + "111"])
def test_junk_for_a_code_stream_is_refused_and_nothing_else_happens(tmp_path: Path, syntax: str, junk: bytes) -> None:
    with pytest.raises(InputRefused, match=r"^(decode|truncated|length)"):
        read(tmp_path, grey_header(), [junk], syntax)


@pytest.mark.parametrize("syntax", [RLE, *coded_streams()])
def test_a_code_stream_of_defined_length_is_refused(tmp_path: Path, syntax: str) -> None:
    # Pixel data under an encapsulated syntax is a sequence of fragments (PS3.5 A.4).
    # The library does not write that: written as samples, and the syntax put in its place.
    instance = write_instance(tmp_path, grey_header(), coded_streams().get(syntax, bytes(64)), EXPLICIT)
    content = instance.source.path.read_bytes()
    named, name = (b"UI" + bytes((len(each), 0)) + each for each in (padded(EXPLICIT), padded(syntax)))
    assert named in content
    instance.source.path.write_bytes(content.replace(named, name, 1))
    with pytest.raises(InputRefused, match=r"^length: pixel data is framed in another way"):
        open_instance(instance)


def padded(uid: str) -> bytes:
    return uid.encode() + b"\x00" * (len(uid) % 2)


def test_an_empty_fragment_is_refused(tmp_path: Path) -> None:
    code = bytes(imagecodecs.jpegls_encode(GREY))
    instance = write_instance(tmp_path, grey_header(NumberOfFrames=1), [code], J + "80")
    content = instance.source.path.read_bytes()
    padded = code + b"\x00" * (len(code) % 2)
    item = b"\xfe\xff\x00\xe0"
    instance.source.path.write_bytes(
        content.replace(item + struct.pack("<I", len(padded)) + padded, item + b"\x00\x00\x00\x00")
    )
    with open_instance(instance) as reader, pytest.raises(InputRefused, match=r"^(decode|truncated)"):
        reader.frame(1)


def test_a_jp2_file_in_place_of_a_code_stream_is_unwrapped_and_noted(tmp_path: Path) -> None:
    boxed = bytes(imagecodecs.jpeg2k_encode(GREY, level=0, reversible=True, codecformat="JP2", bitspersample=12))
    frame = read(tmp_path, grey_header(), [boxed], J + "90")
    assert np.array_equal(frame.raster.samples, GREY)
    assert any("JP2" in note for note in frame.origin.notes)


@pytest.mark.parametrize(
    ("frames", "codes", "reason"),
    [(3, 2, "frames"), (2, 3, "frames")],
    ids=["a frame missing", "a fragment too many"],
)
def test_fragments_that_do_not_give_the_frames_declared_are_refused(
    tmp_path: Path, frames: int, codes: int, reason: str
) -> None:
    code = bytes(imagecodecs.jpegls_encode(GREY))
    instance = write_instance(tmp_path, grey_header(NumberOfFrames=frames), [code] * codes, J + "80")
    with pytest.raises(InputRefused, match=f"^{reason}"):
        open_instance(instance)


def test_a_frame_in_several_fragments_is_put_together(tmp_path: Path) -> None:
    from pydicom.encaps import encapsulate

    code = bytes(imagecodecs.jpegls_encode(GREY))
    for offset_table in (True, False):
        dataset = grey_header(NumberOfFrames=2)
        instance = write_instance(tmp_path, dataset, [code, code], J + "80")
        # The same two frames in three fragments each.
        parts = encapsulate([code, code], fragments_per_frame=3, has_bot=offset_table)
        plain = encapsulate([code, code], has_bot=True)
        content = instance.source.path.read_bytes()
        assert plain in content
        instance.source.path.write_bytes(content.replace(plain, parts))
        with open_instance(instance) as reader:
            assert np.array_equal(reader.frame(2).raster.samples, GREY)


def test_an_offset_table_that_leaves_out_the_first_fragment_is_not_followed(tmp_path: Path) -> None:
    code = bytes(imagecodecs.jpegls_encode(GREY))
    instance = write_instance(tmp_path, grey_header(NumberOfFrames=2), [code] * 3, J + "80")
    content = instance.source.path.read_bytes()
    step = len(code) + len(code) % 2 + 8
    item = b"\xfe\xff\x00\xe0"
    whole = item + struct.pack("<4I", 12, 0, step, 2 * step)
    assert whole in content
    instance.source.path.write_bytes(content.replace(whole, item + struct.pack("<3I", 8, step, 2 * step)))
    with pytest.raises(InputRefused, match=r"^frames"):
        open_instance(instance)


def test_an_offset_table_that_points_elsewhere_is_left_aside_with_a_note(tmp_path: Path) -> None:
    code = bytes(imagecodecs.jpegls_encode(GREY))
    instance = write_instance(tmp_path, grey_header(NumberOfFrames=2), [code, code], J + "80")
    content = instance.source.path.read_bytes()
    offset = struct.pack("<I", len(code) + len(code) % 2 + 8)
    table = b"\xfe\xff\x00\xe0\x08\x00\x00\x00\x00\x00\x00\x00"
    assert table + offset in content
    instance.source.path.write_bytes(content.replace(table + offset, table + b"\x02\x00\x00\x00"))
    with open_instance(instance) as reader:
        frame = reader.frame(2)
    assert np.array_equal(frame.raster.samples, GREY)
    assert any("offset table" in note for note in frame.origin.notes)


# --- colour

COLOUR = np.random.default_rng(3).integers(0, 256, (10, 12, 3)).astype(np.uint8)


@pytest.mark.parametrize(("coded", "declared"), [("RGB", "YBR_FULL"), ("YCBCR", "RGB")], ids=["coded RGB", "coded YBR"])
def test_jpeg_colour_that_header_and_stream_dispute_is_refused(tmp_path: Path, coded: str, declared: str) -> None:
    code = bytes(imagecodecs.jpeg8_encode(COLOUR, 90, colorspace="RGB", outcolorspace=coded))
    with pytest.raises(InputRefused, match=r"^photometric"):
        read(tmp_path, header_for(COLOUR, PhotometricInterpretation=declared), [code], J + "50")


def test_jpeg2000_that_names_no_transform_under_a_transformed_header_is_refused(tmp_path: Path) -> None:
    code = j2k(COLOUR, 8, mct=False)
    with pytest.raises(InputRefused, match=r"^photometric"):
        read(tmp_path, header_for(COLOUR, PhotometricInterpretation="YBR_RCT"), [code], J + "90")


def test_jpeg2000_with_a_transform_under_an_rgb_header_is_undone_and_noted(tmp_path: Path) -> None:
    frame = read(tmp_path, header_for(COLOUR), [j2k(COLOUR, 8)], J + "90")
    assert np.array_equal(frame.raster.samples, COLOUR)
    assert any("names a colour transform" in note for note in frame.origin.notes)


@pytest.mark.parametrize(
    ("photometric", "syntax"),
    [("YBR_RCT", EXPLICIT), ("YBR_ICT", RLE), ("YBR_RCT", J + "80"), ("YBR_FULL_422", J + "90")],
)
def test_colour_that_a_syntax_cannot_hold_is_refused(tmp_path: Path, photometric: str, syntax: str) -> None:
    pixels = COLOUR.tobytes() if syntax == EXPLICIT else [b"\x00\x00"]
    with pytest.raises(InputRefused, match=r"^photometric"):
        read(tmp_path, header_for(COLOUR, PhotometricInterpretation=photometric), pixels, syntax)


def test_signed_colour_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^sign"):
        read(tmp_path, header_for(COLOUR, PixelRepresentation=1), COLOUR.tobytes())


@pytest.mark.parametrize("bits", [8, 12, 16])
def test_luma_and_colour_difference_come_to_rgb_by_the_equations_of_the_standard(tmp_path: Path, bits: int) -> None:
    # Forward by PS3.3 C.7.6.3.1.2 (YBR_FULL) in double precision; back within one level of rounding on the way.
    rgb = noise((40, 50, 3), bits, dtype="u1" if bits == 8 else "u2").astype(float)
    red, green, blue = np.moveaxis(rgb, -1, 0)
    half = 1 << (bits - 1)
    ybr = np.stack(
        (
            0.2990 * red + 0.5870 * green + 0.1140 * blue,
            -0.1687 * red - 0.3313 * green + 0.5000 * blue + half,
            0.5000 * red - 0.4187 * green - 0.0813 * blue + half,
        ),
        -1,
    )
    stored = np.clip(np.round(ybr), 0, 2 * half - 1).astype("u1" if bits == 8 else "<u2")
    frame = read(
        tmp_path,
        header_for(stored, BitsStored=bits, PhotometricInterpretation="YBR_FULL"),
        stored.tobytes(),
    )
    # The standard's four-digit coefficients alone move 16 bit levels by several; 2 levels hold at 8 bits.
    allowed = {8: 2, 12: 2, 16: 10}[bits]
    assert np.abs(frame.raster.samples.astype(float) - rgb).max() <= allowed
    assert any("rounded to whole levels" in note for note in frame.origin.notes)
