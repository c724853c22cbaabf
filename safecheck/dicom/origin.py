"""Where an image comes from: the header's answers in known terms, for the groups of like images."""

from __future__ import annotations

import math

from pydicom.dataset import Dataset

from safecheck.dicom import terms
from safecheck.dicom.age import under_18
from safecheck.dicom.header import Header, items, real, text
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.frames import LossHistory, Origin

__all__ = ["origin_of", "slice_position_mm", "slice_thickness_class"]

_MODALITY, _BODY_PART, _MAKER = 0x00080060, 0x00180015, 0x00080070
_KERNEL, _THICKNESS, _BURNED_IN = 0x00181210, 0x00180050, 0x00280301
_POSITION, _ORIENTATION = 0x00200032, 0x00200037
_SHARED, _PER_FRAME = 0x52009229, 0x52009230
_RECONSTRUCTION, _MEASURES = 0x00189314, 0x00289110
# Modalities whose images carry annotation in the pixels as a rule; common practice, no source.
_WRITTEN_ON = frozenset(("US", "IVUS", "BDUS", "OT", "SC", "XC", "ES", "GM", "RF", "DG", "TG", "LS", "DF", "HC", "OP"))


def origin_of(
    header: Header, history: LossHistory, source_bytes: int, pseudonyms: Pseudonyms, object_class: str
) -> Origin:
    """Origin of an instance.

    Parameters
    ----------
    header
        As read.
    history
        Its loss history.
    source_bytes
        Size of its pixel data as it lies there.
    pseudonyms
        For a kernel of unusual name.
    object_class
        Name of its SOP class.
    """
    dataset = header.dataset
    modality = terms.modality(text(dataset, _MODALITY))
    return Origin(
        modality=modality,
        body_part=terms.body_part(text(dataset, _BODY_PART)),
        slice_thickness_class=slice_thickness_class(_functional(dataset, _THICKNESS, _MEASURES)),
        kernel=terms.kernel(_functional(dataset, _KERNEL, _RECONSTRUCTION), pseudonyms),
        manufacturer=terms.manufacturer(text(dataset, _MAKER)),
        source_syntax=header.syntax.name,
        source_bytes=source_bytes,
        history=history,
        slice_position_mm=slice_position_mm(real(dataset, _POSITION), real(dataset, _ORIENTATION)),
        under_18=under_18(dataset),
        may_show_text=_may_show_text(dataset, modality, object_class),
    )


def _functional(dataset: Dataset, tag: int, group: int) -> str:
    """Text of an element, or of the functional group that holds it in enhanced images (first frame's if not shared)."""
    if found := text(dataset, tag):
        return found
    for whole in (_SHARED, _PER_FRAME):
        for frame in items(dataset, whole)[:1]:
            for each in items(frame, group)[:1]:
                if found := text(each, tag):
                    return found
    return ""


def slice_thickness_class(thickness_mm: str) -> str:
    """Class of a slice thickness: 'up to 1 mm', 'over 1 to 3 mm', 'over 3 to 5 mm', 'over 5 mm', or '' if unknown."""
    try:
        thickness = float(thickness_mm)
    except ValueError:
        return ""
    if not 0 < thickness < math.inf:
        return ""
    bounds = ((1, "up to 1 mm"), (3, "over 1 to 3 mm"), (5, "over 3 to 5 mm"))
    return next((name for bound, name in bounds if thickness <= bound), "over 5 mm")


def slice_position_mm(position: tuple[float, ...], orientation: tuple[float, ...]) -> float | None:
    """Distance of a plane from the origin along its normal (PS3.3 C.7.6.2).

    Parameters
    ----------
    position
        Image Position (Patient), 3 numbers in mm.
    orientation
        Image Orientation (Patient), 6 direction cosines.

    Returns
    -------
    float or None
        In mm, rounded to 1e-6; None where either is missing or not usable.
    """
    if len(position) != 3 or len(orientation) != 6 or not all(map(math.isfinite, (*position, *orientation))):
        return None
    (rx, ry, rz, cx, cy, cz), (x, y, z) = orientation, position
    normal = (ry * cz - rz * cy, rz * cx - rx * cz, rx * cy - ry * cx)
    length = math.hypot(*normal)
    along = x * normal[0] + y * normal[1] + z * normal[2]
    return round(along / length, 6) if length > 1e-6 else None


def _may_show_text(dataset: Dataset, modality: str, object_class: str) -> bool:
    """Declared, or likely by modality or class; a declared NO is not relied on there, since it is often a default."""
    declared = text(dataset, _BURNED_IN).upper() == "YES"
    return declared or modality in _WRITTEN_ON or modality == "" or "Secondary Capture" in object_class
