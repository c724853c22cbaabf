"""What a carrier gives: its regions, and what of it was refused."""

from __future__ import annotations

from dataclasses import dataclass

from safecheck.regions.region import Region

__all__ = ["Carried"]


@dataclass(frozen=True, slots=True)
class Carried:
    """Regions of one object, named 'region 1', 'region 2', ... in its order; a refused one keeps its number."""

    regions: tuple[Region, ...]
    refused: tuple[str, ...] = ()
    """One sentence for each region, or part of one, that was left out."""
