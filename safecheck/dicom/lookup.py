"""Look-up tables of the Modality and VOI LUT modules (PS3.3 C.11.1.1, C.11.2.1.1)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from pydicom.dataset import Dataset
from pydicom.multival import MultiValue

from safecheck.dicom.elements import value_of
from safecheck.errors import InputRefused

__all__ = ["LookupTable", "read_lookup"]


@dataclass(frozen=True, slots=True, eq=False)
class LookupTable:
    """Descriptor and data of a table."""

    first: int
    """Input that the first entry stands for."""
    entries: npt.NDArray[np.float64]
    bits: int
    """8 to 16."""


def read_lookup(item: Dataset, *, signed_input: bool, little_endian: bool) -> LookupTable:
    """Read LUT Descriptor and LUT Data of a sequence item.

    Parameters
    ----------
    item
        Item of the Modality LUT or VOI LUT Sequence.
    signed_input
        Whether the values looked up may be negative: the first mapped value is then two's complement.
    little_endian
        Byte order of the file, for tables held as bytes.

    Raises
    ------
    InputRefused
        'header': descriptor and data are missing, malformed, or disagree.
    """
    descriptor = value_of(item, "LUTDescriptor")
    if not isinstance(descriptor, MultiValue | list | tuple) or len(descriptor) != 3:
        raise InputRefused("header", "LUTDescriptor does not hold three values")
    count, first, bits = (int(each) for each in descriptor)
    count = count & 0xFFFF or 1 << 16  # 65,536 entries are coded as 0
    if not 8 <= bits <= 16:
        raise InputRefused("header", f"LUTDescriptor names {bits} bits per entry, expected 8 to 16")
    if signed_input and first > 0x7FFF:
        first -= 1 << 16
    if not signed_input and first < 0:
        first += 1 << 16
    entries = _entries(value_of(item, "LUTData"), count, bits, little_endian=little_endian)
    if int(entries.max()) >> bits:
        raise InputRefused("header", f"LUTData holds entries above {bits} bits")
    return LookupTable(first, entries.astype(np.float64), bits)


def _entries(data: Any, count: int, bits: int, *, little_endian: bool) -> npt.NDArray[Any]:  # noqa: ANN401
    if isinstance(data, bytes):
        return _from_bytes(data, count, bits, little_endian=little_endian)
    values = list(data) if isinstance(data, MultiValue | list | tuple) else [data]
    if len(values) == count and all(isinstance(each, int) for each in values):
        return np.array(values, dtype=np.int64) & 0xFFFF
    if bits == 8 and all(isinstance(each, int) for each in values):
        packed = np.array(values, dtype=np.int64).astype("<u2").tobytes()
        return _from_bytes(packed, count, bits, little_endian=True)
    raise InputRefused("header", "LUTData holds another number of entries than its descriptor declares")


def _from_bytes(data: bytes, count: int, bits: int, *, little_endian: bool) -> npt.NDArray[Any]:
    if len(data) == 2 * count:
        return np.frombuffer(data, dtype="<u2" if little_endian else ">u2").astype(np.int64)
    if bits == 8 and little_endian and len(data) in (count, count + count % 2):
        return np.frombuffer(data, dtype=np.uint8, count=count).astype(np.int64)
    raise InputRefused("header", "LUTData holds another number of entries than its descriptor declares")
