from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pytest
import scipy.stats

from safecheck.codecs.tile import quantise, steps, transform

# ITU-T T.81 tables K.1 and K.2, copied from the standard's Annex K; checksums computed from them.
K1 = """16 11 10 16 24 40 51 61  12 12 14 19 26 58 60 55  14 13 16 24 40 57 69 56  14 17 22 29 51 87 80 62
18 22 37 56 68 109 103 77  24 35 55 64 81 104 113 92  49 64 78 87 103 121 120 101  72 92 95 98 112 100 103 99"""
# Wallace 1991, after the T.81 rounding; and the encyclopedia example.
BLOCK_W = """139 144 149 153 155 155 155 155 144 151 153 156 159 156 156 156 150 155 160 163 158 156 156 156
159 161 162 160 160 159 159 159 159 160 161 162 162 155 155 155 161 161 161 161 160 157 157 157
162 162 161 163 162 157 157 157 162 162 161 161 163 158 158 158"""
BLOCK_P = """52 55 61 66 70 61 64 73 63 59 55 90 109 85 69 72 62 59 68 113 144 104 66 73 63 58 71 122 154 106 70 69
67 61 68 104 126 88 68 70 79 65 60 70 77 68 58 75 85 71 64 59 55 61 65 83 87 79 69 68 65 76 78 94"""

Array = npt.NDArray[np.float64]


def numbers(text: str) -> Array:
    return np.array(text.split(), dtype=np.float64).reshape(8, 8)


def spectrum(block: Array) -> Array:
    flat = np.empty(64)
    flat[transform.scan_order(8)] = transform.forward(block - 128, transform.basis("cosine", 8))[0] / transform.GRID
    return flat.reshape(8, 8)


def decoded(levels: Array) -> Array:
    ordered = (levels * numbers(K1)).ravel()[transform.scan_order(8)] * transform.GRID
    plane = transform.inverse(ordered.astype(np.int32)[None], transform.basis("cosine", 8), (8, 8))
    return np.floor(plane + 0.5) + 128


def test_annex_k_stands_as_printed() -> None:
    assert np.array_equal(np.array(steps.ANNEX_K_LUMINANCE), numbers(K1))
    assert np.sum(steps.ANNEX_K_LUMINANCE) == 3688
    chroma = np.array(steps.ANNEX_K_CHROMINANCE)
    assert chroma[:4, :4].tolist() == [[17, 18, 24, 47], [18, 21, 26, 66], [24, 26, 56, 99], [47, 66, 99, 99]]
    assert (chroma[4:] == 99).all()
    assert (chroma[:, 4:] == 99).all()


def test_perceptual_weights_of_tiles_of_eight_are_annex_k() -> None:
    np.testing.assert_allclose(steps.weights("perceptual", 8, False) * 16, numbers(K1), rtol=1e-15)
    coarse = steps.weights("perceptual", 4, False) * 16
    np.testing.assert_allclose(coarse, numbers(K1)[::2, ::2], rtol=1e-15)
    fine = steps.weights("perceptual", 16, True) * 17
    np.testing.assert_allclose(fine[::2, ::2], steps.ANNEX_K_CHROMINANCE, rtol=1e-15)
    assert fine[1, 0] == pytest.approx((17 + 18) / 2)


def test_block_w_of_wallace_has_its_published_spectrum_and_levels() -> None:
    found = spectrum(numbers(BLOCK_W))
    expected = [235.6250, -1.0333, -12.0809, -5.2029, 2.1250, -1.6724, -2.7080, 1.3238]
    np.testing.assert_allclose(found[0], expected, atol=0.006)
    np.testing.assert_allclose(found[1, :4], [-22.5904, -17.4842, -6.2405, -3.1574], atol=0.006)
    levels = np.rint(found / numbers(K1))
    expected_levels = np.zeros((8, 8))
    expected_levels[0, [0, 2]] = 15, -1
    expected_levels[1, :2] = -2, -1
    expected_levels[2, :2] = -1, -1
    expected_levels[3, 0] = -1  # the paper prints 0: a known misprint
    assert np.array_equal(levels, expected_levels)
    error = decoded(levels) - numbers(BLOCK_W)
    assert [np.mean(error**2), np.abs(error).max(), np.abs(error).mean()] == [4.984375, 7, 1.734375]


def test_block_p_of_the_encyclopedia_has_its_published_levels_and_error() -> None:
    found = spectrum(numbers(BLOCK_P))
    np.testing.assert_allclose(found[0], [-415.38, -30.19, -61.20, 27.24, 56.12, -20.10, -2.39, 0.46], atol=0.01)
    levels = np.rint(found / numbers(K1))
    assert levels[0].tolist() == [-26, -3, -6, 2, 2, -1, 0, 0]
    assert levels[3].tolist() == [-3, 1, 2, -1, 0, 0, 0, 0]
    error = decoded(levels) - numbers(BLOCK_P)
    assert [np.mean(error**2), np.abs(error).max(), np.abs(error).mean()] == [35.5625, 15, 4.875]


