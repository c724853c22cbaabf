"""A frame through all of it: facts of the trade on real frames, figures against plain NumPy and SciPy."""

from __future__ import annotations

import dataclasses
from functools import lru_cache

import numpy as np
import pytest
import scipy.fft

from safecheck.frames import Frame, ModalityTable, PixelFormat, Raster, Rescale, luma
from safecheck.record.transforms import MEASURES, Fixed, StudiedFrame
from safecheck.regions.region import OnFrames, Part, Region, RegionSet
from safecheck.regions.shapes import Rectangle
from safecheck.study import study_frame
from safecheck.study.subject import subject_of
from safecheck.study.tiles import SIZES, TRANSFORMS
from tests.codecs.tile import real_frames
from tests.evaluation.frames import body, frame, origin
from tests.study.frames import REAL, markov_frame, real_frame
from tests.study.test_gains import TABLE

SMALL = ("ct-small", "mr-small", "mr-abdomen", "mr-shoulder", "ct")


@lru_cache(maxsize=8)
def studied(name: str) -> StudiedFrame:
    found = study_frame(real_frame(name), None, with_images=False)
    assert found is not None
    return found


def value(
    found: StudiedFrame,
    measure: str,
    transform: str = "",
    size: int | None = None,
    fixed: tuple[Fixed, float | None] = ("", None),
    area: str = "content",
) -> float:
    (only,) = [
        item.value
        for item in found.findings
        if (item.measure, item.transform, item.tile_size, item.fixed, item.fixed_at, item.area)
        == (measure, transform, size, *fixed, area)
    ]
    return only


def error_at(found: StudiedFrame, transform: str, size: int, share: float) -> float:
    return value(found, "rmse", transform, size, ("kept share", share))


# Facts of the trade: common practice, no source.


@pytest.mark.parametrize("name", SMALL)
def test_with_half_of_each_tile_of_8_kept_the_cosine_transform_loses_least(name: str) -> None:
    errors = {transform: error_at(studied(name), transform, 8, 50) for transform in TRANSFORMS}
    assert min(errors, key=lambda transform: errors[transform]) == "cosine"


@pytest.mark.parametrize("name", SMALL)
def test_the_error_at_a_kept_share_falls_clearly_from_tiles_of_2_to_16_and_then_levels_off(name: str) -> None:
    errors = [error_at(studied(name), "cosine", size, 50) for size in SIZES]
    assert errors[0] > 1.2 * errors[1] > 1.2 * errors[2]
    assert errors[2] > errors[3]
    assert errors[5] == pytest.approx(errors[4], rel=0.15)


@pytest.mark.parametrize("name", SMALL)
def test_shares_below_one_coefficient_a_tile_do_not_exist(name: str) -> None:
    found = {(item.tile_size, item.fixed_at) for item in studied(name).findings if item.fixed == "kept share"}
    missing = {(size, share) for size in SIZES for share in (50.0, 25.0, 10.0, 5.0)} - found
    assert missing == {(2, 10.0), (2, 5.0), (4, 5.0)}


@pytest.mark.parametrize("name", SMALL)
def test_tiles_of_2_with_a_quarter_kept_lose_the_same_in_all_transforms(name: str) -> None:
    errors = [error_at(studied(name), transform, 2, 25) for transform in TRANSFORMS]
    assert errors == pytest.approx([errors[0]] * 3, rel=1e-12)


# Figures


