from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
import pytest
import scipy.fft
import scipy.linalg

from safecheck.codecs.tile import transform
from safecheck.codecs.tile.settings import SIZES, TRANSFORMS
from tests.codecs.tile import real_frames

Array = npt.NDArray[np.float64]


def in_order(tile: Array) -> Array:
    return tile.ravel()[transform.scan_order(len(tile))]


def noise(size: int, seed: int = 5) -> Array:
    return np.random.default_rng(seed).integers(-2048, 2048, (2 * size, 3 * size)).astype(np.float64)


def coefficients(plane: Array, name: str, size: int) -> Array:
    return transform.forward(plane, transform.basis(name, size)) / transform.GRID


@pytest.mark.parametrize("size", SIZES)
def test_the_cosine_transform_is_that_of_scipy(size: int) -> None:
    plane = noise(size)
    found = coefficients(plane, "cosine", size)
    for tile in range(6):
        row, column = divmod(tile, 3)
        part = plane[row * size : (row + 1) * size, column * size : (column + 1) * size]
        expected = in_order(scipy.fft.dctn(part, norm="ortho"))
        np.testing.assert_allclose(found[tile], expected, atol=0.05, rtol=1e-6)


@pytest.mark.parametrize("size", SIZES)
def test_the_walsh_hadamard_transform_is_that_of_scipy_in_order_of_sign_changes(size: int) -> None:
    rows = scipy.linalg.hadamard(size).astype(np.float64)
    rows = rows[np.argsort([np.count_nonzero(np.diff(row)) for row in rows])]
    assert [np.count_nonzero(np.diff(row)) for row in rows] == list(range(size))
    plane = noise(size)
    expected = in_order(rows @ plane[:size, :size] @ rows.T / size)
    np.testing.assert_allclose(coefficients(plane, "walsh-hadamard", size)[0], expected, atol=0.05, rtol=1e-6)


@pytest.mark.parametrize("size", SIZES)
def test_the_walsh_hadamard_kernel_holds_one_magnitude_only(size: int) -> None:
    # Common practice, no source: the kernel is +1 and -1 up to scale, forward and inverse alike.
    table = transform.basis("walsh-hadamard", size)
    assert len(np.unique(np.abs(table))) == 1
    np.testing.assert_allclose(table @ table.T, np.eye(size), atol=1e-6)


