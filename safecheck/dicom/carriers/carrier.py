"""Which carrier a file is, told from its content."""

from __future__ import annotations

import hashlib
import io

from pydicom.dataset import Dataset

from safecheck.dicom.carriers import segmentation, structure_set
from safecheck.dicom.carriers.carried import Carried
from safecheck.dicom.elements import text
from safecheck.dicom.opened import parse_file
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.terms import object_class
from safecheck.errors import InputRefused, RegionError
from safecheck.regions.region import RegionSet
from safecheck.wording import sentence_of

__all__ = ["read_carrier"]


def read_carrier(content: bytes, pseudonyms: Pseudonyms) -> RegionSet:
    """Read the regions of an RT Structure Set or a segmentation.

    Parameters
    ----------
    content
        The file, with or without preamble and file meta information.
    pseudonyms
        Names under the site key.

    Returns
    -------
    RegionSet
        With at least one region; `refused` names those left out.

    Raises
    ------
    RegionError
        It is no such object, it cannot be read, or no region of it can be used.
    """
    try:
        carried = _read(content, pseudonyms)
    except InputRefused as error:
        detail = f" ({error.detail})" if error.detail else ""
        raise RegionError(f"the regions cannot be read: {sentence_of(error.reason)}{detail}") from None
    if not carried.regions:
        why = f": {'; '.join(carried.refused)}" if carried.refused else ""
        raise RegionError(f"no region of the file can be used{why}")
    return RegionSet(carried.regions, hashlib.sha256(content).hexdigest(), carried.refused)


def _read(content: bytes, pseudonyms: Pseudonyms) -> Carried:
    dataset = _dataset(content)
    found = "" if dataset is None else text(dataset, "SOPClassUID")
    if dataset is None or not found:
        raise RegionError("the file is neither a region file in JSON nor a DICOM object")
    if found == structure_set.OBJECT_CLASS:
        return structure_set.read_structure_set(dataset, pseudonyms)
    if found == segmentation.OBJECT_CLASS:
        return segmentation.read_segmentation(content, pseudonyms)
    raise RegionError(
        f"regions are not read from a DICOM object of class {object_class(found)}; expected RT Structure Set Storage "
        "or Segmentation Storage"
    )


def _dataset(content: bytes) -> Dataset | None:
    """Elements before any pixels; None where nothing can be parsed, as in most that is not DICOM."""
    try:
        return parse_file(io.BytesIO(content)).dataset
    except InputRefused as refusal:
        if refusal.reason == "unreadable":
            return None
        raise