@pytest.mark.parametrize("size", [4, 8, 32])
def test_kept_shares_of_the_cosine_transform_are_those_of_scipy(size: int) -> None:
    # The mean of a tile and the largest of its other coefficients, by scipy.fft and numpy.argsort, over whole frames.
    original = real_frame("mr-small")
    samples = original.raster.samples.astype(np.float64)
    for share in (50, 25, 10):
        error = np.empty_like(samples)
        for row in range(0, samples.shape[0], size):
            for column in range(0, samples.shape[1], size):
                tile = samples[row : row + size, column : column + size]
                flat = scipy.fft.dctn(tile, norm="ortho").ravel()
                order = np.argsort(-np.abs(flat[1:])) + 1
                flat[order[size * size * share // 100 - 1 :]] = 0
                error[row : row + size, column : column + size] = (
                    scipy.fft.idctn(flat.reshape(size, size), norm="ortho") - tile
                )
        expected = np.sqrt(np.mean(error**2))
        assert error_at(studied("mr-small"), "cosine", size, share) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("transform", TRANSFORMS)
def test_the_gain_of_a_markov_frame_is_the_published_one_within_sampling_error(transform: str) -> None:
    # The constants of tiles correlate over some 40 pixels, so 512 x 512 of them hold about 164 independent ones: a
    # standard deviation of 4.34 sqrt(2 / 164) = 0.48 dB, of which two are allowed.
    found = markov_study()
    expected = 2 * TABLE[transform][SIZES.index(8)]
    assert value(found, "gain", transform, 8, area="inner tiles") == pytest.approx(expected, abs=0.96)
    assert value(found, "gain_model_0.95", transform, 8, area="") == pytest.approx(expected, abs=2e-4)
    assert value(found, "gain_model_own", transform, 8, area="") == pytest.approx(expected, abs=0.96)


def test_the_correlation_of_a_markov_frame_is_found_again() -> None:
    for way in ("down", "across"):
        assert value(markov_study(), f"correlation_{way}") == pytest.approx(0.95, abs=0.01)


@lru_cache(maxsize=1)
def markov_study() -> StudiedFrame:
    found = study_frame(markov_frame(512, 0.95), None, with_images=False)
    assert found is not None
    return found


def test_errors_are_in_the_unit_of_the_image() -> None:
    one = study_frame(frame(), None, with_images=False)
    steep = frame(modality_transform=Rescale(-0.5, 300.0), unit="US", origin=origin(modality="OT"))
    flat = frame(modality_transform=Rescale(1.0, 0.0), unit="US", origin=origin(modality="OT"))
    found = [study_frame(each, None, with_images=False) for each in (steep, flat)]
    assert one is not None
    assert one.unit == "HU"
    assert found[0] is not None
    assert found[1] is not None
    for transform in TRANSFORMS:
        for fixed in (("kept share", 10.0), ("ratio", 10.0)):
            half, whole = (value(each, "rmse", transform, 8, fixed) for each in found if each)
            assert half == pytest.approx(whole / 2, rel=1e-12)


def test_values_by_a_table_are_studied_in_stored_values() -> None:
    table = ModalityTable(0, np.arange(4096.0) ** 2)
    found = study_frame(frame(modality_transform=table, unit="OD"), None, with_images=False)
    assert found is not None
    assert found.unit == "stored value"
    assert any("by a table" in note for note in found.notes)


def test_colour_is_studied_as_its_luma() -> None:
    rgb = real_frames.ultrasound().samples[:128, :128]
    form = PixelFormat(8, 8, False, "RGB")
    found = study_frame(
        frame(rgb, form, unit="luma level", modality_transform=Rescale(), origin=origin(modality="US")),
        None,
        with_images=False,
    )
    grey = PixelFormat(8, 8, False, "MONOCHROME2")
    expected = study_frame(
        frame(
            np.rint(luma(rgb)).astype(np.uint8),
            grey,
            unit="luma level",
            modality_transform=Rescale(),
            origin=origin(modality="US"),
        ),
        None,
        with_images=False,
    )
    assert found is not None
    assert expected is not None
    assert found.findings == expected.findings
    assert any("luma" in note for note in found.notes)


def test_what_padding_holds_changes_nothing() -> None:
    padding = np.zeros((128, 160), np.bool_)
    padding[:, 100:] = True
    found = []
    for fill in (0, 4095):
        samples = np.where(padding, fill, body()).astype(np.uint16)
        original = frame(samples, raster=Raster(samples, frame().raster.format, padding), origin=origin(modality="OT"))
        found.append(study_frame(original, None, with_images=False))
    assert found[0] is not None
    assert found[1] is not None
    kept = [[item for item in each.findings if item.fixed != "ratio"] for each in found if each]
    for one, other in zip(*kept, strict=True):
        assert dataclasses.replace(one, value=0.0) == dataclasses.replace(other, value=0.0)
        assert one.value == pytest.approx(other.value, rel=1e-9)


def test_a_frame_of_nothing_but_padding_is_not_studied() -> None:
    samples = np.zeros((64, 64), np.uint16)
    raster = Raster(samples, frame().raster.format, np.ones((64, 64), np.bool_))
    assert study_frame(frame(samples, raster=raster), None, with_images=True) is None


def test_a_constant_frame_has_no_error_no_gain_and_no_correlation() -> None:
    found = study_frame(frame(np.full((64, 64), 100, np.uint16), origin=origin(modality="OT")), None, with_images=True)
    assert found is not None
    assert {item.value for item in found.findings if item.measure == "rmse"} == {0.0}
    measures = {item.measure for item in found.findings}
    assert not measures & {"gain", "gain_complex", "gain_model_own", "correlation_down", "rmse_over_cosine"}


@pytest.mark.parametrize("shape", [(1, 1), (1, 7), (3, 200), (65, 63)], ids=str)
def test_frames_smaller_than_a_tile_are_studied(shape: tuple[int, int]) -> None:
    samples = np.random.default_rng(1).integers(0, 4096, shape).astype(np.uint16)
    found = study_frame(frame(samples, origin=origin(modality="OT")), None, with_images=True)
    assert found is not None
    assert all(np.isfinite(item.value) for item in found.findings)
    assert found.pictures is not None
    for picture in (*found.pictures.kept, *found.pictures.coded):
        assert picture.error.shape == found.pictures.original.shape


def region(height: float) -> RegionSet:
    shape = Rectangle(centre=(40.0, 60.0), height=height, width=20.0)
    part = Part(placement=OnFrames(rows=128, columns=160), shape=shape)
    return RegionSet((Region("box", "box", "target", (part,)), Region("elsewhere", "x", "other", ())), "0" * 64)


def test_regions_are_measured_with_the_share_of_each_pixel_that_they_cover() -> None:
    found = study_frame(frame(), region(20.0), with_images=False)
    assert found is not None
    assert {item.area for item in found.findings if item.measure == "rmse"} == {"content", "region box"}
    subject = subject_of(frame(), region(20.0))
    assert subject is not None
    (_, area) = subject.areas
    assert area.weights.sum() == pytest.approx(400.0)
    within = value(found, "rmse", "cosine", 8, ("ratio", 10.0), "region box")
    assert 0 < within != value(found, "rmse", "cosine", 8, ("ratio", 10.0))


@pytest.mark.parametrize(
    ("labels", "areas"),
    [
        (("liver", "spleen"), {"region liver", "region spleen"}),
        (("liver", "liver"), {"region liver (a)", "region liver (b)"}),
    ],
    ids=["labels of their own", "a label shared"],
)
def test_regions_go_by_their_label(labels: tuple[str, str], areas: set[str]) -> None:
    (made, _) = region(20.0).regions
    both = tuple(dataclasses.replace(made, name=name, label=label) for name, label in zip("ab", labels, strict=True))
    subject = subject_of(frame(), RegionSet(both, "0" * 64))
    assert subject is not None
    assert {area.name for area in subject.areas} == {"content", *areas}


def test_comparisons_are_against_cosine_and_the_best_size() -> None:
    found = studied("mr-small")
    for fixed in (("kept share", 50.0), ("ratio", 10.0)):
        errors = {
            (transform, size): value(found, "rmse", transform, size, fixed)
            for transform in TRANSFORMS
            for size in SIZES
            if fixed[0] == "kept share" or size > 2
        }
        for (transform, size), error in errors.items():
            best = min(other for (name, _), other in errors.items() if name == transform)
            over_cosine = value(found, "rmse_over_cosine", transform, size, fixed)
            assert over_cosine == pytest.approx(error / errors["cosine", size])
            assert value(found, "rmse_over_best_size", transform, size, fixed) == pytest.approx(error / best)


def test_parts_of_the_quantiser_sum_to_all() -> None:
    found = studied("ct-small")
    for size in (4, 8, 16):
        dropped, rounding = (
            value(found, f"{part}_part", "cosine", size, ("ratio", 10.0), "inner tiles")
            for part in ("dropped", "rounding")
        )
        assert dropped + rounding == pytest.approx(100)
        assert 0 < rounding < 100


def test_pictures_are_of_one_part_and_in_the_unit_of_the_image() -> None:
    original = real_frame("mr-shoulder")
    found = study_frame(original, None, with_images=True)
    assert found is not None
    shown = found.pictures
    assert shown is not None
    assert shown.first_row % 64 == shown.first_column % 64 == 0
    assert shown.original.shape == (128, 128)
    assert len(shown.kept) == 18
    assert len(shown.coded) == 15
    samples = original.raster.samples[shown.first_row :, shown.first_column :][:128, :128]
    assert np.array_equal(shown.original, samples)
    eight = next(item for item in shown.kept if (item.transform, item.tile_size) == ("cosine", 8))
    # With every mean kept, each tile's error has no mean.
    means = eight.error.reshape(16, 8, 16, 8).mean(axis=(1, 3))
    np.testing.assert_allclose(means, 0, atol=1e-9)


def test_no_picture_is_taken_of_a_frame_that_may_show_text() -> None:
    shown: Frame = frame(origin=origin(may_show_text=True))
    found = study_frame(shown, None, with_images=True)
    assert found is not None
    assert found.pictures is None


def test_the_same_frame_gives_the_same_figures() -> None:
    one, other = (study_frame(frame(), region(20.0), with_images=False) for _ in range(2))
    assert one is not None
    assert other is not None
    assert one.findings == other.findings


def test_what_is_found_does_not_depend_on_the_number_of_threads() -> None:
    one, other = (study_frame(frame(), None, with_images=True, threads=threads) for threads in (1, 3))
    assert one is not None
    assert other is not None
    assert one.findings == other.findings
    assert one.pictures is not None
    assert other.pictures is not None
    for pictures in ("kept", "coded"):
        first, second = (getattr(each, pictures) for each in (one.pictures, other.pictures))
        assert [(item.transform, item.tile_size) for item in first] == [
            (item.transform, item.tile_size) for item in second
        ]
        assert all(np.array_equal(a.error, b.error) for a, b in zip(first, second, strict=True))


def test_every_figure_is_of_a_known_measure() -> None:
    assert {item.measure for name in SMALL for item in studied(name).findings} == MEASURES.keys()
    assert set(SMALL) <= set(REAL)
