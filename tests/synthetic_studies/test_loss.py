"""Planted irreversible changes are what the truth says, measured from the written files."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from pydicom import dcmread

from synthetic_studies import Manner, Truth, already_lossy, ct_body, deliver, delivered_pair, mr_head, radiograph
from synthetic_studies.loss import cosine_matrix, quantise_blocks


def test_the_cosine_matrix_is_orthonormal_with_a_constant_first_row() -> None:
    matrix = cosine_matrix()
    np.testing.assert_allclose(matrix @ matrix.T, np.eye(8), atol=1e-14)
    np.testing.assert_allclose(matrix[0], 1 / np.sqrt(8), atol=1e-15)


def test_fine_quantisation_leaves_an_error_of_step_squared_over_twelve() -> None:
    # High-resolution quantiser theory, plus 1/12 for rounding to whole numbers; computed from the stated definition.
    samples = np.random.default_rng(1).integers(0, 4096, (256, 256)).astype(np.int32)
    after, _ = quantise_blocks(samples, 20.0, -10_000, 60_000)
    mse = np.mean((after.astype(float) - samples) ** 2)
    assert mse == pytest.approx(20**2 / 12 + 1 / 12, rel=0.03)


def test_a_constant_plane_costs_almost_nothing_and_a_coarser_step_costs_less() -> None:
    flat = np.full((64, 64), 1000, np.uint16)
    noise = np.random.default_rng(2).integers(0, 4096, (64, 64)).astype(np.uint16)
    sizes = [quantise_blocks(noise, step, 0, 4095)[1] for step in (8.0, 32.0, 128.0)]
    assert quantise_blocks(flat, 8.0, 0, 4095)[1] == 1.0
    assert sizes[0] > sizes[1] > sizes[2]


@pytest.mark.parametrize("shape", [(1, 1), (7, 13), (8, 8), (17, 64)], ids=str)
def test_planes_of_any_size_keep_their_shape_and_type(shape: tuple[int, int]) -> None:
    plane = np.arange(np.prod(shape), dtype=np.int16).reshape(shape)
    after, _ = quantise_blocks(plane, 4.0, -100, 2000)
    assert after.shape == shape
    assert after.dtype == plane.dtype


@pytest.fixture(scope="module")
def pair(tmp_path_factory: pytest.TempPathFactory) -> Truth:
    return delivered_pair(tmp_path_factory.mktemp("pair"), seed=9)


def test_the_planted_change_is_found_in_the_pixels(pair: Truth) -> None:
    for planted in pair.pairs:
        before, after = dcmread(planted.original), dcmread(planted.delivered)
        change = after.pixel_array.astype(np.int64) - before.pixel_array.astype(np.int64)
        inside = before.pixel_array != -2000
        assert np.sqrt(np.mean(change[inside] ** 2.0)) == pytest.approx(planted.rmse, rel=1e-12)
        assert np.sqrt(np.mean(change**2.0)) == pytest.approx(planted.rmse_frame, rel=1e-12)
        assert change[inside].mean() == pytest.approx(planted.bias, abs=1e-12)
        assert np.abs(change[inside]).max() == planted.maximum
        assert np.count_nonzero(change[~inside]) == planted.padding_changed == 0
        # About step / sqrt(12) = 6.9 at step 24, less where coefficients fall to zero.
        assert 4 < planted.rmse < 7


def test_copies_are_declared_as_the_standard_asks(pair: Truth) -> None:
    for planted in pair.pairs:
        before, after = dcmread(planted.original), dcmread(planted.delivered)
        assert after.LossyImageCompression == "01"
        assert after.ImageType[0] == "DERIVED"
        assert float(after.LossyImageCompressionRatio) > 1
        assert after.LossyImageCompressionMethod == "ISO_10918_1"
        assert after.SOPInstanceUID != before.SOPInstanceUID
        assert after.SourceImageSequence[0].ReferencedSOPInstanceUID == before.SOPInstanceUID
        assert after.StudyInstanceUID == before.StudyInstanceUID
        assert after.ImagePositionPatient == before.ImagePositionPatient
        assert after.file_meta.MediaStorageSOPInstanceUID == after.SOPInstanceUID


@pytest.mark.parametrize(
    ("manner", "flag"),
    [(Manner(flag="missing"), None), (Manner(flag="00"), "00"), (Manner(flag="01"), "01")],
    ids=["missing", "00", "01"],
)
def test_a_wrong_flag_can_be_planted(tmp_path: Path, manner: Manner, flag: str | None) -> None:
    copies = delivered_pair(tmp_path, seed=9, rows=64, columns=64, slices=1, manner=manner)
    assert dcmread(copies.files[0]).get("LossyImageCompression") == flag


def test_every_other_omission_can_be_planted(tmp_path: Path) -> None:
    original = ct_body(tmp_path / "original", seed=9, rows=64, columns=64, slices=1)
    silent = Manner(ratio=False, derived=False, new_uid=False, source=False, padding_kept=False)
    copies = deliver(original, tmp_path / "copies", step=64.0, manner=silent)
    header = dcmread(copies.files[0])
    assert header.SOPInstanceUID == original.instance_uids[0]
    assert header.ImageType[0] == "ORIGINAL"
    for keyword in ("LossyImageCompressionRatio", "SourceImageSequence", "DerivationDescription"):
        assert keyword not in header
    assert copies.pairs[0].padding_changed > 0


def test_an_already_lossy_study_says_so_and_looks_so(tmp_path: Path) -> None:
    truth = already_lossy(tmp_path, seed=9, step=40.0)
    assert sorted(tmp_path.iterdir()) == sorted(truth.files)
    header = dcmread(truth.files[0])
    assert header.LossyImageCompression == "01"
    assert header.ImageType[0] == "ORIGINAL"
    assert not header.file_meta.TransferSyntaxUID.is_compressed
    blocks = header.pixel_array[96:160, 96:160].astype(float).reshape(8, 8, 8, 8).swapaxes(1, 2)
    levels = cosine_matrix() @ blocks @ cosine_matrix().T / 40.0
    # Every coefficient lies near a multiple of the step, but for rounding to whole pixels.
    assert np.mean(np.abs(levels - np.rint(levels)) < 0.05) > 0.98


def test_other_grey_studies_are_delivered_in_their_own_unit(tmp_path: Path) -> None:
    head = mr_head(tmp_path / "mr", seed=3, rows=64, columns=64, slices=1)
    film = radiograph(tmp_path / "cr", seed=3, rows=96, columns=80, photometric="MONOCHROME1")
    for number, original in enumerate((head, film)):
        copies = deliver(original, tmp_path / f"copies_{number}", step=30.0)
        before, after = dcmread(original.files[0]), dcmread(copies.files[0])
        change = after.pixel_array.astype(float) - before.pixel_array.astype(float)
        rmse = np.sqrt(np.mean((change * float(before.RescaleSlope)) ** 2))
        assert copies.pairs[0].rmse == pytest.approx(rmse, rel=1e-12)
        assert 0 <= after.pixel_array.min() <= after.pixel_array.max() <= 4095
