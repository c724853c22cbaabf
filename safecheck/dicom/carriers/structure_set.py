"""RT Structure Set -> regions in patient millimetres (PS3.3 C.8.8.5, C.8.8.6 and C.8.8.8)."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from types import MappingProxyType

import numpy as np
from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset

from safecheck.dicom.carriers.carried import Carried
from safecheck.dicom.carriers.labels import label_of, region_name
from safecheck.dicom.carriers.planes import Contour, ContourPlane, Stack, stack
from safecheck.dicom.elements import items, real_numbers, term, text, whole_number
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import InputRefused, RegionError
from safecheck.regions.region import InPatient, Part, Region, Role, Vector
from safecheck.regions.shapes import Polygon

__all__ = ["OBJECT_CLASS", "ROLES", "read_structure_set"]

OBJECT_CLASS = "1.2.840.10008.5.1.4.1.1.481.3"
"""RT Structure Set Storage."""
ROLES: MappingProxyType[str, Role] = MappingProxyType({"GTV": "target", "CTV": "target", "PTV": "target"})
"""Role by RT ROI Interpreted Type (3006,00A4); any other type (ORGAN, AVOIDANCE, EXTERNAL, ...) has role 'other'."""

_CLOSED = ("CLOSED_PLANAR", "CLOSEDPLANAR_XOR")
_OTHERS = ("POINT", "OPEN_PLANAR", "OPEN_NONPLANAR")
_NAME, _ROI_REFERENCE, _REFERENCE, _DATA = 0x30060026, 0x30060024, 0x00200052, 0x30060050


def read_structure_set(dataset: Dataset, pseudonyms: Pseudonyms) -> Carried:
    """Read the closed contours of each ROI.

    Parameters
    ----------
    dataset
        Of an RT Structure Set.
    pseudonyms
        Names under the site key: a region lies in a frame of reference under its pseudonym.

    Returns
    -------
    Carried
        An ROI with open contours or points, or whose contours contradict each other, is refused as a whole.

    Raises
    ------
    InputRefused
        A sequence cannot be read.
    """
    drawn = _by_roi(dataset, "ROIContourSequence")
    observed = _by_roi(dataset, "RTROIObservationsSequence")
    regions, refused = [], []
    for number, roi in enumerate(items(dataset, "StructureSetROISequence"), start=1):
        own = whole_number(roi, "ROINumber")
        types = [term(each, "RTROIInterpretedType") for each in observed.get(own, ())]
        contours = [contour for each in drawn.get(own, ()) for contour in items(each, "ContourSequence")]
        try:
            stacked = stack(_points(contours))
            reference = _reference(dataset, roi)
        except (InputRefused, RegionError) as error:
            refused.append(f"{region_name(number)}: {error}")
            continue
        if stacked.without_area:
            refused.append(f"{region_name(number)}: {stacked.without_area} contours without area were left aside")
        frame = pseudonyms.name("frame", reference)
        parts = tuple(_part(stacked, plane, frame) for plane in stacked.planes)
        label = label_of([text(roi, _NAME)], number)
        regions.append(Region(region_name(number), label, _role(types), parts))
    return Carried(tuple(regions), tuple(refused))


def _by_roi(dataset: Dataset, keyword: str) -> dict[int, list[Dataset]]:
    """Items of a sequence by the ROI that they refer to."""
    found: dict[int, list[Dataset]] = {}
    for item in items(dataset, keyword):
        found.setdefault(whole_number(item, "ReferencedROINumber"), []).append(item)
    return found


def _role(types: list[str]) -> Role:
    return next((ROLES[each] for each in types if each in ROLES), "other")


def _reference(dataset: Dataset, roi: Dataset) -> str:
    """Frame of reference of an ROI: its own, else the only one of the object."""
    own = text(roi, _ROI_REFERENCE)
    listed = {text(item, _REFERENCE) for item in items(dataset, "ReferencedFrameOfReferenceSequence")} - {""}
    found = own or (next(iter(listed)) if len(listed) == 1 else "") or text(dataset, _REFERENCE)
    if not found:
        raise RegionError("no frame of reference is named")
    return found


def _points(contours: list[Dataset]) -> list[Contour]:
    """Points of all contours, if each is a closed one.

    Raises
    ------
    RegionError
        There is none, one of another type, or one whose data does not fit its declaration.
    """
    if not contours:
        raise RegionError("no contour is drawn")
    types = Counter(term(contour, "ContourGeometricType") for contour in contours)
    open_types = {kind: count for kind, count in types.items() if kind not in _CLOSED}
    if open_types:
        # A type that the standard does not know is free text, and stays behind.
        named = Counter({kind if kind in _OTHERS else "unknown": 0 for kind in open_types})
        for kind, count in open_types.items():
            named[kind if kind in _OTHERS else "unknown"] += count
        found = ", ".join(f"{named[kind]} of type {kind}" for kind in sorted(named))
        raise RegionError(f"contours enclose no area ({found}); expected type CLOSED_PLANAR")
    return [_triples(contour) for contour in contours]


def _triples(contour: Dataset) -> Contour:
    numbers = _numbers(contour)
    if not numbers or len(numbers) % 3 or not np.isfinite(numbers).all():
        raise RegionError("contour data is missing or is not triples of numbers")
    points = np.array(numbers, dtype=np.float64).reshape(-1, 3)
    if whole_number(contour, "NumberOfContourPoints", missing=len(points)) != len(points):
        raise RegionError("a contour holds another number of points than it declares")
    return points


def _numbers(contour: Dataset) -> Sequence[float]:
    """Contour data, from its text where it still is one: the library's own numbers take ten times as long."""
    raw = contour.get_item(_DATA) if _DATA in contour else None
    if not isinstance(raw, RawDataElement) or not isinstance(raw.value, bytes):
        return real_numbers(contour, "ContourData") or ()
    try:
        return [float(number) for number in raw.value.rstrip(b" \0").split(b"\\")]
    except ValueError:
        return ()


def _part(stacked: Stack, plane: ContourPlane, frame_of_reference: str) -> Part:
    """What was drawn on one plane, its slab centred half way between its bounds rather than on the plane."""
    middle = (plane.low_mm + plane.high_mm) / 2
    placement = InPatient(
        frame_of_reference=frame_of_reference,
        origin_mm=_vector(stacked.origin_mm + middle * stacked.normal),
        along_rows=_vector(stacked.along_rows),
        along_columns=_vector(stacked.along_columns),
        depth_mm=plane.high_mm - plane.low_mm,
    )
    outline = tuple(tuple((float(row), float(column)) for row, column in ring) for ring in plane.rings)
    return Part(placement=placement, shape=Polygon(outline=outline))


def _vector(numbers: np.typing.NDArray[np.float64]) -> Vector:
    return float(numbers[0]), float(numbers[1]), float(numbers[2])
