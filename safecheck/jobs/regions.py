"""Regions of a run: from a region file, a segmentation or a structure set."""

from __future__ import annotations

from pathlib import Path

from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import UsageError
from safecheck.jobs.inputs import Inputs
from safecheck.regions.file import read_regions
from safecheck.regions.region import RegionSet

__all__ = ["load_regions"]


def load_regions(path: Path, pseudonyms: Pseudonyms, inputs: Inputs) -> RegionSet:
    """Read regions, whatever carries them.

    Raises
    ------
    UsageError
        If the file cannot be read or holds no regions.
    """
    try:
        content = path.read_bytes()
    except OSError as error:
        raise UsageError("the region file cannot be read") from error
    return read_regions(content)
