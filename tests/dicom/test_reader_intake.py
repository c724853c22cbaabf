"""From intake to frames over everything that pydicom and pydicom-data hold, and what no refusal may tell."""

from __future__ import annotations

import io
import struct
import warnings
import zipfile
from collections import Counter
from collections.abc import Callable
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import pydicom
import pytest
from pydicom.encaps import encapsulate_extended

from safecheck.dicom.decoder_check import check_decoders
from safecheck.dicom.intake import Include
from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.wording import REASONS, lint
from tests.dicom.factory import (
    DEFLATED,
    EXPLICIT,
    IMPLICIT,
    RLE,
    J,
    header_for,
    instance_at,
    noise,
    real_file,
    write_instance,
)
from tests.dicom.made_files import take_in

Array = npt.NDArray[Any]
FOLDERS = (Path(pydicom.__file__).parent / "data" / "test_files", real_file("693_UNCR.dcm").parent)
GREY = noise((40, 56), 12)


def test_everything_that_intake_hands_over_is_read_or_refused_by_reason() -> None:
    intake = take_in(*FOLDERS, include=Include(localizers=True, secondary_captures=True, lossy_sources=True))
    refused: Counter[str] = Counter()
    read = 0
    for instance in intake.instances:
        try:
            with open_instance(instance) as reader:
                assert reader.frames == instance.frames
                frame = reader.frame(1)
        except InputRefused as error:
            refused[error.reason] += 1
            continue
        read += 1
        assert frame.raster.shape == (instance.rows, instance.columns)
        assert frame.raster.format.bits_stored == instance.bits_stored
        assert (frame.key.patient, frame.key.instance) == (instance.patient, instance.instance)
        assert 0 < frame.origin.source_bytes <= instance.pixel_bytes
        assert not [word for note in frame.origin.notes for word in lint(note)]
    assert read > 60
    assert set(refused) <= {"bits", "sign", "decode", "length", "truncated", "high-bits", "header", "photometric"}


def test_a_member_of_an_archive_is_read_like_the_file_itself(tmp_path: Path) -> None:
    archive = tmp_path / "export.zip"
    with zipfile.ZipFile(archive, "w", zipfile.ZIP_DEFLATED) as made:
        made.write(real_file("CT_small.dcm"), "a/b")
    with (
        open_instance(instance_at(archive, member="a/b")) as packed,
        open_instance(instance_at(real_file("CT_small.dcm"))) as plain,
    ):
        assert np.array_equal(packed.frame(1).raster.samples, plain.frame(1).raster.samples)


def test_a_file_that_is_gone_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputRefused, match=r"^unreadable"):
        open_instance(instance_at(tmp_path / "gone"))


def test_a_deflated_file_whose_stream_is_damaged_is_refused(tmp_path: Path) -> None:
    instance = write_instance(tmp_path, header_for(GREY, BitsStored=12), GREY.tobytes(), DEFLATED)
    content = instance.source.path.read_bytes()
    start = 144 + int.from_bytes(content[140:144], "little")
    instance.source.path.write_bytes(content[:start] + b"\xff" + content[start + 1 :])
    with pytest.raises(InputRefused, match=r"^(unreadable|truncated|length|no-pixels)"):
        open_instance(instance)


@pytest.mark.parametrize(("written", "named"), [(IMPLICIT, EXPLICIT), (EXPLICIT, IMPLICIT)])
def test_value_representations_that_the_syntax_disputes_are_refused(tmp_path: Path, written: str, named: str) -> None:
    instance = write_instance(tmp_path, header_for(GREY, BitsStored=12), GREY.tobytes(), written)
    meta, rest = instance.source.path.read_bytes().split(written.encode().ljust(20, b"\x00")[: len(written) + 1], 1)
    # A UID of odd length has a pad byte: both names are written with their own length.
    name = named.encode() + b"\x00" * (len(named) % 2)
    instance.source.path.write_bytes(meta[:-2] + len(name).to_bytes(2, "little") + name + rest)
    with pytest.raises(InputRefused, match=r"^length: the data set is encoded in another way"):
        open_instance(instance)


