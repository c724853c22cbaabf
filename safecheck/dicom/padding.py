"""Which pixels are padding (PS3.3 C.7.5.1.1.2): stored values, before the modality transform; grey only."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from pydicom.dataset import Dataset

from safecheck.dicom.elements import value_of, whole_number
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.frames import Mask, PixelFormat, Samples

__all__ = ["Padding", "read_padding"]


@dataclass(frozen=True, slots=True)
class Padding:
    """What a header declares as padding."""

    range: tuple[int, int] | None = None
    """Least and largest stored value, both included; None where no pixel can hold padding."""
    notes: tuple[str, ...] = ()
    """What was set right or left aside."""

    def mask(self, samples: Samples) -> Mask | None:
        """(rows, columns) of stored values -> where padding stands; None where none does."""
        if self.range is None:
            return None
        low, high = self.range
        found = (samples >= low) & (samples <= high) if low != high else samples == low
        return found if found.any() else None


def read_padding(dataset: Dataset, header: PixelHeader) -> Padding:
    """Read the padding value and its range limit; colour has none.

    Raises
    ------
    InputRefused
        'header': the value is not one whole number.
    """
    value, limit = _whole(dataset, "PixelPaddingValue"), _whole(dataset, "PixelPaddingRangeLimit")
    if value is None and limit is None:
        return Padding()
    if header.channels == 3:
        return Padding(notes=("a padding value is declared for colour, where it has no meaning; not applied",))
    if value is None:
        return Padding(notes=("a padding range limit is declared without a padding value; not applied",))
    notes: list[str] = []
    first = _in_range(value, header, notes)
    last = first if limit is None else _in_range(limit, header, notes)
    if (last < first) if header.photometric == "MONOCHROME2" else (last > first):
        notes.append("the padding range limit lies on the other side of the padding value than the standard asks")
    low, high = min(first, last), max(first, last)
    if high < header.format.lowest or low > header.format.highest:
        notes.append("the padding value lies outside the stored range; no pixel can hold it")
        return Padding(notes=tuple(notes))
    return Padding((low, high), tuple(notes))


def _whole(dataset: Dataset, keyword: str) -> int | None:
    value = value_of(dataset, keyword)
    if value is None:
        return None
    if isinstance(value, bytes) and len(value) == 2:
        return int.from_bytes(value, "little")
    return whole_number(dataset, keyword)


def _in_range(value: int, header: PixelHeader, notes: list[str]) -> int:
    """Read a value that was written with the other sign as the bits that it stands for."""
    held: PixelFormat = header.format
    if held.lowest <= value <= held.highest:
        return value
    other = value - (1 << 16) if header.signed and value > held.highest else value
    if not header.signed and value < 0:
        other = int(np.int64(value) & ((1 << 16) - 1))
    if other != value and held.lowest <= other <= held.highest:
        notes.append("the padding value was written with the other sign; read by the sign of the samples")
        return other
    return value
