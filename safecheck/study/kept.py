"""Keep the largest coefficients of each tile, drop the rest, no quantiser: what a basis costs by itself.

The constant of a tile is always kept and counts as one: so the zero of the unit, which is a convention, plays no part.
Of the others the largest magnitudes are kept; of equal ones those of lower frequency. Every coefficient is one real
number, for Fourier too, so equal counts are equal numbers of real degrees of freedom in every transform.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.codecs.tile.transform import scan_order
from safecheck.study.tiles import Reals, inverse

__all__ = ["SHARES_PERCENT", "Kept", "keep", "kept_count"]

SHARES_PERCENT = (50.0, 25.0, 10.0, 5.0)
"""Kept shares studied."""
_GRID = 65536.0
"""Magnitudes are ranked in steps of one over this, so that rounding of equal ones does not decide."""


def kept_count(size: int, share_percent: float) -> int:
    """Coefficients that a tile keeps: the share, rounded down; 0 where the share is less than one coefficient."""
    return int(size * size * share_percent / 100 + 1e-9)


@dataclass(frozen=True, slots=True, eq=False)
class Kept:
    """Tiles of which some coefficients are kept."""

    tiles: Reals
    """(tiles, size * size), all coefficients."""
    table: Reals
    """(size, size), the basis that they belong to."""
    keys: npt.NDArray[np.int64]
    """(tiles, size * size), their order."""
    least: npt.NDArray[np.int64]
    """(tiles,), the least key that is kept."""

    @property
    def dropped_energies(self) -> Reals:
        """Sum of squares of what each tile drops, which is the squared error of its pixels: (tiles,)."""
        from safecheck.study.kernels import energies_below

        energies = np.empty(len(self.tiles))
        energies_below(self.tiles, self.keys, self.least, energies)
        return energies

    def errors(self, chosen: npt.NDArray[np.intp]) -> Reals:
        """Error of the pixels of some tiles, after less before: (chosen, size * size)."""
        tiles = self.tiles[chosen]
        return inverse(np.where(self.keys[chosen] < self.least[chosen, None], -tiles, 0.0), self.table)


def keep(tiles: Reals, table: Reals, counts: Sequence[int]) -> list[Kept]:
    """Choose what each tile keeps, for several counts.

    Parameters
    ----------
    tiles
        (tiles, size * size) coefficients of a basis; below 2**34 in magnitude.
    table
        (size, size), that basis; size is at most 64.
    counts
        Numbers kept, each 1 to size * size.
    """
    from safecheck.study.kernels import rank

    size = len(table)
    total = size * size
    lowness = np.empty(total, np.int64)
    lowness[scan_order(size)] = np.arange(total - 1, -1, -1)
    keys = np.empty(tiles.shape, np.int64)
    rank(tiles, lowness, _GRID, keys)
    places = [total - count for count in counts]
    in_part = np.partition(keys, sorted(set(places)), axis=1) if places else keys
    return [Kept(tiles, table, keys, in_part[:, place].copy()) for place in places]
