"""Structural similarity (SSIM) on display values, and the share of pixels whose display value moved.

SSIM: Z. Wang, A. C. Bovik, H. R. Sheikh, E. P. Simoncelli, IEEE Transactions on Image Processing 13(4), 2004,
600-612. Settings: Gaussian of 11x11 pixels with standard deviation 1.5 and sum 1, K1 = 0.01, K2 = 0.03, L = 255, only
where that window lies wholly in the frame.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from safecheck.measures.display import TOP_LEVEL, Rendering, find_clipped, render
from safecheck.measures.planes import Mask, Places, Plane, Vector, check_mask, check_plane
from safecheck.measures.selection import percentile

__all__ = ["CHANGED_LEVELS", "SIDE", "WindowBaseline", "WindowFigures", "measure_window", "prepare_window"]

SIDE = 11
"""Rows and columns of the Gaussian window."""
SIGMA = 1.5
K1 = 0.01
K2 = 0.03
CHANGED_LEVELS = 5
"""Display levels from which a pixel counts as changed; 1e-9 less counts too, for rounding."""


@dataclass(frozen=True, slots=True, eq=False)
class WindowBaseline:
    """What one display window makes of the original; used for every candidate."""

    rendering: Rendering
    levels: Plane | None
    """Display values, where they take more than a ramp to compute; else None."""
    values: Plane
    means: Plane
    """Local means of display values, valid part."""
    variances: Plane
    """Local variances, valid part."""
    content: Mask
    scored: Mask
    """Content not clipped in the original, where the 11x11 window lies wholly in the frame."""
    spans: Places
    """(6, rows): see `structural_kernels.compare`."""
    scored_pixels: int
    content_pixels: int
    share_clipped_percent: float | None


@dataclass(frozen=True, slots=True)
class WindowFigures:
    """Figures of one window, as the columns of windows.parquet name them; None where there is no such pixel."""

    share_clipped_percent: float | None
    """Content clipped in the original."""
    pixels: int
    """Pixels over which SSIM stands."""
    ssim: float | None
    ssim_p05: float | None
    ssim_lowest: float | None
    ssim_lowest_row: int | None
    ssim_lowest_column: int | None
    changed_5_levels_percent: float | None
    """Of content, clipped pixels included."""
    max_levels: float | None
    """Largest change of the display value in content."""


def gaussian() -> Vector:
    """The eleven taps, sum 1."""
    offsets = np.arange(SIDE) - SIDE // 2
    taps = np.exp(-0.5 * (offsets / SIGMA) ** 2)
    return np.asarray(taps / taps.sum())


def prepare_window(before: Plane, content: Mask, rendering: Rendering, wanted: Mask | None = None) -> WindowBaseline:
    """Prepare what depends on the original alone.

    Parameters
    ----------
    before
        (rows, columns), in the unit of the window.
    content
        (rows, columns), boolean.
    rendering
        Window or table.
    wanted
        (rows, columns), boolean: further pixels at which the map will be read, such as those of regions.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    before = check_plane(before)
    content = check_mask(content, before.shape)
    clipped = find_clipped(before, rendering)
    scored = content & ~clipped & _valid(before.shape)
    reach = scored if wanted is None else scored | (check_mask(wanted, before.shape) & _valid(before.shape))
    levels = render(before, rendering) if rendering.ramp is None else None
    spans = _spans(reach, content)
    means, variances = _moments(before if levels is None else levels, rendering, spans)
    content_pixels = int(np.count_nonzero(content))
    share = 100 * int(np.count_nonzero(content & clipped)) / content_pixels if content_pixels else None
    return WindowBaseline(
        rendering=rendering,
        levels=levels,
        values=before,
        means=means,
        variances=variances,
        content=content,
        scored=scored,
        spans=spans,
        scored_pixels=int(np.count_nonzero(scored)),
        content_pixels=content_pixels,
        share_clipped_percent=share,
    )


