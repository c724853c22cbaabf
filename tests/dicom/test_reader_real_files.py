"""Real files of pydicom and pydicom-data: against pydicom, against delivered copies, and malformed ones by reason."""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from pydicom import dcmread
from pydicom.pixels.utils import pixel_array

from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.frames import Frame
from tests.dicom.factory import instance_at, real_file


def first_frame(name: str, modality: str) -> Frame:
    with open_instance(instance_at(real_file(name), modality=modality)) as reader:
        return reader.frame(1)


def by_pydicom(name: str, index: int) -> npt.NDArray[Any]:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        if name == "image_dfl.dcm":  # pydicom reads no deflated pixels by path
            return dcmread(real_file(name)).pixel_array
        return pixel_array(real_file(name), index=index)


ONE_FRAME = [
    "CT_small.dcm",
    "ExplVR_BigEnd.dcm",
    "MR_small_bigendian.dcm",
    "MR_small_implicit.dcm",
    "MR_small_RLE.dcm",
    "MR_small_jp2klossless.dcm",
    "MR_small_jpeg_ls_lossless.dcm",
    "JPEGLSNearLossless_08.dcm",
    "JPEGLSNearLossless_16.dcm",
    "SC_rgb_jls_lossy_line.dcm",
    "SC_rgb_jls_lossy_sample.dcm",
    "SC_rgb_gdcm_KY.dcm",
    "SC_rgb_jpeg_gdcm.dcm",
    "SC_rgb_rle_16bit.dcm",
    "SC_rgb_small_odd.dcm",
    "SC_rgb_small_odd_big_endian.dcm",
    "SC_ybr_full_422_uncompressed.dcm",
    "SC_ybr_full_uncompressed.dcm",
    "GDCMJ2K_TextGBR.dcm",
    "JPEG2000.dcm",
    "JPEG-LL.dcm",
    "JPGLosslessP14SV1_1s_1f_8b.dcm",
    "bad_sequence.dcm",
    "explicit_VR-UN.dcm",
    "image_dfl.dcm",
    "693_J2KR.dcm",
    "693_J2KI.dcm",
    "US1_J2KR.dcm",
    "US1_J2KI.dcm",
    "color-pl.dcm",
    "color-px.dcm",
    "vlut_04.dcm",
    "MR-SIEMENS-DICOM-WithOverlays.dcm",
]


@pytest.mark.parametrize("name", ONE_FRAME)
def test_samples_equal_those_of_pydicom_with_its_own_decoders(name: str) -> None:
    assert np.array_equal(first_frame(name, "OT").raster.samples, by_pydicom(name, 0))


@pytest.mark.parametrize(
    "name",
    [
        "SC_rgb_rle_16bit_2frame.dcm",
        "emri_small.dcm",
        "emri_small_RLE.dcm",
        "emri_small_big_endian.dcm",
        "emri_small_jpeg_2k_lossless.dcm",
        "emri_small_jpeg_ls_lossless.dcm",
        "eCT_Supplemental.dcm",
    ],
)
def test_each_frame_of_a_multi_frame_file_equals_that_of_pydicom(name: str) -> None:
    with open_instance(instance_at(real_file(name))) as reader:
        for number in reversed(range(1, reader.frames + 1)):
            assert np.array_equal(reader.frame(number).raster.samples, by_pydicom(name, number - 1))


BASELINE = [
    "SC_jpeg_no_color_transform.dcm",
    "SC_jpeg_no_color_transform_2.dcm",
    "SC_rgb_dcmtk_+eb+cr.dcm",
    "SC_rgb_dcmtk_+eb+cy+n1.dcm",
    "SC_rgb_dcmtk_+eb+cy+s2.dcm",
    "SC_rgb_dcmtk_+eb+cy+s4.dcm",
    "SC_rgb_jpeg_lossy_gdcm.dcm",
    "SC_rgb_small_odd_jpeg.dcm",
    "examples_ybr_color.dcm",
    "color3d_jpeg_baseline.dcm",
]


