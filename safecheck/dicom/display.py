"""The file's own display settings (PS3.3 C.11.2): windows with their function, and tables; never their free text."""

from __future__ import annotations

from typing import Literal

import numpy as np
from pydicom.dataset import Dataset

from safecheck.dicom.elements import items, real_numbers, term, value_of
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.lookup import read_lookup
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.errors import InputRefused
from safecheck.frames import Display, DisplayTable, DisplayWindow, ModalityTable, ModalityTransform

__all__ = ["read_displays"]

_Function = Literal["LINEAR", "LINEAR_EXACT", "SIGMOID"]
_FUNCTIONS: dict[str, _Function] = {
    "": "LINEAR",
    "LINEAR": "LINEAR",
    "LINEAR_EXACT": "LINEAR_EXACT",
    "SIGMOID": "SIGMOID",
}


def read_displays(
    dataset: Dataset,
    groups: FunctionalGroups,
    index: int,
    header: PixelHeader,
    transform: ModalityTransform,
    *,
    little_endian: bool,
) -> tuple[tuple[Display, ...], tuple[str, ...]]:
    """Windows, then tables, of a frame; none for colour. What cannot be used is left out with a note.

    Returns
    -------
    displays, notes
        In the order of the file, named 'file window 1', 'file table 1' and so on.
    """
    if header.channels == 3:
        return (), ()
    source = groups.of(index, "FrameVOILUTSequence")
    windows, notes = _windows(source)
    tables, table_notes = _tables(dataset, header, transform, little_endian=little_endian)
    return (*windows, *tables), notes + table_notes


def _windows(source: Dataset) -> tuple[tuple[DisplayWindow, ...], tuple[str, ...]]:
    if value_of(source, "WindowCenter") is None and value_of(source, "WindowWidth") is None:
        return (), ()
    centres, widths = real_numbers(source, "WindowCenter"), real_numbers(source, "WindowWidth")
    function = _FUNCTIONS.get(term(source, "VOILUTFunction"))
    if centres is None or widths is None or len(centres) != len(widths):
        return (), ("the file's display windows are malformed and were left out",)
    if function is None:
        return (), ("the file's display windows have an unknown function and were left out",)
    least = 1.0 if function == "LINEAR" else np.nextafter(0, 1)
    kept = tuple(
        DisplayWindow(f"file window {number}", centre, width, function)
        for number, (centre, width) in enumerate(zip(centres, widths, strict=True), start=1)
        if width >= least
    )
    dropped = len(kept) < len(centres)
    return kept, ("a display window of the file has an impossible width and was left out",) if dropped else ()


def _tables(
    dataset: Dataset, header: PixelHeader, transform: ModalityTransform, *, little_endian: bool
) -> tuple[tuple[DisplayTable, ...], tuple[str, ...]]:
    """VOI tables; the first mapped value is signed where the modality transform may give negative values."""
    signed = _lowest_value(header, transform) < 0
    try:
        tables = [
            read_lookup(item, signed_input=signed, little_endian=little_endian)
            for item in items(dataset, "VOILUTSequence")
        ]
    except InputRefused:
        return (), ("a display table of the file is malformed; its display tables were left out",)
    return tuple(
        DisplayTable(f"file table {number}", table.first, table.entries, table.bits)
        for number, table in enumerate(tables, start=1)
    ), ()


def _lowest_value(header: PixelHeader, transform: ModalityTransform) -> float:
    if isinstance(transform, ModalityTable):
        return float(transform.entries.min())
    ends = np.array([header.format.lowest, header.format.highest])
    return float(transform.apply(ends).min())