@pytest.mark.parametrize("size", SIZES)
def test_the_fourier_transform_is_that_of_numpy_as_real_pairs(size: int) -> None:
    column = noise(size)[:size, 0]
    spectrum = np.fft.fft(column, norm="ortho")
    expected = [spectrum[0].real]
    for f in range(1, size // 2):
        expected += [math.sqrt(2) * spectrum[f].real, -math.sqrt(2) * spectrum[f].imag]
    expected.append(spectrum[size // 2].real)
    found = transform.basis("fourier", size) @ column
    np.testing.assert_allclose(found, expected, atol=1e-2)
    plane = noise(size)
    both = transform.basis("fourier", size) @ plane[:size, :size] @ transform.basis("fourier", size).T
    np.testing.assert_allclose(coefficients(plane, "fourier", size)[0], in_order(both), atol=0.05)


@pytest.mark.parametrize("name", TRANSFORMS)
@pytest.mark.parametrize("size", SIZES)
def test_no_table_entry_lies_near_a_rounding_tie(name: str, size: int) -> None:
    # So tables are the same whatever mathematical library computed the cosines.
    maker = {
        "cosine": transform.cosine_basis,
        "walsh-hadamard": transform.walsh_hadamard_basis,
        "fourier": transform.fourier_basis,
    }[name]
    scaled = maker(size) * transform.TABLE_GRID
    from_tie = np.abs(scaled - np.floor(scaled) - 0.5)
    assert from_tie.min() > 2.0**-22
    np.testing.assert_array_equal(transform.basis(name, size) * transform.TABLE_GRID, np.rint(scaled))


@pytest.mark.parametrize("name", TRANSFORMS)
@pytest.mark.parametrize("size", SIZES)
def test_all_coefficients_give_the_image_back(name: str, size: int) -> None:
    # Common practice, no source. Full 16-bit range: a whole pixel is never lost.
    plane = np.random.default_rng(1).integers(-(2**15), 2**15, (2 * size, 2 * size)).astype(np.float64)
    plane[:size, :size] = 2.0**15
    table = transform.basis(name, size)
    back = transform.inverse(transform.forward(plane, table), table, (2 * size, 2 * size))
    assert np.abs(back - plane).max() < 0.25


@pytest.mark.parametrize("name", TRANSFORMS)
def test_no_sum_of_products_is_rounded(name: str) -> None:
    # Bound on which equality across processors rests: every partial sum is a multiple of 2**-30 below 2**23.
    for size in SIZES:
        table = transform.basis(name, size)
        assert np.array_equal(table * transform.TABLE_GRID, np.rint(table * transform.TABLE_GRID))
        largest_sum = np.abs(table).sum(axis=1).max()
        largest = 2.0**16
        first = largest * largest_sum
        second = np.floor(first * transform.GRID + 1) / transform.GRID * largest_sum
        assert second * transform.TABLE_GRID * transform.GRID <= 2.0**53


GAINS_DB = {
    # Check values: gains at rho = 0.95 from the closed form of the AR(1) covariance; the two-decimal figures of the
    # cosine transform are those of Jayant & Noll 1984 and Malvar 1992.
    "cosine": {4: 7.5701, 8: 8.8259, 16: 9.4555, 32: 9.7736, 64: 9.9366},
    "walsh-hadamard": {4: 7.1744, 8: 7.9461, 16: 8.1941, 32: 8.2693, 64: 8.2959},
    "fourier": {4: 6.8968, 8: 7.7040, 16: 8.1424, 32: 8.5894, 64: 9.1072},
}


@pytest.mark.parametrize("name", TRANSFORMS)
@pytest.mark.parametrize("size", SIZES)
def test_coding_gains_of_a_first_order_process_are_the_published_ones(name: str, size: int) -> None:
    covariance = 0.95 ** np.abs(np.subtract.outer(np.arange(size), np.arange(size)))
    table = transform.basis(name, size)
    variances = np.diag(table @ covariance @ table.T)
    gain = 10 * np.log10(variances.mean() / np.exp(np.log(variances).mean()))
    assert gain == pytest.approx(GAINS_DB[name][size], abs=6e-5)


def ieee_1180_block_values(low: int, high: int, count: int) -> Array:
    """Generator of IEEE 1180-1990 with seed 1."""
    state, span = 1, low + high + 1
    values = []
    for _ in range(count):
        state = (state * 1103515245 + 12345) & 0xFFFFFFFF
        values.append(int((state & 0x7FFFFFFE) / 0x7FFFFFFF * span) - low)
    return np.array(values, dtype=np.float64)


def test_the_ieee_1180_generator_gives_the_published_values() -> None:
    assert ieee_1180_block_values(256, 255, 8).tolist() == [7, -167, -98, 17, 229, -169, 103, -141]
    assert ieee_1180_block_values(5, 5, 8).tolist() == [0, -4, -2, 0, 5, -4, 2, -3]
    assert ieee_1180_block_values(300, 300, 8).tolist() == [8, -195, -115, 21, 269, -197, 122, -164]


@pytest.mark.parametrize("sign", [1, -1], ids=["as-made", "reversed"])
@pytest.mark.parametrize(("low", "high"), [(256, 255), (5, 5), (300, 300)], ids=["256", "5", "300"])
def test_the_inverse_cosine_transform_keeps_the_limits_of_ieee_1180(low: int, high: int, sign: int) -> None:
    blocks = sign * ieee_1180_block_values(low, high, 640_000).reshape(10_000, 8, 8)
    spectra = np.clip(np.rint(scipy.fft.dctn(blocks, axes=(1, 2), norm="ortho")), -2048, 2047)
    reference = np.clip(np.rint(scipy.fft.idctn(spectra, axes=(1, 2), norm="ortho")), -256, 255)
    ordered = spectra.reshape(10_000, 64)[:, transform.scan_order(8)] * transform.GRID
    plane = transform.inverse(ordered.astype(np.int32), transform.basis("cosine", 8), (800, 800))
    found = plane.reshape(100, 8, 100, 8).transpose(0, 2, 1, 3).reshape(10_000, 8, 8)
    error = np.clip(np.floor(found + 0.5), -256, 255) - reference
    assert np.abs(error).max() <= 1
    assert (error**2).mean(axis=0).max() <= 0.06
    assert (error**2).mean() <= 0.02
    assert np.abs(error.mean(axis=0)).max() <= 0.015
    assert abs(error.mean()) <= 0.0015


def test_zero_coefficients_give_a_zero_tile() -> None:
    plane = transform.inverse(np.zeros((4, 64), np.int32), transform.basis("cosine", 8), (16, 16))
    assert not plane.any()


def rms_keeping(plane: Array, name: str, size: int, fraction: float) -> float:
    """RMS error with the largest magnitudes of each tile kept."""
    table = transform.basis(name, size)
    values = transform.forward(plane, table)
    keep = round(fraction * size * size)
    order = np.argsort(-np.abs(values), axis=1, kind="stable")
    for tile, drop in zip(values, order[:, keep:], strict=True):
        tile[drop] = 0
    return float(np.sqrt(np.mean((transform.inverse(values, table, (plane.shape[0], plane.shape[1])) - plane) ** 2)))


def real_plane(name: str) -> Array:
    samples = real_frames.grey(name).samples.astype(np.float64)
    return np.ascontiguousarray(samples[64:448, 64:448] - 1024.0)


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "mr-shoulder", "cr-leg"])
def test_of_three_transforms_the_cosine_loses_least_at_half_kept(name: str) -> None:
    # Common practice, no source.
    plane = real_plane(name)
    cosine, walsh, fourier = (rms_keeping(plane, kind, 8, 0.5) for kind in TRANSFORMS)
    assert cosine < walsh
    assert cosine < fourier


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "mr-shoulder", "cr-leg"])
def test_the_loss_at_half_kept_falls_as_tiles_grow_to_sixteen(name: str) -> None:
    # Common practice, no source.
    plane = real_plane(name)
    losses = [rms_keeping(plane, "cosine", size, 0.5) for size in (4, 8, 16)]
    assert losses == sorted(losses, reverse=True)


def test_with_tiles_of_two_and_a_quarter_kept_a_tile_is_its_mean() -> None:
    # Common practice, no source; by matrices, as the codec's tiles begin at four.
    table = transform.cosine_basis(2)
    tile = real_frames.grey("cr-leg").samples[100:102, 200:202].astype(np.float64)
    spectrum = table @ tile @ table.T
    assert np.abs(spectrum).argmax() == 0
    spectrum.ravel()[1:] = 0
    np.testing.assert_allclose(table.T @ spectrum @ table, tile.mean(), rtol=1e-12)
