"""Where an image comes from: the header's answers in known terms, for the groups of like images."""

from __future__ import annotations

import math

from pydicom.dataset import Dataset

from safecheck.dicom import terms
from safecheck.dicom.age import under_18
from safecheck.dicom.burned_in import may_show_text
from safecheck.dicom.elements import real_numbers, text
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.header import Header
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import InputRefused
from safecheck.frames import LossHistory, Origin

__all__ = ["origin_of", "slice_position_mm", "slice_thickness_class"]


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
    modality = terms.modality(text(dataset, "Modality"))
    return Origin(
        modality=modality,
        body_part=terms.body_part(text(dataset, "BodyPartExamined")),
        slice_thickness_class=slice_thickness_class(_functional(dataset, "PixelMeasuresSequence", "SliceThickness")),
        kernel=terms.kernel(_functional(dataset, "CTReconstructionSequence", "ConvolutionKernel"), pseudonyms),
        manufacturer=terms.manufacturer(text(dataset, "Manufacturer")),
        source_syntax=header.syntax.name,
        source_bytes=source_bytes,
        history=history,
        slice_position_mm=slice_position_mm(
            real_numbers(dataset, "ImagePositionPatient") or (), real_numbers(dataset, "ImageOrientationPatient") or ()
        ),
        under_18=under_18(dataset),
        may_show_text=may_show_text(dataset, modality, object_class),
    )


def _functional(dataset: Dataset, group: str, keyword: str) -> str:
    """Text of an element of the first frame's functional group, or of the header itself."""
    try:
        found = FunctionalGroups(dataset).find(0, group)
    except InputRefused:  # the file is described all the same; the pixel path refuses it
        found = None
    own = "" if found is None else text(found, keyword)
    return own or text(dataset, keyword)


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
