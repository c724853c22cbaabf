"""Random fields with a stated spectrum: reconstruction noise, smooth texture, speckle."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["band_passed", "frequencies", "low_passed", "streaked"]

Image = npt.NDArray[np.float64]


def frequencies(shape: tuple[int, int]) -> tuple[Image, Image]:
    """Vertical and horizontal frequency of each half-spectrum bin, cycles per pixel."""
    vertical: Image = np.fft.fftfreq(shape[0]).astype(np.float64)[:, None]
    horizontal: Image = np.fft.rfftfreq(shape[1]).astype(np.float64)[None, :]
    return vertical, horizontal


def _shaped(rng: np.random.Generator, shape: tuple[int, int], power: Image) -> Image:
    """Gaussian field of zero mean and unit variance with a spectrum proportional to `power`; zero if that is zero."""
    spectrum = np.fft.rfft2(rng.standard_normal(shape)) * np.sqrt(power)
    mirrored = np.full(power.shape[1], 2.0)
    mirrored[0] = 1.0
    if shape[1] % 2 == 0:
        mirrored[-1] = 1.0
    variance = float((power * mirrored).sum()) / (shape[0] * shape[1])
    field: Image = np.fft.irfft2(spectrum, s=shape)
    if variance > 0:
        field /= np.sqrt(variance)
    return field


def band_passed(rng: np.random.Generator, shape: tuple[int, int], cutoff: float) -> Image:
    """Noise of filtered back-projection: power |f| exp(-(f / cutoff)^2), with its peak at cutoff / sqrt 2.

    The ramp is that of Riederer, Pelc and Chesler (Phys Med Biol 1978;23:446, from memory); the roll-off is
    common practice.
    """
    vertical, horizontal = frequencies(shape)
    radial = np.hypot(vertical, horizontal)
    return _shaped(rng, shape, radial * np.exp(-((radial / cutoff) ** 2)))


def streaked(rng: np.random.Generator, shape: tuple[int, int], cutoff: float) -> Image:
    """Noise of starved views: correlated along rows, band-limited across them."""
    vertical, horizontal = frequencies(shape)
    power = np.abs(vertical) * np.exp(-((vertical / cutoff) ** 2) - (horizontal / (0.12 * cutoff)) ** 2)
    return _shaped(rng, shape, power)


def low_passed(rng: np.random.Generator, shape: tuple[int, int], cutoff: float) -> Image:
    """Smooth field: power exp(-(f / cutoff)^2), without its mean."""
    vertical, horizontal = frequencies(shape)
    power = np.exp(-(vertical**2 + horizontal**2) / cutoff**2)
    power[0, 0] = 0.0
    return _shaped(rng, shape, power)
