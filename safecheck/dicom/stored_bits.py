"""From allocated bits to stored values: sign, high bit, and what lies in the bits that should be unused."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.dicom.pixel_header import PixelHeader
from safecheck.errors import InputRefused
from safecheck.frames import Samples

__all__ = ["bits_needed", "stored_values"]


def stored_values(container: npt.NDArray[Any], header: PixelHeader, *, reason: str) -> tuple[Samples, tuple[str, ...]]:
    """Stored values out of samples of `header.bits_allocated` bits, read as unsigned.

    Parameters
    ----------
    container
        Unsigned integers of 8 or 16 bits, any shape.
    header
        Says which bits are stored, whether they are signed, and where overlay planes lie.
    reason
        Reason code for bits that are neither stored, sign nor overlay.

    Returns
    -------
    samples, notes
        Same shape, of `header.format.dtype`; and what was set right.

    Raises
    ------
    InputRefused
        With `reason`, when unused bits hold something that the header does not account for.
    """
    stored, shift = header.bits_stored, header.high_bit + 1 - header.bits_stored
    notes: list[str] = []
    container, masked = _without_overlays(container, header, shift)
    if masked:
        notes.append("overlay planes in unused bits of the samples were masked")
    if shift:
        if np.any(container & ((1 << shift) - 1)):
            raise InputRefused(reason, "bits below the stored ones are not zero")
        container = container >> shift
        notes.append("stored bits do not begin at the lowest bit; samples were shifted down")
    upper = _upper_mask(header, shift)
    if upper and np.bitwise_or.reduce(container, axis=None) & upper:
        _check_upper(container, stored, upper, signed=header.signed, reason=reason)
    return _with_sign(container, header), tuple(notes)


def bits_needed(samples: Samples) -> int:
    """Bits that the values found really need: two's complement where one is negative; at least 1."""
    lowest, highest = int(samples.min()), int(samples.max())
    if lowest >= 0:
        return max(1, highest.bit_length())
    return max(highest.bit_length() if highest > 0 else 0, (-lowest - 1).bit_length()) + 1


def _without_overlays(container: npt.NDArray[Any], header: PixelHeader, shift: int) -> tuple[npt.NDArray[Any], bool]:
    planes = sum(1 << bit for bit in header.overlay_bits if not shift <= bit <= header.high_bit)
    if not planes or not np.bitwise_or.reduce(container, axis=None) & planes:
        return container, False
    return container & (((1 << header.bits_allocated) - 1) & ~planes), True


def _upper_mask(header: PixelHeader, shift: int) -> int:
    """Bits above the stored ones in which no overlay plane lies, after the shift."""
    above = ((1 << header.bits_allocated) - 1) & ~((1 << (header.high_bit + 1)) - 1)
    planes = sum(1 << bit for bit in header.overlay_bits)
    return (above & ~planes) >> shift


def _check_upper(container: npt.NDArray[Any], stored: int, upper: int, *, signed: bool, reason: str) -> None:
    """Accept the upper bits as copies of the sign bit of every sample; refuse anything else.

    Where some samples carry their sign upwards and others do not, the latter may as well be positive values beyond
    the stored bits.
    """
    if not signed:
        raise InputRefused(reason, f"values above {stored} bits in samples declared unsigned")
    negative = (container >> (stored - 1)) & 1 == 1
    if not np.array_equal(container & upper, np.where(negative, upper, 0)):
        raise InputRefused(reason, f"values outside the range of {stored} signed bits")


def _with_sign(container: npt.NDArray[Any], header: PixelHeader) -> Samples:
    stored, unused = header.bits_stored, header.bits_allocated - header.bits_stored
    if not header.signed:
        return np.ascontiguousarray(container & ((1 << stored) - 1) if unused else container)
    lifted = np.ascontiguousarray(container << unused)
    return lifted.view(header.format.dtype) >> unused
