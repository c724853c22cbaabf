"""Where errors are taken: the content and drawn regions, pixel by pixel and tile by tile."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.study.tiles import Reals, as_tiles, in_whole_tiles

__all__ = ["Area", "TiledAreas", "tile_areas"]


@dataclass(frozen=True, slots=True, eq=False)
class Area:
    """Pixels over which an error is taken."""

    name: str
    """``content``, or ``region`` and the region's name."""
    weights: Reals
    """(rows, columns): share of each pixel that counts, 0 to 1, not all 0."""

    def root_mean_square(self, error: Reals) -> float:
        """Root of the weighted mean of squares; `error` is (rows, columns)."""
        return float(np.sqrt((error * error * self.weights).sum() / self.weights.sum()))


@dataclass(frozen=True, slots=True, eq=False)
class TiledAreas:
    """Areas cut into tiles of one size."""

    areas: tuple[Area, ...]
    even: tuple[Reals, ...]
    """Of each area, the weight of each tile in which it does not vary, 0 of the others: (tiles,)."""
    uneven: npt.NDArray[np.intp]
    """Tiles in which the weight of any area varies."""
    weights: tuple[Reals, ...]
    """Of each area, weights of the pixels of those tiles, 0 where `even` holds: (uneven, size * size)."""
    inner: npt.NDArray[np.bool_]
    """Tiles with every pixel in the frame and in the first area: (tiles,)."""

    def root_mean_squares(self, energies: Reals, errors: Callable[[npt.NDArray[np.intp]], Reals]) -> dict[str, float]:
        """Root of the weighted mean of squares over each area.

        An orthonormal transform keeps squared errors, so tiles of one weight need no pixels.

        Parameters
        ----------
        energies
            (tiles,), sum of squared errors of each tile.
        errors
            Gives the errors of the pixels of some tiles.
        """
        squares = errors(self.uneven) ** 2
        return {
            area.name: float(np.sqrt(((even * energies).sum() + (weights * squares).sum()) / area.weights.sum()))
            for area, even, weights in zip(self.areas, self.even, self.weights, strict=True)
        }


def tile_areas(areas: tuple[Area, ...], size: int) -> TiledAreas:
    """Cut areas of one frame into tiles of a size."""
    cut = [as_tiles(in_whole_tiles(area.weights, size), size) for area in areas]
    vary = [tiles.max(axis=1) > tiles.min(axis=1) for tiles in cut]
    uneven = np.flatnonzero(np.logical_or.reduce(vary))
    return TiledAreas(
        areas=areas,
        even=tuple(np.where(varies, 0.0, tiles[:, 0]) for tiles, varies in zip(cut, vary, strict=True)),
        uneven=uneven,
        weights=tuple(
            np.where(varies[uneven, None], tiles[uneven], 0.0) for tiles, varies in zip(cut, vary, strict=True)
        ),
        inner=cut[0].min(axis=1) == 1,
    )
