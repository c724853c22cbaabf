"""The CT series holds what its truth says, measured from the written pixels with NumPy alone."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from pydicom import dcmread

from synthetic_studies import Circle, Disc, Truth, ct_body
from synthetic_studies.ct import CUTOFF
from synthetic_studies.fields import band_passed

Image = npt.NDArray[np.float64]


def _read_hu(truth: Truth) -> Image:
    """(slices, rows, columns) in HU."""
    headers = [dcmread(path) for path in truth.files]
    return np.stack([header.pixel_array.astype(np.float64) - 1024 for header in headers])


def _distance(truth: Truth, circle: Circle) -> Image:
    rows, columns = np.arange(truth.grid.rows)[:, None], np.arange(truth.grid.columns)[None, :]
    distance: Image = np.hypot(rows - circle.row, columns - circle.column)
    return distance


def _inside(truth: Truth, disc: Disc) -> npt.NDArray[np.bool_]:
    return _distance(truth, disc.circle) < disc.circle.radius - 1.5


@pytest.fixture(scope="module")
def series(tmp_path_factory: pytest.TempPathFactory) -> Truth:
    return ct_body(tmp_path_factory.mktemp("ct"), seed=7, slices=8)


@pytest.fixture(scope="module")
def values(series: Truth) -> Image:
    return _read_hu(series)


@pytest.fixture(scope="module")
def quiet(tmp_path_factory: pytest.TempPathFactory) -> tuple[Truth, Image]:
    truth = ct_body(tmp_path_factory.mktemp("quiet"), seed=7, slices=8, noise_sd_hu=0.0)
    return truth, _read_hu(truth)


@pytest.mark.parametrize("index", range(6), ids=lambda index: f"disc {index + 1}")
def test_a_disc_has_its_contrast_when_averaged_over_the_slices(series: Truth, values: Image, index: int) -> None:
    disc = series.targets[index]
    distance = _distance(series, disc.circle)
    around = (distance > disc.circle.radius + 1.5) & (distance < disc.calm_radius - 0.5)
    inside = _inside(series, disc)
    contrast = values[:, inside].mean() - values[:, around].mean()
    # Four standard errors of white noise of the same SD.
    error = disc.noise_sd / np.sqrt(len(values) * np.array([inside.sum(), around.sum()]))
    assert abs(contrast - disc.contrast) < 4 * np.hypot(*error)
    assert abs(values[:, inside].mean() - disc.value) < 4 * error[0]


def test_surroundings_of_every_disc_are_of_one_value_without_noise(quiet: tuple[Truth, Image]) -> None:
    truth, hu = quiet
    assert truth.uniform is not None
    assert truth.background is not None
    for disc in (*truth.targets, truth.uniform):
        distance = _distance(truth, disc.circle)
        around = (distance > disc.circle.radius + 1.0) & (distance < disc.calm_radius)
        assert np.all(hu[:, around] == disc.value - disc.contrast), disc.label
        assert np.all(hu[:, _inside(truth, disc)] == disc.value), disc.label
    assert np.all(hu[:, _distance(truth, truth.background.circle) < truth.background.calm_radius] == 110)


def test_noise_has_the_stated_sd_in_the_uniform_insert(series: Truth, values: Image) -> None:
    disc = series.uniform
    assert disc is not None
    sd = values[:, _inside(series, disc)].std()
    assert abs(sd / disc.noise_sd - 1) < 0.05


def test_noise_depends_on_the_position(series: Truth, values: Image, quiet: tuple[Truth, Image]) -> None:
    noise = values - quiet[1]
    middle = noise[:, 240:272, 240:272].std()
    rim = noise[:, 240:272, 12:44].std()
    assert abs(middle / series.noise_sd - 1) < 0.05
    assert rim < 0.6 * middle


def test_noise_is_band_passed_and_not_white(series: Truth, values: Image, quiet: tuple[Truth, Image]) -> None:
    noise = (values - quiet[1])[:, 100:228, 90:218]
    noise = noise - noise.mean(axis=(1, 2), keepdims=True)
    window = np.hanning(128)[:, None] * np.hanning(128)
    power = (np.abs(np.fft.fft2(noise * window)) ** 2).mean(axis=0)
    radial = np.hypot(np.fft.fftfreq(128)[:, None], np.fft.fftfreq(128)[None, :])

    def band(low: float, high: float) -> float:
        return float(power[(radial >= low) & (radial < high)].mean())

    peak = CUTOFF["STANDARD"] / np.sqrt(2)
    middle = band(peak - 0.03, peak + 0.03)
    assert band(0.0, 0.03) < 0.3 * middle
    assert band(0.45, 0.5) < 0.3 * middle


def test_neighbouring_pixels_of_noise_are_correlated() -> None:
    noise = band_passed(np.random.default_rng(1), (256, 256), CUTOFF["SOFT"])
    assert np.mean(noise[:, 1:] * noise[:, :-1]) > 0.3
    assert abs(noise.var() - 1) < 0.02


@pytest.mark.parametrize("shape", [(64, 64), (65, 97), (40, 128)], ids=str)
def test_band_passed_noise_has_unit_variance_on_any_grid(shape: tuple[int, int]) -> None:
    rng = np.random.default_rng(2)
    variance = np.mean([band_passed(rng, shape, 0.28).var() for _ in range(40)])
    assert abs(variance - 1) < 0.03


@pytest.mark.parametrize(("storage", "padding"), [("signed", -2000), ("unsigned-12", 0)], ids=["signed", "unsigned"])
def test_padding_fills_the_outside_of_the_field_and_nothing_else(tmp_path: Path, storage: str, padding: int) -> None:
    truth = ct_body(tmp_path, seed=3, rows=120, columns=160, slices=1, storage=storage)  # type: ignore[arg-type]
    header = dcmread(truth.files[0])
    assert truth.field_circle is not None
    assert header.PixelPaddingValue == truth.padding_value == padding
    outside = _distance(truth, truth.field_circle) > truth.field_circle.radius
    np.testing.assert_array_equal(header.pixel_array == padding, outside)


@pytest.mark.parametrize(("storage", "low", "high"), [("signed", -8192, 8191), ("unsigned-12", 0, 4095)], ids=str)
def test_stored_values_fit_the_stored_bits(tmp_path: Path, storage: str, low: int, high: int) -> None:
    truth = ct_body(tmp_path, seed=3, slices=1, storage=storage)  # type: ignore[arg-type]
    samples = dcmread(truth.files[0]).pixel_array
    assert low <= samples.min()
    assert samples.max() <= high


def test_the_edge_is_sharp_and_lies_where_the_truth_says(quiet: tuple[Truth, Image]) -> None:
    truth, hu = quiet
    edge = truth.edge
    assert edge is not None
    left, right = int(np.ceil(edge.start[1])), int(edge.end[1])
    level, reach = edge.start[0], int(edge.half_width) - 1
    above = hu[:, int(np.ceil(level)) - reach : int(np.floor(level)), left:right]
    below = hu[:, int(np.ceil(level)) + 1 : int(np.floor(level)) + reach, left:right]
    assert np.all(above == edge.value_above)
    assert np.all(below == edge.value_below)


def test_pixels_and_millimetres_of_the_truth_agree_with_the_header(series: Truth) -> None:
    for path in series.files[:2]:
        header = dcmread(path)
        origin, spacing = np.array(header.ImagePositionPatient[:2], float), float(header.PixelSpacing[0])
        for disc in series.targets:
            place = origin + np.array([disc.circle.column, disc.circle.row]) * spacing
            np.testing.assert_allclose(place, [disc.x_mm, disc.y_mm], atol=1e-3)
            assert disc.circle.radius * spacing == pytest.approx(disc.radius_mm)


def test_regions_name_every_target_and_its_role(series: Truth) -> None:
    regions = series.regions()
    names = [region["name"] for region in regions]
    assert [region["role"] for region in regions] == ["target"] * 6 + ["background", "uniform", "edge"]
    assert len(set(names)) == len(regions)
    assert [region["background"] for region in regions] == ["liver"] * 6 + [""] * 3
    assert "liver" in names


def test_regions_are_the_same_in_pixels_and_in_millimetres(series: Truth) -> None:
    for region in series.regions():
        x_mm, y_mm = region["centre_mm"]
        np.testing.assert_allclose(series.grid.pixel(x_mm, y_mm), region["centre_pixel"])
        for side in ("height", "width"):
            assert region[f"{side}_mm"] == pytest.approx(region[f"{side}_pixel"] * series.grid.spacing_mm)


def test_the_edge_region_is_half_one_value_and_half_the_other(quiet: tuple[Truth, Image]) -> None:
    truth, hu = quiet
    region, edge = truth.regions()[-1], truth.edge
    assert edge is not None
    row, column = region["centre_pixel"]
    half_height, half_width = region["height_pixel"] / 2, region["width_pixel"] / 2
    rows = slice(int(np.ceil(row - half_height)), int(row + half_height) + 1)
    columns = slice(int(np.ceil(column - half_width)), int(column + half_width) + 1)
    middle = (edge.value_above + edge.value_below) / 2
    assert abs(hu[:, rows, columns].mean() - middle) < 25
    # One row at most holds a mixture of both.
    mixed = (hu[:, rows, columns] != edge.value_above) & (hu[:, rows, columns] != edge.value_below)
    assert np.count_nonzero(mixed.any(axis=(0, 2))) <= 1


@pytest.mark.parametrize(("rows", "columns"), [(1, 1), (2, 9), (17, 16), (64, 200)], ids=str)
def test_any_matrix_can_be_asked_for(tmp_path: Path, rows: int, columns: int) -> None:
    truth = ct_body(tmp_path, seed=1, rows=rows, columns=columns, slices=1)
    assert dcmread(truth.files[0]).pixel_array.shape == (rows, columns)


def test_slices_lie_a_thickness_apart(tmp_path: Path) -> None:
    truth = ct_body(tmp_path, seed=1, rows=32, columns=32, slices=3, thickness_mm=2.5)
    places = [float(dcmread(path).ImagePositionPatient[2]) for path in truth.files]
    assert places == [-2.5, 0.0, 2.5] == list(truth.slice_positions_mm)
