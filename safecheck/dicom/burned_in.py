"""Whether a frame may carry burned-in text; doubt counts as yes, since its crop would leave the hospital's walls."""

from __future__ import annotations

from pydicom.dataset import Dataset

from safecheck.dicom.elements import term, terms

__all__ = ["may_show_text"]

_SECTIONAL = frozenset({"CT", "MR", "PT", "NM"})
"""Modalities whose own images are reconstructed, and carry no text unless they were captured from a screen."""


def may_show_text(dataset: Dataset, *, acquisition: str, capture: bool) -> bool:
    """Whether burned-in text is declared or cannot be ruled out.

    Parameters
    ----------
    dataset
        Header of the instance.
    acquisition
        Modality of the acquisition.
    capture
        The object is a secondary capture.
    """
    declared = term(dataset, "BurnedInAnnotation")
    if declared == "NO":
        return False
    if declared or capture or "SECONDARY" in terms(dataset, "ImageType")[1:2]:
        return True
    return acquisition not in _SECTIONAL or "ConversionType" in dataset