@pytest.mark.parametrize("name", BASELINE)
def test_baseline_jpeg_lies_within_three_levels_of_another_decoder(name: str) -> None:
    # Decoders of JPEG baseline differ by 1 to 3 levels (measured on these files; the standard leaves them free).
    ours, theirs = first_frame(name, "US").raster.samples, by_pydicom(name, 0)
    assert ours.shape == theirs.shape
    assert np.abs(ours.astype(int) - theirs.astype(int)).max() <= 3


PAIRS = [
    # Maximum error and RMSE over the whole frame, computed beforehand with other tools (pydicom, gdcm, OpenJPEG).
    pytest.param("RG1_UNCR.dcm", "RG1_J2KI.dcm", "CR", 403.0, 63.333, id="RG1"),
    pytest.param("RG3_UNCR.dcm", "RG3_J2KI.dcm", "CR", 9.0, 1.311, id="RG3"),
    pytest.param("MR2_UNCR.dcm", "MR2_J2KI.dcm", "MR", 120.8, 20.929, id="MR2"),
    pytest.param("US1_UNCR.dcm", "US1_J2KI.dcm", "US", 124.0, 3.788, id="US1"),
    pytest.param("693_UNCR.dcm", "693_J2KI.dcm", "CT", 2080.0, 121.042, id="693"),
    pytest.param("JPEG-LL.dcm", "JPEG2000.dcm", "NM", 101.0, 7.141, id="NM JPEG 2000"),
    pytest.param("JPEG-LL.dcm", "JPGExtended.dcm", "NM", 36.0, 3.602, id="NM 12-bit JPEG by libjpeg-turbo"),
]


def in_unit(frame: Frame) -> npt.NDArray[np.float64]:
    samples = frame.raster.samples
    return samples.astype(np.float64) if samples.ndim == 3 else frame.values(samples)


@pytest.mark.parametrize(("original", "delivered", "modality", "largest", "rmse"), PAIRS)
def test_delivered_copies_differ_from_their_originals_by_the_known_figures(
    original: str, delivered: str, modality: str, largest: float, rmse: float
) -> None:
    error = in_unit(first_frame(delivered, modality)) - in_unit(first_frame(original, modality))
    assert np.abs(error).max() == pytest.approx(largest, abs=0.05)
    assert np.sqrt(np.mean(error**2)) == pytest.approx(rmse, abs=0.0005)


@pytest.mark.parametrize(
    ("reversible", "original"),
    [
        ("RG1_J2KR.dcm", "RG1_UNCR.dcm"),
        ("RG3_J2KR.dcm", "RG3_UNCR.dcm"),
        ("MR2_J2KR.dcm", "MR2_UNCR.dcm"),
        ("US1_J2KR.dcm", "US1_UNCR.dcm"),
        ("693_J2KR.dcm", "693_UNCR.dcm"),
        ("MR_small_RLE.dcm", "MR_small.dcm"),
        ("MR_small_bigendian.dcm", "MR_small.dcm"),
        ("MR_small_implicit.dcm", "MR_small.dcm"),
        ("MR_small_jp2klossless.dcm", "MR_small.dcm"),
        ("MR_small_jpeg_ls_lossless.dcm", "MR_small.dcm"),
    ],
)
def test_a_reversible_twin_holds_the_same_samples(reversible: str, original: str) -> None:
    ours, theirs = first_frame(reversible, "MR").raster.samples, first_frame(original, "MR").raster.samples
    assert np.array_equal(ours, theirs)


SECOND = [
    pytest.param("MR_small_RLE.dcm", id="RLE"),
    pytest.param("SC_rgb_rle_16bit_2frame.dcm", id="RLE colour"),
    pytest.param("693_J2KR.dcm", id="JPEG 2000"),
    pytest.param("US1_J2KR.dcm", id="JPEG 2000 colour"),
    pytest.param("JPEG-LL.dcm", id="lossless JPEG"),
    pytest.param("SC_rgb_jpeg_gdcm.dcm", id="lossless JPEG colour"),
    pytest.param("bad_sequence.dcm", id="lossless JPEG of 16 bits"),
]


