from __future__ import annotations

import numpy as np
import pytest
import scipy.fft
import scipy.linalg

from safecheck.study.tiles import SIZES, TRANSFORMS, Reals, as_tiles, basis, forward, in_whole_tiles, inverse


def noise(size: int, tiles: int = 6) -> Reals:
    return np.random.default_rng(size).normal(scale=300, size=(tiles, size * size))


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_a_basis_is_orthonormal_and_begins_with_the_constant(transform: str, size: int) -> None:
    table = basis(transform, size)
    np.testing.assert_allclose(table @ table.T, np.eye(size), atol=1e-14 * size)
    np.testing.assert_allclose(table[0], 1 / np.sqrt(size), rtol=1e-15)


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("transform", TRANSFORMS)
def test_forward_and_inverse_give_the_tiles_back_and_keep_their_energy(transform: str, size: int) -> None:
    tiles, table = noise(size), basis(transform, size)
    found = forward(tiles, table)
    np.testing.assert_allclose(inverse(found, table), tiles, atol=1e-10)
    np.testing.assert_allclose((found**2).sum(axis=1), (tiles**2).sum(axis=1), rtol=1e-12)


@pytest.mark.parametrize("size", SIZES)
def test_the_cosine_transform_is_that_of_scipy(size: int) -> None:
    tiles = noise(size)
    expected = scipy.fft.dctn(tiles.reshape(-1, size, size), axes=(1, 2), norm="ortho")
    np.testing.assert_allclose(forward(tiles, basis("cosine", size)), expected.reshape(tiles.shape), atol=1e-10)


@pytest.mark.parametrize("size", SIZES)
def test_the_walsh_hadamard_transform_is_that_of_scipy_in_order_of_sign_changes(size: int) -> None:
    rows = scipy.linalg.hadamard(size).astype(np.float64)
    rows = rows[np.argsort([np.count_nonzero(np.diff(row)) for row in rows])]
    tiles = noise(size)
    expected = rows @ tiles.reshape(-1, size, size) @ rows.T / size
    np.testing.assert_allclose(forward(tiles, basis("walsh-hadamard", size)), expected.reshape(tiles.shape), atol=1e-10)


@pytest.mark.parametrize("size", SIZES)
def test_the_walsh_hadamard_kernel_holds_plus_and_minus_one_alone_up_to_scale(size: int) -> None:
    # Facts of the trade: common practice, no source.
    table = basis("walsh-hadamard", size) * np.sqrt(size)
    np.testing.assert_allclose(np.abs(table), 1, rtol=1e-14)
    np.testing.assert_allclose(np.abs(np.linalg.inv(table) * size), 1, rtol=1e-12)


@pytest.mark.parametrize("size", SIZES)
def test_real_fourier_coefficients_are_the_parts_of_the_complex_ones_of_scipy(size: int) -> None:
    # Along one direction: sqrt 2 times the real part and minus the imaginary part of the unitary transform.
    values = noise(size)[:, :size]
    found = values @ basis("fourier", size).T
    spectrum = scipy.fft.fft(values, axis=1, norm="ortho")
    np.testing.assert_allclose(found[:, 0], spectrum[:, 0].real, atol=1e-10)
    np.testing.assert_allclose(found[:, -1], spectrum[:, size // 2].real, atol=1e-10)
    for frequency in range(1, size // 2):
        np.testing.assert_allclose(found[:, 2 * frequency - 1], np.sqrt(2) * spectrum[:, frequency].real, atol=1e-10)
        np.testing.assert_allclose(found[:, 2 * frequency], -np.sqrt(2) * spectrum[:, frequency].imag, atol=1e-10)


def test_the_four_products_of_a_frequency_pair_carry_the_energy_of_two_complex_coefficients() -> None:
    # X(u, v) and X(u, -v), each with its conjugate, are four real numbers; so are the products of cosines and sines.
    size = 8
    tile = noise(size, 1)
    found = forward(tile, basis("fourier", size)).reshape(size, size)
    spectrum = np.abs(scipy.fft.fft2(tile.reshape(size, size), norm="ortho")) ** 2
    for u in range(1, size // 2):
        for v in range(1, size // 2):
            four = (found[2 * u - 1 : 2 * u + 1, 2 * v - 1 : 2 * v + 1] ** 2).sum()
            assert four == pytest.approx(2 * spectrum[u, v] + 2 * spectrum[u, -v], rel=1e-10)


def test_tiles_are_cut_in_raster_order() -> None:
    plane = np.arange(24, dtype=np.float64).reshape(4, 6)
    assert as_tiles(plane, 2)[:4].tolist() == [[0, 1, 6, 7], [2, 3, 8, 9], [4, 5, 10, 11], [12, 13, 18, 19]]


def test_what_lies_beyond_the_frame_is_zero() -> None:
    whole = in_whole_tiles(np.ones((3, 5)), 4)
    assert whole.shape == (4, 8)
    assert whole.sum() == 15
    assert whole[:3, :5].all()