def test_the_total_length_of_encapsulated_pixels_is_no_end_of_the_header(tmp_path: Path) -> None:
    # (7FE0,0003) stands before the pixel data (PS3.5 A.4).
    code = bytes(imagecodecs.jpegls_encode(GREY))
    dataset = header_for(GREY, BitsStored=12)
    dataset.add_new(0x7FE00003, "UV", len(code))
    instance = write_instance(tmp_path, dataset, [code], J + "80")
    assert take_in(instance.source.path).counts == {"assessed": 1}
    with open_instance(instance) as reader:
        assert np.array_equal(reader.frame(1).raster.samples, GREY)


def test_an_extended_offset_table_is_followed(tmp_path: Path) -> None:
    frames = [noise((12, 10), 12, seed=seed) for seed in range(4)]
    codes = [bytes(imagecodecs.jpegls_encode(each)) for each in frames]
    dataset = header_for(frames[0], BitsStored=12, NumberOfFrames=4)
    _, dataset.ExtendedOffsetTable, dataset.ExtendedOffsetTableLengths = encapsulate_extended(codes)
    with open_instance(write_instance(tmp_path, dataset, codes, J + "80", offset_table=False)) as reader:
        for number in (4, 1, 3, 2):
            assert np.array_equal(reader.frame(number).raster.samples, frames[number - 1])


def test_an_extended_offset_table_tells_apart_what_no_marker_does(tmp_path: Path) -> None:
    frames = [noise((12, 10), 12, seed=seed) for seed in range(3)]
    codes = [bytes(imagecodecs.jpegxl_encode(each, lossless=True)) for each in frames]
    codes = [code + b"\x00" * (len(code) % 2) for code in codes]
    halves = [part for code in codes for part in (code[:8], code[8:])]
    starts = np.cumsum([0] + [len(code) + 16 for code in codes[:-1]])  # two items of 8 bytes each
    dataset = header_for(frames[0], BitsStored=12, NumberOfFrames=3)
    with pytest.raises(InputRefused, match=r"^frames"):
        open_instance(write_instance(tmp_path, dataset, halves, J + "110", offset_table=False))
    dataset.ExtendedOffsetTable = starts.astype("<u8").tobytes()
    dataset.ExtendedOffsetTableLengths = bytes(24)
    with open_instance(write_instance(tmp_path, dataset, halves, J + "110", offset_table=False)) as reader:
        for number in (2, 3, 1):
            assert np.array_equal(reader.frame(number).raster.samples, frames[number - 1])


def test_no_refusal_repeats_what_the_header_holds(tmp_path: Path) -> None:
    canary = "CANARY^NAME"
    for changes in (
        {"PhotometricInterpretation": canary},
        {"RescaleType": canary, "RescaleSlope": 0, "RescaleIntercept": 0},
        {"PatientName": canary, "BitsStored": 17},
        {"PatientID": canary, "NumberOfFrames": 7},
    ):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            dataset = header_for(GREY, **{"BitsStored": 12, **changes})
            instance = write_instance(tmp_path, dataset, GREY.tobytes())
        with pytest.raises(InputRefused, match=r"^\w") as caught, open_instance(instance) as reader:
            reader.frame(1)
        told: BaseException | None = caught.value
        while told is not None:
            assert canary not in str(told)
            assert str(tmp_path) not in str(told)
            told = told.__cause__


# --- corrupted code streams: a refusal or samples of the declared shape, never anything else

Encode = Callable[[], bytes]
COLOUR = np.stack([np.add.outer(np.arange(40), np.arange(56)) % 256] * 3, axis=-1).astype(np.uint8)


def rle() -> bytes:
    planes = [(GREY >> 8).astype("u1"), (GREY & 0xFF).astype("u1")]
    segments = [bytes(imagecodecs.packbits_encode(plane.tobytes())) for plane in planes]
    return struct.pack("<16I", 2, 64, 64 + len(segments[0]), *[0] * 13) + b"".join(segments)


