"""Values that may stand once for the file, once for all its frames, or once for each (PS3.3 C.7.6.16)."""

from __future__ import annotations

from pydicom.dataset import Dataset

from safecheck.dicom.elements import items
from safecheck.errors import InputRefused

__all__ = ["FunctionalGroups"]


class FunctionalGroups:
    """Shared and per-frame functional groups of an instance; empty for one that is not enhanced.

    Parameters
    ----------
    dataset
        Header of the instance.
    frames
        Number of frames declared; None for an instance that is described and not read.

    Raises
    ------
    InputRefused
        'header': they cannot be read; 'frames': the per-frame groups are not one for each frame.
    """

    def __init__(self, dataset: Dataset, frames: int | None = None) -> None:
        self._dataset = dataset
        shared = items(dataset, "SharedFunctionalGroupsSequence")
        self._shared = shared[0] if shared else None
        self._each = items(dataset, "PerFrameFunctionalGroupsSequence")
        if self._each and frames is not None and len(self._each) != frames:
            raise InputRefused("frames", "the per-frame functional groups are not one for each frame")

    @property
    def enhanced(self) -> bool:
        """Whether the instance has functional groups at all."""
        return self._shared is not None or bool(self._each)

    def find(self, index: int, keyword: str) -> Dataset | None:
        """Return the group's item for a frame (from 0): its own, else the shared one, else None."""
        own = items(self._each[index], keyword) if self._each else ()
        if own:
            return own[0]
        shared = items(self._shared, keyword) if self._shared is not None else ()
        return shared[0] if shared else None

    def of(self, index: int, keyword: str) -> Dataset:
        """Return the group's item for a frame, or the header itself where there is none."""
        found = self.find(index, keyword)
        return self._dataset if found is None else found
