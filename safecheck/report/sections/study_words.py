"""A studied frame with its figures found by name, and the words that the pages of a study share."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from safecheck.record.transforms import Finding, Fixed, StudiedFrame
from safecheck.report.numbers import aligned

__all__ = [
    "AT_RATIO",
    "RATIO",
    "SHARE_PERCENT",
    "SHORT_NAMES",
    "USUAL_SIZE",
    "FrameFigures",
    "figures_of",
    "fine",
    "frame_name",
    "place_line",
]

USUAL_SIZE = 8
"""Tile size at which transforms are set side by side."""
RATIO, SHARE_PERCENT = 10.0, 10.0
"""The ratio and the kept share of the tables; the others stand on the charts and in the table beside the pages."""
AT_RATIO: tuple[Fixed, float | None] = ("ratio", RATIO)
SHORT_NAMES = {"cosine": "Cosine", "walsh-hadamard": "Walsh-Hadamard", "fourier": "Fourier"}


@dataclass(frozen=True, slots=True)
class FrameFigures:
    """A frame and its figures."""

    number: int
    """Among the frames studied, from 1."""
    frame: StudiedFrame
    figures: dict[tuple[str, str, int | None, Fixed, float | None, str], float]

    def at(
        self,
        measure: str,
        transform: str = "",
        size: int | None = None,
        fixed: tuple[Fixed, float | None] = ("", None),
        area: str = "",
    ) -> float | None:
        """One figure, or None."""
        return self.figures.get((area, transform, size, *fixed, measure))

    @property
    def sizes(self) -> tuple[int, ...]:
        """Tile sizes, in order."""
        return self._sizes(finding.tile_size for finding in self.frame.findings)

    @property
    def coded_sizes(self) -> tuple[int, ...]:
        """Tile sizes of which there are codes, in order."""
        return self._sizes(finding.tile_size for finding in self.frame.findings if finding.fixed == "ratio")

    def fixed_at(self, fixed: Fixed) -> tuple[float, ...]:
        """Kept shares or ratios, in order."""
        found = {item.fixed_at for item in self.frame.findings if item.fixed == fixed and item.fixed_at is not None}
        return tuple(sorted(found))

    @property
    def regions(self) -> tuple[str, ...]:
        """Areas besides the content, in order."""
        areas = dict.fromkeys(item.area for item in self.frame.findings if item.measure == "rmse")
        return tuple(area for area in areas if area != "content")

    @staticmethod
    def _sizes(found: Iterable[int | None]) -> tuple[int, ...]:
        return tuple(sorted({size for size in found if size is not None}))


def figures_of(number: int, frame: StudiedFrame) -> FrameFigures:
    """Index a frame's figures."""
    return FrameFigures(number, frame, {_key(item): item.value for item in frame.findings})


def _key(item: Finding) -> tuple[str, str, int | None, Fixed, float | None, str]:
    return item.area, item.transform, item.tile_size, item.fixed, item.fixed_at, item.measure


def fine(values: Sequence[float | None], most: int = 4) -> tuple[str, ...]:
    """Write figures with equal decimals, so many that the least of them has three significant digits."""
    sizes = [abs(value) for value in values if value]
    return aligned(values, min(max(2 - math.floor(math.log10(min(sizes))), 0), most) if sizes else None)


def frame_name(figures: FrameFigures) -> str:
    """'Frame 1: CT, CHEST, ...'."""
    return f"Frame {figures.number}: {figures.frame.stratum}"


def place_line(frame: StudiedFrame) -> str:
    """Name a frame under pseudonyms."""
    key = frame.key
    parts = [f"patient {key.patient}", f"study {key.study}", f"series {key.series}"]
    parts += [f"instance number {key.instance_number}"] if key.instance_number is not None else []
    return ", ".join([*parts, f"frame {key.frame}"])
