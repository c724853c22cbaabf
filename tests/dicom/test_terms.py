"""Text of files reduced to known terms."""

from __future__ import annotations

import pytest

from safecheck.dicom import terms
from safecheck.dicom.pseudonyms import Pseudonyms

NAMES = Pseudonyms(b"k" * 32)


@pytest.mark.parametrize(
    ("function", "text", "term"),
    [
        (terms.modality, "CT", "CT"),
        (terms.modality, " mr ", "MR"),
        (terms.modality, "DOE", "other"),
        (terms.modality, "", ""),
        (terms.body_part, "L-SPINE", "LSPINE"),
        (terms.body_part, "Chest ", "CHEST"),
        (terms.body_part, "KNEE OF MR DOE", "other"),
        (terms.body_part, "", ""),
        (terms.manufacturer, "SIEMENS Healthineers Doe", "Siemens"),
        (terms.manufacturer, "GE MEDICAL SYSTEMS", "GE"),
        (terms.manufacturer, "GE", "GE"),
        (terms.manufacturer, "Gerda Doe", "other"),
        (terms.manufacturer, "Philips Medical Systems", "Philips"),
        (terms.manufacturer, " ", ""),
        (terms.photometric, "MONOCHROME1", "MONOCHROME1"),
        (terms.photometric, "YBR_FULL_422", "YBR_FULL_422"),
        (terms.photometric, "DOE", "other"),
        (terms.object_class, "1.2.840.10008.5.1.4.1.1.2", "CT Image Storage"),
        (terms.object_class, "1.2.840.10008.1.2", "private or unknown object class"),
        (terms.object_class, "1.3.6.1.4.1.99999.1", "private or unknown object class"),
        (terms.object_class, "DOE", "private or unknown object class"),
        (terms.object_class, "", ""),
        (terms.loss_method, "ISO_15444_1", "ISO_15444_1"),
        (terms.loss_method, "ISO_15444_2", "ISO_15444_2"),
        (terms.loss_method, "DOE_1", "other"),
        (terms.decimal, "338.687338501292", "338.687338501292"),
        (terms.decimal, "1e1", "1e1"),
        (terms.decimal, "Doe", "not a number"),
        (terms.decimal, "1" * 17, "not a number"),
    ],
)
def test_text_becomes_a_term(function: object, text: str, term: str) -> None:
    assert callable(function)
    assert function(text) == term


@pytest.mark.parametrize("text", ["B30f", "H31s", "Br40d", "I31f\\3", "STANDARD", "BONEPLUS", "FC18", "YA", "C", "11"])
def test_known_kernels_keep_their_name(text: str) -> None:
    assert terms.kernel(text, NAMES) == text


@pytest.mark.parametrize("text", ["DOE", "B30f DOE", "Doe^Jane", "19700101"])
def test_unknown_kernels_take_a_keyed_short_form(text: str) -> None:
    named = terms.kernel(text, NAMES)
    assert named == NAMES.name("kernel", text)
    assert text not in named
    assert terms.kernel(text, Pseudonyms(b"x" * 32)) != named


def test_no_kernel_is_no_kernel() -> None:
    assert terms.kernel("", NAMES) == ""