def measure_window(
    baseline: WindowBaseline, after: Plane, *, with_map: bool = False
) -> tuple[WindowFigures, Plane | None]:
    """Measure one candidate at one window.

    Parameters
    ----------
    baseline
        Of the original.
    after
        (rows, columns), in the unit of the window.
    with_map
        Return the SSIM map too.

    Returns
    -------
    tuple
        Figures, and the map: (rows, columns), NaN where it was not computed; or None.

    Raises
    ------
    ValueError
        If the shapes differ.
    """
    from safecheck.measures.structural_kernels import compare

    after = check_plane(after, baseline.values.shape)
    before = baseline.values
    if baseline.levels is not None:
        before, after = baseline.levels, render(after, baseline.rendering)
    picture = np.full(before.shape if with_map else (0, 0), np.nan)
    scores = np.empty(baseline.scored_pixels)
    by_column = np.zeros((2, before.shape[1]))
    ramp, inverted = _ramp_of(baseline.rendering)
    found = compare(
        before,
        after,
        ramp,
        inverted,
        gaussian(),
        np.array([(K1 * TOP_LEVEL) ** 2, (K2 * TOP_LEVEL) ** 2]),
        baseline.means,
        baseline.variances,
        baseline.content,
        baseline.scored,
        baseline.spans,
        scores,
        picture,
        by_column,
    )
    return _figures(baseline, scores[:found], by_column), picture if with_map else None


def _figures(baseline: WindowBaseline, scores: Vector, by_column: Plane) -> WindowFigures:
    """Turn scores and counts into figures."""
    from safecheck.measures.structural_kernels import sum_and_least

    pixels = baseline.content_pixels
    mean = lowest = row = column = None
    if scores.size:
        total, least = sum_and_least(scores)
        mean, lowest = float(total) / scores.size, float(scores[least])
        row, column = _place(baseline.scored, int(least))
    return WindowFigures(
        share_clipped_percent=baseline.share_clipped_percent,
        pixels=scores.size,
        ssim=mean,
        ssim_p05=percentile(scores, 5),
        ssim_lowest=lowest,
        ssim_lowest_row=row,
        ssim_lowest_column=column,
        changed_5_levels_percent=100 * float(by_column[0].sum()) / pixels if pixels else None,
        max_levels=float(by_column[1].max()) if pixels else None,
    )


def _place(mask: Mask, ordinal: int) -> tuple[int, int]:
    """Row and column of the n-th True pixel, counted row by row from 0."""
    upto = np.cumsum(np.count_nonzero(mask, axis=1))
    row = int(np.searchsorted(upto, ordinal, side="right"))
    before = int(upto[row - 1]) if row else 0
    return row, int(np.flatnonzero(mask[row])[ordinal - before])


def _ramp_of(rendering: Rendering) -> tuple[Vector, bool]:
    """The ramp as the kernel takes it; empty where display values are handed over instead."""
    ramp = rendering.ramp
    if ramp is None:
        return np.empty(0), False
    return np.array([ramp.low, ramp.high, ramp.centre, ramp.width]), rendering.inverted


def _moments(before: Plane, rendering: Rendering, spans: Places) -> tuple[Plane, Plane]:
    """Local means and variances of the original's display values, where they are needed."""
    from safecheck.measures.structural_kernels import take_moments

    shape = (max(before.shape[0] - SIDE + 1, 0), max(before.shape[1] - SIDE + 1, 0))
    means, variances = np.empty(shape), np.empty(shape)
    ramp, inverted = _ramp_of(rendering)
    take_moments(before, ramp, inverted, gaussian(), spans, means, variances)
    return means, variances


def _valid(shape: tuple[int, ...]) -> Mask:
    """Pixels around which the 11x11 window lies wholly in the frame."""
    valid = np.zeros(shape, np.bool_)
    half = SIDE // 2
    if min(shape) >= SIDE:
        valid[half : shape[0] - half, half : shape[1] - half] = True
    return valid


def _spans(reach: Mask, content: Mask) -> Places:
    """Columns needed in each row: of the valid part for filtering along and down, and of the frame for showing."""
    columns = reach.shape[1]
    half = SIDE // 2
    firsts, lasts = _ends(reach)
    # A window centred on any of eleven rows reaches this one.
    wide_firsts = sliding_window_view(np.pad(firsts, half, constant_values=columns), SIDE).min(axis=1)
    wide_lasts = sliding_window_view(np.pad(lasts, half), SIDE).max(axis=1)
    shown_firsts, shown_lasts = _ends(content)
    return np.stack(
        [
            wide_firsts - half,
            wide_lasts - half,
            firsts - half,
            lasts - half,
            np.minimum(shown_firsts, np.maximum(wide_firsts - half, 0)),
            np.maximum(shown_lasts, np.where(wide_lasts > 0, wide_lasts + half, 0)),
        ]
    ).astype(np.int64)


def _ends(mask: Mask) -> tuple[Places, Places]:
    """First column and end of the True pixels of each row; where there is none, an end before its beginning."""
    from safecheck.measures.structural_kernels import find_ends

    firsts, lasts = np.empty(mask.shape[0], np.int64), np.empty(mask.shape[0], np.int64)
    find_ends(mask, firsts, lasts)
    return firsts, lasts
