"""Headers written on the spot: doubtful paths are refused by their reason, harmless oddities set right and noted."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from pydicom.dataset import Dataset
from pydicom.sequence import Sequence

from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.frames import Frame
from safecheck.wording import REASONS, lint
from tests.dicom.factory import EXPLICIT, J, header_for, noise, write_instance

Array = npt.NDArray[Any]
GREY = noise((12, 10), 12)


def read(folder: Path, dataset: Dataset, pixels: Any, syntax: str = EXPLICIT, modality: str = "CT") -> Frame:
    with open_instance(write_instance(folder, dataset, pixels, syntax, modality=modality)) as reader:
        return reader.frame(1)


def grey_header(**changes: object) -> Dataset:
    return header_for(GREY, **{"BitsStored": 12, **changes})


REFUSED = [
    pytest.param({"Rows": None}, "header", id="no rows"),
    pytest.param({"Columns": 0}, "header", id="no columns"),
    pytest.param({"Rows": 16384, "Columns": 16385}, "too-large", id="a row more than 2 to the 28 pixels"),
    pytest.param({"Rows": 16384, "Columns": 16384}, "truncated", id="2 to the 28 pixels, of which few are there"),
    pytest.param({"SamplesPerPixel": None}, "header", id="no samples per pixel"),
    pytest.param({"SamplesPerPixel": 3, "PlanarConfiguration": 0}, "photometric", id="grey of three samples"),
    pytest.param({"PhotometricInterpretation": None}, "header", id="no photometric interpretation"),
    pytest.param({"PhotometricInterpretation": "PALETTE COLOR"}, "palette", id="palette"),
    pytest.param({"PhotometricInterpretation": "CMYK"}, "photometric", id="CMYK"),
    pytest.param({"PhotometricInterpretation": "YBR_PARTIAL_422"}, "photometric", id="partial range"),
    pytest.param({"BitsAllocated": 32, "BitsStored": 32}, "bits", id="32 bits"),
    pytest.param({"BitsAllocated": 12}, "bits", id="12 bits allocated"),
    pytest.param({"BitsAllocated": 1, "BitsStored": 1}, "bits", id="1 bit"),
    pytest.param({"BitsStored": 17}, "bits", id="more stored than allocated"),
    pytest.param({"BitsStored": 0, "HighBit": 0}, "bits", id="none stored"),
    pytest.param({"HighBit": 10}, "bits", id="high bit below the stored"),
    pytest.param({"HighBit": None}, "header", id="no high bit"),
    pytest.param({"PixelRepresentation": None}, "header", id="no sign declared"),
    pytest.param({"PixelRepresentation": 2}, "header", id="a sign of 2"),
    pytest.param({"NumberOfFrames": 2}, "truncated", id="one frame of two"),
    pytest.param({"Rows": 11}, "length", id="a row more than declared"),
    pytest.param({"Rows": 13}, "truncated", id="a row less than declared"),
    pytest.param({"RescaleSlope": 0, "RescaleIntercept": 0}, "rescale", id="slope of zero"),
    pytest.param({"RescaleSlope": 2}, "rescale", id="slope without intercept"),
    pytest.param({"RescaleIntercept": -1024}, "rescale", id="intercept without slope"),
]


@pytest.mark.parametrize(("changes", "reason"), REFUSED)
def test_a_doubtful_header_is_refused(tmp_path: Path, changes: dict[str, object], reason: str) -> None:
    with pytest.raises(InputRefused, match=f"^{reason}") as caught:
        read(tmp_path, grey_header(**changes), GREY.tobytes())
    assert caught.value.reason in REASONS
    assert not list(lint(str(caught.value)))


@pytest.mark.parametrize("slope", ["nan", "inf", "1\\2", "abc"])
def test_a_slope_that_is_no_number_is_refused(tmp_path: Path, slope: str) -> None:
    instance = write_instance(tmp_path, grey_header(RescaleSlope=1.25, RescaleIntercept=0), GREY.tobytes())
    content = instance.source.path.read_bytes()
    assert content.count(b"1.25") == 1
    instance.source.path.write_bytes(content.replace(b"1.25", slope.ljust(4).encode()))
    with open_instance(instance) as reader, pytest.raises(InputRefused, match=r"^rescale"):
        reader.frame(1)


def test_a_number_of_frames_that_is_no_number_is_refused(tmp_path: Path) -> None:
    instance = write_instance(tmp_path, grey_header(NumberOfFrames=10), GREY.tobytes())
    content = instance.source.path.read_bytes()
    tag = b"\x28\x00\x08\x00IS\x02\x00"
    assert content.count(tag + b"10") == 1
    instance.source.path.write_bytes(content.replace(tag + b"10", tag + b"1A"))
    with pytest.raises(InputRefused, match=r"^header: NumberOfFrames"):
        open_instance(instance)


def test_floating_point_samples_are_refused(tmp_path: Path) -> None:
    dataset = grey_header(BitsAllocated=32)
    instance = write_instance(tmp_path, dataset, GREY.tobytes())
    content = instance.source.path.read_bytes()
    instance.source.path.write_bytes(content.replace(b"\xe0\x7f\x10\x00OW", b"\xe0\x7f\x08\x00OF"))
    with pytest.raises(InputRefused, match=r"^bits"):
        open_instance(instance)


@pytest.mark.parametrize("syntax", [J + "102", J + "94", J + "92", "1.2.840.113619.5.2", "1.2.840.10008.1.2.6.1"])
def test_a_syntax_that_no_decoder_reads_is_refused_without_its_uid(tmp_path: Path, syntax: str) -> None:
    instance = write_instance(tmp_path, grey_header(), [b"\x00\x00"], J + "90")
    content = instance.source.path.read_bytes()
    ours = (J + "90").encode() + b"\x00" * (len(J + "90") % 2)
    padded = syntax.encode() + b"\x00" * (len(syntax) % 2)
    head = b"\x02\x00\x10\x00UI"
    content = content.replace(
        head + struct.pack("<H", len(ours)) + ours, head + struct.pack("<H", len(padded)) + padded
    )
    group = struct.unpack_from("<I", content, 140)[0] + len(padded) - len(ours)
    instance.source.path.write_bytes(content[:140] + struct.pack("<I", group) + content[144:])
    with pytest.raises(InputRefused, match=r"^syntax") as caught:
        open_instance(instance)
    assert "1.2.840" not in str(caught.value)


def test_a_file_cut_short_is_refused(tmp_path: Path) -> None:
    instance = write_instance(tmp_path, grey_header(), GREY.tobytes())
    content = instance.source.path.read_bytes()
    instance.source.path.write_bytes(content[:-2])
    with pytest.raises(InputRefused, match=r"^truncated"):
        open_instance(instance)


def test_a_pad_byte_after_an_odd_length_is_no_surplus(tmp_path: Path) -> None:
    samples = noise((3, 5), 8, dtype="u1")
    frame = read(tmp_path, header_for(samples), samples.tobytes())
    assert np.array_equal(frame.raster.samples, samples)
    assert frame.origin.source_bytes == 15


# --- bits above the stored ones


def test_bits_above_the_stored_ones_are_refused(tmp_path: Path) -> None:
    samples = GREY | (1 << 13)
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, grey_header(), samples.tobytes())


@pytest.mark.parametrize("bit", [12, 15])
def test_a_declared_overlay_in_the_high_bits_is_masked(tmp_path: Path, bit: int) -> None:
    dataset = grey_header()
    dataset.add_new(0x60000100, "US", 16)
    dataset.add_new(0x60000102, "US", bit)
    frame = read(tmp_path, dataset, (GREY | (1 << bit)).tobytes())
    assert np.array_equal(frame.raster.samples, GREY)
    assert "overlay planes in unused bits of the samples were masked" in frame.origin.notes


def test_an_overlay_masks_its_own_bit_only(tmp_path: Path) -> None:
    dataset = grey_header()
    dataset.add_new(0x60000100, "US", 16)
    dataset.add_new(0x60000102, "US", 12)
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, dataset, (GREY | (1 << 12) | (1 << 13)).tobytes())


def test_an_overlay_with_data_of_its_own_masks_nothing(tmp_path: Path) -> None:
    dataset = grey_header()
    dataset.add_new(0x60000100, "US", 16)
    dataset.add_new(0x60000102, "US", 12)
    dataset.add_new(0x60003000, "OW", bytes(16))
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, dataset, (GREY | (1 << 12)).tobytes())


SIGNED = noise((12, 10), 12, signed=True, dtype="i2")


def signed_header() -> Dataset:
    return header_for(SIGNED, BitsStored=12)


def test_a_sign_carried_into_the_high_bits_is_read(tmp_path: Path) -> None:
    frame = read(tmp_path, signed_header(), SIGNED.tobytes())
    assert np.array_equal(frame.raster.samples, SIGNED)
    assert frame.origin.notes == ()


def test_a_sign_kept_in_the_stored_bits_is_read(tmp_path: Path) -> None:
    frame = read(tmp_path, signed_header(), (SIGNED.view("u2") & 0xFFF).tobytes())
    assert np.array_equal(frame.raster.samples, SIGNED)


def test_a_sign_carried_in_some_samples_only_is_refused(tmp_path: Path) -> None:
    # The others may as well be positive values beyond the stored bits.
    mixed = SIGNED.view("u2").copy()
    mixed[:6] &= 0xFFF
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, signed_header(), mixed.tobytes())


def test_a_signed_value_beyond_its_bits_is_refused(tmp_path: Path) -> None:
    samples = SIGNED.copy()
    samples[3, 3] = 2048
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, signed_header(), samples.tobytes())


def test_a_sign_extended_into_samples_declared_unsigned_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, grey_header(), SIGNED.tobytes())


@pytest.mark.parametrize("signed", [False, True])
def test_stored_bits_that_begin_above_the_lowest_are_shifted(tmp_path: Path, signed: bool) -> None:
    samples = SIGNED if signed else GREY
    dataset = header_for(samples, BitsStored=12, HighBit=15)
    frame = read(tmp_path, dataset, (samples.view("u2") << 4).tobytes())
    assert np.array_equal(frame.raster.samples, samples)
    assert any("shifted" in note for note in frame.origin.notes)


def test_an_overlay_below_the_stored_bits_is_masked(tmp_path: Path) -> None:
    dataset = grey_header(HighBit=15)
    dataset.add_new(0x60020100, "US", 16)
    dataset.add_new(0x60020102, "US", 1)
    frame = read(tmp_path, dataset, ((GREY << 4) | 2).tobytes())
    assert np.array_equal(frame.raster.samples, GREY)


def test_bits_below_the_stored_ones_are_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^high-bits"):
        read(tmp_path, grey_header(HighBit=15), ((GREY << 4) | 1).tobytes())


@pytest.mark.parametrize(
    ("samples", "bits"),
    [
        ([[0, 0]], 1),
        ([[0, 1]], 1),
        ([[0, 255]], 8),
        ([[0, 256]], 9),
        ([[-1, 0]], 1),
        ([[-2, 0]], 2),
        ([[-2, 1]], 2),
        ([[-2, 2]], 3),
        ([[-129, 5]], 9),
        ([[3, 7]], 3),
    ],
)
def test_bits_used_are_counted_in_twos_complement_where_negative(samples: list[list[int]], bits: int) -> None:
    # Computed from the stated definition.
    from safecheck.dicom.stored_bits import bits_needed

    assert bits_needed(np.array(samples, dtype=np.int16)) == bits


def test_frames_outside_the_file_are_refused(tmp_path: Path) -> None:
    with open_instance(write_instance(tmp_path, grey_header(), GREY.tobytes())) as reader:
        for number in (0, 2, -1):
            with pytest.raises(InputRefused, match=r"^frames"):
                reader.frame(number)


def test_every_note_keeps_to_the_wording(tmp_path: Path) -> None:
    dataset = grey_header(
        PixelSpacing=[0, 0],
        ImagerPixelSpacing=[0.1, 0.1],
        WindowCenter=[1, 2],
        WindowWidth=[0, 5],
    )
    dataset.add_new("PixelPaddingValue", "SS", -1)
    dataset.VOILUTSequence = Sequence([Dataset()])
    notes = read(tmp_path, dataset, GREY.tobytes()).origin.notes
    assert len(notes) >= 5
    assert not [word for note in notes for word in lint(note)]
