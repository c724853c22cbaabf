"""Luma and colour difference to RGB (PS3.3 C.7.6.3.1.2, ITU-R BT.601 full range)."""

from __future__ import annotations

import numpy as np

from safecheck.frames import Samples

__all__ = ["rgb_from_ybr", "spread_422"]


def rgb_from_ybr(samples: Samples, bits_stored: int) -> Samples:
    """RGB of YBR_FULL samples, rounded half up to whole levels and held within the stored bits.

    Parameters
    ----------
    samples
        (rows, columns, 3) unsigned: luma, blue difference, red difference, the latter two about 2**(bits - 1).
    bits_stored
        1 to 16.

    Returns
    -------
    numpy.ndarray
        (rows, columns, 3) of the same type.

    Notes
    -----
    R = Y + 1.402 Cr, G = Y - 0.344136 Cb - 0.714136 Cr, B = Y + 1.772 Cb, the inverse of the equations of
    PS3.3 C.7.6.3.1.2.
    """
    half = 1 << (bits_stored - 1)
    y = samples[..., 0].astype(np.float64)
    cb = samples[..., 1].astype(np.float64) - half
    cr = samples[..., 2].astype(np.float64) - half
    rgb = np.stack((y + 1.402 * cr, y - 0.344136 * cb - 0.714136 * cr, y + 1.772 * cb), axis=-1)
    return np.clip(np.floor(rgb + 0.5), 0, (1 << bits_stored) - 1).astype(samples.dtype)


def spread_422(flat: Samples, rows: int, columns: int) -> Samples:
    """Full YBR triples out of uncompressed YBR_FULL_422, where two pixels share their colour differences.

    Parameters
    ----------
    flat
        (rows * columns * 2,): Y1 Y2 Cb Cr for each pair of pixels along a row.
    rows, columns
        Of the frame; an even number of columns.

    Returns
    -------
    numpy.ndarray
        (rows, columns, 3); the colour differences are repeated, not interpolated.
    """
    quads = flat.reshape(rows, columns // 2, 4)
    out = np.empty((rows, columns, 3), dtype=flat.dtype)
    out[:, 0::2, 0] = quads[..., 0]
    out[:, 1::2, 0] = quads[..., 1]
    out[:, :, 1] = np.repeat(quads[..., 2], 2, axis=1)
    out[:, :, 2] = np.repeat(quads[..., 3], 2, axis=1)
    return out
