"""Which carrier a file is, told from its content."""

from __future__ import annotations

import hashlib
import io

from pydicom.dataset import Dataset
from pydicom.filereader import read_dataset, read_partial, read_preamble
from pydicom.tag import BaseTag

from safecheck.dicom.carriers import segmentation, structure_set
from safecheck.dicom.carriers.carried import Carried
from safecheck.dicom.header import text
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.source import inflate
from safecheck.dicom.terms import object_class
from safecheck.errors import InputRefused, RegionError
from safecheck.regions.region import RegionSet
from safecheck.wording import sentence_of

__all__ = ["read_carrier"]

_CLASS, _SYNTAX = 0x00080016, 0x00020010
_DEFLATED = "1.2.840.10008.1.2.1.99"
_PIXELS = 0x7FE00000


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
    found = _class_of(content)
    if found == structure_set.OBJECT_CLASS:
        return structure_set.read_structure_set(_parse(content, _PIXELS), pseudonyms)
    if found == segmentation.OBJECT_CLASS:
        return segmentation.read_segmentation(content, pseudonyms)
    if not found:
        raise RegionError("the file is neither a region file in JSON nor a DICOM object")
    raise RegionError(
        f"regions are not read from a DICOM object of class {object_class(found)}; expected RT Structure Set Storage "
        "or Segmentation Storage"
    )


def _class_of(content: bytes) -> str:
    """SOP Class UID; '' where there is none to be found, as in anything that is not DICOM."""
    try:
        return text(_parse(content, _CLASS + 1), _CLASS)
    except InputRefused:
        return ""


def _parse(content: bytes, end: int) -> Dataset:
    """Elements before a tag; a deflated data set is inflated within bounds."""

    def at_end(tag: BaseTag, representation: str | None, length: int) -> bool:  # noqa: ARG001
        return int(tag) >= end

    def past_meta(tag: BaseTag, representation: str | None, length: int) -> bool:  # noqa: ARG001
        return int(tag) >> 16 != 2

    stream = io.BytesIO(content)
    try:
        with quiet_library():
            read_preamble(stream, force=True)
            meta = read_dataset(stream, is_implicit_VR=False, is_little_endian=True, stop_when=past_meta)
            if text(meta, _SYNTAX) == _DEFLATED:
                whole = io.BytesIO(inflate(stream.read()))
                return read_dataset(whole, is_implicit_VR=False, is_little_endian=True, stop_when=at_end)
            stream.seek(0)
            return read_partial(stream, stop_when=at_end, force=True)
    except InputRefused:
        raise
    except Exception as error:
        # The library raises many kinds here, some quoting values: none of them may be heard.
        raise InputRefused("unreadable", f"{type(error).__name__} while the header was parsed") from None
