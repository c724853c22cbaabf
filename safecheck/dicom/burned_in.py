"""Whether a frame may carry burned-in text; doubt counts as yes, since its crop would leave the hospital's walls."""

from __future__ import annotations

from pydicom.dataset import Dataset

from safecheck.dicom.elements import text, words

__all__ = ["may_show_text"]

# Modalities whose images carry annotation in the pixels as a rule; common practice, no source.
_WRITTEN_ON = frozenset(
    ("", "US", "IVUS", "BDUS", "OT", "SC", "XC", "ES", "GM", "RF", "DG", "TG", "LS", "DF", "HC", "OP")
)
_SECTIONAL = frozenset(("CT", "MR", "PT", "NM"))
"""Modalities whose own images are reconstructed, and carry no text unless they were captured from a screen."""


def may_show_text(dataset: Dataset, modality: str, object_class: str) -> bool:
    """Whether burned-in text is declared or cannot be ruled out.

    A declared NO is not relied on where text is the rule, since it is often a default there.

    Parameters
    ----------
    dataset
        Header of the instance.
    modality
        Its Modality as a known term; '' where it names none.
    object_class
        Name of its SOP class.
    """
    if modality in _WRITTEN_ON or "Secondary Capture" in object_class:
        return True
    declared = text(dataset, "BurnedInAnnotation").upper()
    if declared == "NO":
        return False
    secondary = "SECONDARY" in (each.upper() for each in words(dataset, "ImageType")[1:2])
    return bool(declared) or secondary or modality not in _SECTIONAL or "ConversionType" in dataset
