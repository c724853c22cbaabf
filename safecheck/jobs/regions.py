"""Regions of a run: from a region file, a segmentation or a structure set."""

from __future__ import annotations

from pathlib import Path

from safecheck.dicom.carriers.carrier import read_carrier
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import RegionError, UsageError
from safecheck.regions.file import read_regions
from safecheck.regions.region import RegionSet

__all__ = ["load_regions"]

_BLANK = b" \t\r\n\xef\xbb\xbf"
"""What may stand before a JSON text, the byte order mark included."""


def load_regions(path: Path, pseudonyms: Pseudonyms) -> RegionSet:
    """Read regions, whatever carries them: the content decides, not the file's name.

    Parameters
    ----------
    path
        A region file in JSON, an RT Structure Set or a segmentation.
    pseudonyms
        Names under the site key: carriers name frames of reference and instances by their UID.

    Returns
    -------
    RegionSet
        `refused` names what a carrier holds beside them.

    Raises
    ------
    DocumentError
        A key of the region file is wrong.
    UsageError
        The file cannot be read or holds no regions that can be used.
    """
    try:
        content = path.read_bytes()
    except OSError as error:
        raise UsageError("the region file cannot be read; expected a file") from error
    if content.lstrip(_BLANK).startswith((b"{", b"[")):
        return read_regions(content)
    try:
        return read_carrier(content, pseudonyms)
    except RegionError as error:
        raise UsageError(str(error)) from error
