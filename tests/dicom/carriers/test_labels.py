"""Which typed names leave: cases made from the stated rule."""

from __future__ import annotations

import pytest

from safecheck.dicom.carriers.labels import label_of


@pytest.mark.parametrize(
    ("text", "label"),
    [
        ("Liver", "liver"),
        ("LUNG_L", "lung l"),
        ("KidneyRight", "kidney right"),
        ("ptv 60", "PTV 60"),
        ("GTV1", "GTV 1"),
        ("Spinal cord", "spinal cord"),
        ("disc 20 HU", "disc 20 HU"),
    ],
)
def test_plain_terms_leave(text: str, label: str) -> None:
    assert label_of([text], 4) == label


@pytest.mark.parametrize(
    "text",
    [
        "Jane Doe",
        "liver Doe",
        "liver 19501231",
        "liver 12 31 50",
        "12",
        "l",
        "",
        "DOE^JANE",
        "Leber Müller",
        "liver " * 12,
        "heart 1950",
    ],
)
def test_anything_else_stays_behind(text: str) -> None:
    assert label_of([text], 4) == "region 4"


def test_the_first_plain_text_is_taken() -> None:
    assert label_of(["Doe", "Tumour", "liver"], 1) == "tumour"