CODES: list[Any] = [
    pytest.param(RLE, rle, id="RLE"),
    pytest.param(J + "50", lambda: bytes(imagecodecs.jpeg8_encode(GREY.astype("u1"), 90)), id="baseline"),
    pytest.param(J + "51", lambda: bytes(imagecodecs.jpeg8_encode(GREY, 90, bitspersample=12)), id="extended"),
    pytest.param(
        J + "70", lambda: bytes(imagecodecs.jpeg8_encode(GREY, lossless=True, bitspersample=12)), id="lossless"
    ),
    pytest.param(J + "80", lambda: bytes(imagecodecs.jpegls_encode(GREY)), id="JPEG-LS"),
    pytest.param(
        J + "90",
        lambda: bytes(imagecodecs.jpeg2k_encode(GREY, level=0, codecformat="J2K", reversible=True, bitspersample=12)),
        id="JPEG 2000",
    ),
    pytest.param(J + "201", lambda: bytes(imagecodecs.htj2k_encode(GREY, reversible=True)), id="HTJ2K"),
    pytest.param(J + "110", lambda: bytes(imagecodecs.jpegxl_encode(GREY, lossless=True)), id="JPEG XL"),
    pytest.param(
        J + "111",
        lambda: bytes(imagecodecs.jpegxl_encode_jpeg(imagecodecs.jpeg8_encode(GREY.astype("u1"), 90))),
        id="JPEG XL around JPEG",
    ),
]


@pytest.mark.parametrize(("syntax", "encode"), CODES)
def test_a_corrupted_code_stream_gives_a_refusal_or_samples_and_nothing_else(
    tmp_path: Path, syntax: str, encode: Encode, capfd: pytest.CaptureFixture[str]
) -> None:
    code = encode()
    narrow = syntax in (J + "50", J + "111")
    dataset = header_for(GREY.astype("u1") if narrow else GREY, **({} if narrow else {"BitsStored": 12}))
    rng = np.random.default_rng(7)
    outcomes: Counter[str] = Counter()
    for _ in range(60):
        broken = bytearray(code)
        for place in rng.integers(0, len(code) if rng.random() < 0.5 else min(len(code), 120), 2):
            broken[place] = rng.integers(0, 256)
        if rng.random() < 0.2:
            del broken[int(rng.integers(1, len(code))) :]
        with open_instance(write_instance(tmp_path, dataset, [bytes(broken)], syntax)) as reader:
            try:
                assert reader.frame(1).raster.shape == (40, 56)
                outcomes["read"] += 1
            except InputRefused as error:
                outcomes[error.reason] += 1
    assert set(outcomes) != {"read"}
    assert set(outcomes) <= {"read", *REASONS}
    assert "Traceback" not in capfd.readouterr().err


def test_the_decoders_of_this_machine_are_exact_and_agree() -> None:
    checks = check_decoders()
    assert len(checks) == 17
    assert all(check.exact is not False and check.agree is not False for check in checks)
    assert sum(check.exact is True for check in checks) == 12
    assert sum(check.agree is True for check in checks) == 8
    assert all(check.agree is None for check in checks if not check.second_library)


def test_a_decoder_that_errs_is_found_out(monkeypatch: pytest.MonkeyPatch) -> None:
    real = imagecodecs.jpegls_decode

    def off_by_one(code: bytes) -> Array:
        samples = np.array(real(code))
        samples[0, 0] ^= 1
        return samples

    monkeypatch.setattr(imagecodecs, "jpegls_decode", off_by_one)
    wrong = [check for check in check_decoders() if check.exact is False]
    assert [check.library for check in wrong] == ["CharLS (imagecodecs)"] * 2


def test_an_opened_file_is_closed_again(tmp_path: Path) -> None:
    instance = write_instance(tmp_path, header_for(GREY, BitsStored=12), GREY.tobytes(), EXPLICIT)
    with open_instance(instance) as reader:
        stream = reader._stream
        assert isinstance(stream, io.BufferedReader)
    assert stream.closed
