"""Pictures of a study: one part of the frame, before and with each error."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from safecheck.record.transforms import StudyPicture, StudyPictures
from safecheck.study.kept import keep, kept_count
from safecheck.study.subject import Subject
from safecheck.study.tiles import TRANSFORMS, Reals, basis, forward

__all__ = ["PICTURED_PERCENT", "PICTURED_RATIO", "Shown", "choose_part"]

PICTURED_PERCENT, PICTURED_RATIO = 25.0, 10.0
"""At which kept share and ratio errors are shown; tiles of every size keep something at the share."""
SIDE = 128
"""Rows and columns of the part shown, fewer in a smaller frame."""
_APART = 64
"""It begins at a multiple, where tiles of every size begin."""
_ENDS_PERCENT = (1, 99)
"""Percentiles of the part that are shown black and white."""


@dataclass(slots=True)
class Shown:
    """The part of a frame that is shown, and its errors as they are found."""

    subject: Subject
    first_row: int
    first_column: int
    kept: list[StudyPicture] = field(default_factory=list)
    coded: list[StudyPicture] = field(default_factory=list)

    def see_kept(self, errors: Callable[[npt.NDArray[np.intp]], Reals], transform: str, size: int) -> None:
        """Keep the errors of a kept share; `errors` gives those of the pixels of some tiles."""
        rows, columns = self.subject.raster.shape
        across = -(-columns // size)
        down, along = (
            np.arange(first // size, min(-(-length // size), (first + SIDE) // size))
            for first, length in ((self.first_row, rows), (self.first_column, columns))
        )
        found = errors((down[:, None] * across + along).ravel())
        cut = found.reshape(len(down), len(along), size, size).transpose(0, 2, 1, 3)
        plane = cut.reshape(len(down) * size, len(along) * size)
        inside = plane[: rows - self.first_row, : columns - self.first_column]
        self.kept.append(StudyPicture(transform, size, inside * self.subject.scale))

    def see_coded(self, error: Reals, transform: str, size: int) -> None:
        """Keep the error of a code, (rows, columns) in stored values."""
        self.coded.append(StudyPicture(transform, size, self._cut(error) * self.subject.scale))

    def taken(self) -> StudyPictures:
        """All pictures."""
        samples = self._cut(self.subject.raster.samples.astype(np.float64))
        low, high = (float(end) for end in np.percentile(samples, _ENDS_PERCENT))
        return StudyPictures(
            first_row=self.first_row,
            first_column=self.first_column,
            original=samples,
            low=low,
            high=max(high, low + 1.0),
            kept=_sorted(self.kept),
            kept_percent=PICTURED_PERCENT,
            coded=_sorted(self.coded),
            ratio=PICTURED_RATIO,
        )

    def _cut(self, plane: Reals) -> Reals:
        """Return the part of a frame's plane that is shown."""
        return plane[self.first_row : self.first_row + SIDE, self.first_column : self.first_column + SIDE].copy()


def _sorted(pictures: list[StudyPicture]) -> tuple[StudyPicture, ...]:
    """In an order that does not depend on which was found first."""
    return tuple(sorted(pictures, key=lambda item: (TRANSFORMS.index(item.transform), item.tile_size)))


def choose_part(subject: Subject) -> Shown:
    """Choose the part with the largest squared error: cosine transform, 8 by 8, at the kept share shown."""
    size = 8
    table = basis("cosine", size)
    (kept,) = keep(forward(subject.tiles(size), table), table, [kept_count(size, PICTURED_PERCENT)])
    rows, columns = subject.raster.shape
    energies = kept.dropped_energies.reshape(-(-rows // size), -(-columns // size))
    side = SIDE // size
    totals = {
        (row, column): float(energies[row // size :, column // size :][:side, :side].sum())
        for row in _starts(rows)
        for column in _starts(columns)
    }
    row, column = max(totals, key=lambda place: totals[place])
    return Shown(subject, row, column)


def _starts(length: int) -> range:
    """First rows or columns that a part may have."""
    return range(0, max(length - SIDE, 0) + 1, _APART)
