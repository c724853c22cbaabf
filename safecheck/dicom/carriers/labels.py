"""Names of regions: plain anatomical and technical words leave, anything else that was typed stays behind.

A name in a structure set or segmentation is free text and may hold that of a patient. It becomes the region's label
only if every word of it stands in `TERMS`, besides at most one whole number of up to three digits and single letters
of a side; otherwise the region is labelled by its number in the file.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

__all__ = ["TERMS", "label_of", "region_name"]

# Chosen for this program from words of everyday use in radiology and radiotherapy; no source.
_TERMS_TEXT = """
GTV CTV ITV PTV OAR ROI VOI PRV HU CT MR PET
abdomen adrenal air airway ankle aorta arm artery atrium background bile bladder blood body bolus bone bowel brain
brainstem breast bronchus canal cartilage cavity cerebellum cerebrum chest chiasm cochlea colon cord cornea cortex
couch cyst disc duct duodenum ear edge elbow esophagus external eye fat femoral femur fluid foot gallbladder gland
grey hand head heart hip humerus insert joint kidney knee larynx leg lens lesion ligament liver lobe lung mandible
marrow matter mass mediastinum metal muscle nerve node nodule noise oesophagus optic oral orbit outer ovary pancreas
parotid pelvis phantom pharynx pituitary prostate rectum region rib ring sacrum shoulder sinus skin skull small
soft spinal spine spleen sternum stomach submandibular target testis thorax thyroid tibia tissue tongue trachea
tumor tumour uniform ureter urethra uterus vein ventricle vertebra vessel volume water white wrist
left right bilateral anterior posterior superior inferior upper lower middle inner total and of in the
lungs kidneys lobes nodes ribs bones vessels eyes lenses nerves ventricles vertebrae
"""
_FORMS = {term.lower(): term for term in _TERMS_TEXT.split()}
TERMS = frozenset(_FORMS.values())
"""Words that may leave, as they leave."""

_SIDES = frozenset("lr")
_LARGEST_NUMBER_DIGITS = 3
_LONGEST = 64
_WORD = re.compile(r"[^\W\d_]+|\d+")
_CAMEL = re.compile(r"(?<=[a-z])(?=[A-Z])")


def region_name(number: int) -> str:
    """Name of the region of a number, from 1, in its file's order."""
    return f"region {number}"


def label_of(texts: Iterable[str], number: int) -> str:
    """Label that may leave: the first text made of plain terms alone, else the region's name.

    Parameters
    ----------
    texts
        As they stand in the file, the preferred one first.
    number
        Of the region in the file's order, from 1.

    Returns
    -------
    str
        At most 64 characters, words in lower case but for acronyms, a blank between.
    """
    for text in texts:
        words = [word.lower() for word in _WORD.findall(_CAMEL.sub(" ", text))]
        numbers = [word for word in words if word.isdigit()]
        plain = all(word in _FORMS or word in _SIDES for word in words if not word.isdigit())
        named = any(word in _FORMS for word in words)
        if not plain or not named or len(numbers) > 1 or any(len(each) > _LARGEST_NUMBER_DIGITS for each in numbers):
            continue
        label = " ".join(_FORMS.get(word, word) for word in words)
        if len(label) <= _LONGEST:
            return label
    return region_name(number)