@pytest.mark.parametrize("name", SECOND)
def test_the_second_decoder_agrees_bit_for_bit_on_lossless_sources(name: str) -> None:
    with open_instance(instance_at(real_file(name))) as reader:
        second = reader.second_opinion(1)
        assert second is not None
        assert np.array_equal(second, reader.frame(1).raster.samples)


def test_syntaxes_without_a_second_decoder_say_so() -> None:
    with open_instance(instance_at(real_file("MR_small_jpeg_ls_lossless.dcm"))) as reader:
        assert reader.second_opinion(1) is None


MALFORMED = [
    ("MR_truncated.dcm", "truncated"),
    ("MR_small_padded.dcm", "length"),
    ("badVR.dcm", "bits"),
    ("rtdose.dcm", "bits"),
    ("rtdose_rle.dcm", "bits"),
    ("SC_rgb_32bit.dcm", "bits"),
    ("liver_1frame.dcm", "bits"),
    ("mlut_18.dcm", "high-bits"),
    ("J2K_pixelrep_mismatch.dcm", "sign"),
    ("JPEG-lossy.dcm", "decode"),
    ("JPEG2000-embedded-sequence-delimiter.dcm", "length"),
    ("emri_small_jpeg_2k_lossless_too_short.dcm", "truncated"),
    ("SC_rgb_jpeg.dcm", "length"),
    ("meta_missing_tsyntax.dcm", "header"),
    ("nested_priv_SQ.dcm", "header"),
    ("no_meta.dcm", "no-pixels"),
    ("test-SR.dcm", "no-pixels"),
    ("waveform_ecg.dcm", "no-pixels"),
    ("rtplan_truncated.dcm", "no-pixels"),
    ("reportsi.dcm", "no-pixels"),
    ("examples_palette.dcm", "palette"),
    ("OBXXXX1A_rle.dcm", "palette"),
    ("gdcm-US-ALOKA-16_big.dcm", "palette"),
]


@pytest.mark.parametrize(("name", "reason"), MALFORMED, ids=[name for name, _ in MALFORMED])
def test_a_malformed_file_is_refused_by_its_reason(name: str, reason: str) -> None:
    with pytest.raises(InputRefused, match=f"^{reason}") as caught:
        first_frame(name, "OT")
    assert caught.value.reason == reason


def test_spacing_of_zero_is_left_aside_with_a_note() -> None:
    frame = first_frame("RG1_UNCR.dcm", "CR")
    assert frame.spacing_mm is None
    assert "pixel spacing is zero or malformed and was left aside" in frame.origin.notes


def test_the_ct_head_has_hounsfield_units_padding_and_its_window() -> None:
    frame = first_frame("693_UNCR.dcm", "CT")
    assert frame.unit == "HU"
    assert frame.raster.padding is not None
    # Padding value -2000 by the header, counted with NumPy on the raw words of the file.
    raw = np.frombuffer(real_file("693_UNCR.dcm").read_bytes()[-512 * 512 * 2 :], dtype="<i2").reshape(512, 512)
    assert np.array_equal(frame.raster.padding, raw == -2000)
    assert [each.label for each in frame.displays] == ["file window 1"]
    assert frame.spacing_mm == (0.478516, 0.478516)


def test_an_unspecified_rescale_type_is_no_hounsfield_unit() -> None:
    frame = first_frame("MR2_UNCR.dcm", "MR")
    assert frame.unit == "rescaled, unit unspecified"
    assert frame.values(frame.raster.samples).max() == pytest.approx(
        float(frame.raster.samples.max()) * 3.774114 + 0.000061
    )


def test_a_code_stream_of_other_bits_than_the_header_is_noted() -> None:
    assert "the code stream declares 14 bits, the header 16" in first_frame("693_J2KR.dcm", "CT").origin.notes


def test_the_voi_table_of_a_test_pattern_is_read() -> None:
    frame = first_frame("vlut_04.dcm", "OT")
    (table,) = frame.displays
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        item = dcmread(real_file("vlut_04.dcm")).VOILUTSequence[0]
        assert table.label == "file table 1"
        assert np.array_equal(table.entries, np.array(item.LUTData, dtype=float))  # type: ignore[union-attr]
