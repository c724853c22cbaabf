"""From stored values to the frame's unit: slope and intercept or table, per frame, and what the unit is called."""

from __future__ import annotations

from dataclasses import dataclass

from pydicom.dataset import Dataset

from safecheck.dicom.elements import items, real_numbers, term, terms, value_of
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.lookup import read_lookup
from safecheck.errors import InputRefused
from safecheck.frames import ModalityTable, ModalityTransform, Rescale

__all__ = ["LUMA_UNIT", "STORED_UNIT", "UNSPECIFIED_UNIT", "Modality", "image_terms", "read_modality"]

STORED_UNIT = "stored value"
UNSPECIFIED_UNIT = "rescaled, unit unspecified"
LUMA_UNIT = "luma level"

_RESCALE_TYPES = frozenset({"OD", "HU", "MGML", "Z_EFF", "ED", "EDW", "HU_MOD", "PCT"})
"""Defined Terms of (0028,1054) but the next, which means unspecified (PS3.3 C.11.1.1.2)."""
_UNSPECIFIED_TERM = "US"
_SPECTRAL = (
    "MAT_",
    "EFF_ATOMIC",
    "Z_EFF",
    "ZEFF",
    "ELECTRON_DENSITY",
    "RHO",
    "IODINE",
    "WATER",
    "CALCIUM",
    "URIC",
    "FAT_MAP",
    "PERFUSION",
)
"""Beginnings of Image Type values that name a map computed from a spectral or perfusion scan, not attenuation."""


@dataclass(frozen=True, slots=True)
class Modality:
    """How stored values are read."""

    transform: ModalityTransform
    unit: str
    notes: tuple[str, ...] = ()
    """What was left aside."""


def image_terms(dataset: Dataset, groups: FunctionalGroups, index: int) -> tuple[str, ...]:
    """Image Type of the instance and Frame Type of the frame, together."""
    found = list(terms(dataset, "ImageType"))
    for keyword in ("CTImageFrameTypeSequence", "MRImageFrameTypeSequence", "XAXRFFrameCharacteristicsSequence"):
        item = groups.find(index, keyword)
        if item is not None:
            found.extend(terms(item, "FrameType"))
    return tuple(found)


def read_modality(
    dataset: Dataset,
    groups: FunctionalGroups,
    index: int,
    *,
    acquisition: str,
    capture: bool,
    signed: bool,
    little_endian: bool,
) -> Modality:
    """Modality transform and unit of a grey frame.

    Parameters
    ----------
    dataset, groups, index
        Header, functional groups, frame from 0.
    acquisition
        Modality of the acquisition, e.g. CT.
    capture
        The object is a secondary capture: HU only where it says so.
    signed
        Whether stored values are signed.
    little_endian
        Byte order of the file.

    Raises
    ------
    InputRefused
        'rescale' or 'header'.
    """
    source = groups.of(index, "PixelValueTransformationSequence")
    tables = items(dataset, "ModalityLUTSequence")
    slope, intercept = _decimal(source, "RescaleSlope"), _decimal(source, "RescaleIntercept")
    if tables:
        if slope is not None or intercept is not None:
            raise InputRefused("rescale", "both a rescale slope and a modality table")
        if len(tables) != 1:
            raise InputRefused("header", "more than one modality table")
        table = read_lookup(tables[0], signed_input=signed, little_endian=little_endian)
        declared = term(tables[0], "ModalityLUTType")
        return Modality(
            ModalityTable(table.first, table.entries),
            declared if declared in _RESCALE_TYPES - {"HU"} else UNSPECIFIED_UNIT,
            _left_aside(declared, "Modality LUT Type"),
        )
    if slope is None and intercept is None:
        return Modality(Rescale(), STORED_UNIT)
    if slope is None or intercept is None:
        raise InputRefused("rescale", "a rescale slope without an intercept, or an intercept without a slope")
    if slope == 0:
        raise InputRefused("rescale", "a slope of zero")
    seen = image_terms(dataset, groups, index)
    declared = term(source, "RescaleType")
    unit = _unit(declared, acquisition, seen, capture=capture)
    return Modality(Rescale(slope, intercept), unit, _left_aside(declared, "Rescale Type"))


def _left_aside(declared: str, element: str) -> tuple[str, ...]:
    """Say that a type is not used, which is never quoted: it may be free text."""
    if declared in _RESCALE_TYPES or declared in ("", _UNSPECIFIED_TERM):
        return ()
    return (f"the declared {element} is none of the standard's terms and was left aside",)


def _decimal(source: Dataset, keyword: str) -> float | None:
    """Return a single finite decimal, None where absent."""
    if value_of(source, keyword) is None:
        return None
    numbers = real_numbers(source, keyword)
    if numbers is None or len(numbers) != 1:
        raise InputRefused("rescale", f"{keyword} is not one number")
    return numbers[0]


def _unit(declared: str, acquisition: str, seen: tuple[str, ...], *, capture: bool) -> str:
    """HU for CT only, not for localizers or derived spectral maps; otherwise the declared type where it is known."""
    if declared in ("", "HU"):
        attenuation = acquisition == "CT" and "LOCALIZER" not in seen and not _is_map(seen)
        if attenuation and (declared == "HU" or not capture):
            return "HU"
        return UNSPECIFIED_UNIT
    return declared if declared in _RESCALE_TYPES else UNSPECIFIED_UNIT


def _is_map(seen: tuple[str, ...]) -> bool:
    return any(each.startswith(_SPECTRAL) for each in seen)