def gaussian_levels(step: float, place: int) -> tuple[npt.NDArray[np.int32], Array]:
    """Levels of a unit Gaussian at evenly spaced quantiles, coded at one place of tiles of four."""
    count = 200_000
    values = scipy.stats.norm.ppf((np.arange(count) + 0.5) / count)
    unit = 1 << 16
    coefficients = np.zeros((count, 16), np.int32)
    coefficients[:, place] = np.rint(values * unit)
    levels = np.zeros_like(coefficients)
    used = np.ones(count, np.uint8)
    quantise.quantise(coefficients, np.full(16, step * unit), used, levels, np.zeros(count, np.int32))
    return levels[:, place], values


def entropy_bits(levels: npt.NDArray[np.int32]) -> float:
    _, counts = np.unique(levels, return_counts=True)
    share = counts / counts.sum()
    return float(-(share * np.log2(share)).sum())


@pytest.mark.parametrize(
    ("step", "bits", "midpoint", "centroid"),
    [
        (0.25, 4.050843, 0.005208, 0.005181),
        (0.5, 3.061969, 0.020833, 0.020408),
        (1.0, 2.104833, 0.083333, 0.076915),
        (2.0, 1.241196, 0.330419, 0.253507),
        (3.0, 0.700989, 0.648310, 0.497762),
    ],
)
def test_the_uniform_quantiser_has_the_gap_of_the_table(
    step: float, bits: float, midpoint: float, centroid: float
) -> None:
    # Entropy-coded uniform scalar quantiser of a unit Gaussian; high-rate limit of Gish & Pierce 1968. The constant
    # of a tile is quantised so.
    levels, values = gaussian_levels(step, 0)
    assert entropy_bits(levels) == pytest.approx(bits, abs=2e-3)
    assert np.mean((values - levels * step) ** 2) == pytest.approx(midpoint, rel=2e-3)
    within = sum(values[levels == level].var() * np.mean(levels == level) for level in np.unique(levels))
    assert within == pytest.approx(centroid, rel=2e-3)


@pytest.mark.parametrize("step", [0.5, 1.0, 2.0])
def test_the_dead_zone_is_four_thirds_of_a_step(step: float) -> None:
    # Computed from the stated definition: level k for |c| in [(k - 1/3) step, (k + 2/3) step).
    levels, _ = gaussian_levels(step, 5)
    edge = scipy.stats.norm.cdf(2 / 3 * step)
    assert np.mean(levels == 0) == pytest.approx(2 * edge - 1, abs=1e-4)
    ones = scipy.stats.norm.cdf(5 / 3 * step) - edge
    assert np.mean(levels == 1) == pytest.approx(ones, abs=1e-4)
    assert np.mean(levels == -1) == pytest.approx(ones, abs=1e-4)


def test_shifts_are_the_means_of_what_became_a_level() -> None:
    # Uniform coefficients: the mean of [2/3, 5/3) steps is 1 + 1/6, and so for all larger levels.
    coefficients = np.zeros((580, 16), np.int32)
    coefficients[:, 1] = np.arange(580) * 50
    levels = np.zeros_like(coefficients)
    ends = np.zeros(580, np.int32)
    one, more = quantise.quantise(coefficients, np.full(16, 3000.0), np.ones(580, np.uint8), levels, ends)
    assert one == pytest.approx(256 / 6, abs=5)
    assert more == pytest.approx(256 / 6, abs=5)
    before = levels.copy()
    quantise.dequantise(levels, ends, np.full(16, 3000.0), one, more)
    inside = np.abs(before[:, 1]) > 0
    assert np.abs(levels[inside, 1] - coefficients[inside, 1]).max() <= 3000 * 0.52
    assert not levels[~inside].any()


def test_steps_lie_on_a_geometric_grid() -> None:
    grid = np.array([steps.step_at(k) for k in range(steps.STEPS)])
    np.testing.assert_allclose(grid, steps.FINEST_STEP * 2.0 ** (np.arange(steps.STEPS) / 128), rtol=1e-9)
    for k in (0, 1, 127, 128, 1000, steps.STEPS - 1):
        assert steps.nearest_step(steps.step_at(k)) == k
    assert steps.nearest_step(1e-9) == 0
    assert steps.nearest_step(1e30) == steps.STEPS - 1
    assert steps.nearest_step(steps.step_at(77) * 1.002) == 77
