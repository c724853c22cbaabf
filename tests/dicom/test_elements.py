"""Header elements: what is malformed is absent for the one manner of reading, and a refusal for the other."""

from __future__ import annotations

import pytest
from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset
from pydicom.tag import Tag

from safecheck.dicom import elements
from safecheck.errors import InputRefused

CANARY = "QZXCANARYXZQ"


def raw(keyword: str, representation: str, content: bytes) -> Dataset:
    """A data set whose only element was read and not yet converted."""
    tag = Tag(keyword)
    dataset = Dataset()
    dataset._dict[tag] = RawDataElement(tag, representation, len(content), content, 0, False, True)
    return dataset


def test_a_name_of_a_person_is_one_text() -> None:
    dataset = raw("PatientName", "PN", b"Doe^Jane ")
    assert elements.text(dataset, "PatientName") == "Doe^Jane"


@pytest.mark.parametrize("keyword", ["ImageType", "SeriesDescription"])
def test_keyword_and_tag_name_the_same_element(keyword: str) -> None:
    dataset = raw(keyword, "LO", b"A\\ B \\C")
    assert elements.words(dataset, keyword) == elements.words(dataset, int(Tag(keyword))) == ("A", "B", "C")


@pytest.mark.parametrize(
    ("content", "number"),
    [(b"12", 12), (b" +12 ", 12), (b"12.0", 12), (b"1_2", None), (b"1\\2", None), (b"12.5", None), (b"twelve", None)],
)
def test_a_whole_number_is_the_same_in_both_manners(content: bytes, number: int | None) -> None:
    dataset = raw("NumberOfFrames", "LO", content)
    assert elements.whole(dataset, "NumberOfFrames") == number
    if number is not None:
        assert elements.whole_number(dataset, "NumberOfFrames") == number
        return
    with pytest.raises(InputRefused, match=r"^header: NumberOfFrames is not one whole number$"):
        elements.whole_number(dataset, "NumberOfFrames")


def test_an_absent_number_is_refused_unless_something_stands_in() -> None:
    assert elements.whole(Dataset(), "Rows") is None
    assert elements.whole_number(Dataset(), "Rows", missing=1) == 1
    with pytest.raises(InputRefused, match=r"^header: Rows is missing$"):
        elements.whole_number(Dataset(), "Rows")


@pytest.mark.parametrize(("keyword", "representation"), [("Rows", "US"), ("RecommendedDisplayFrameRateInFloat", "FL")])
def test_a_value_that_cannot_be_converted_is_absent_or_refused_and_never_quoted(
    keyword: str, representation: str
) -> None:
    dataset = raw(keyword, representation, CANARY.encode() + b"\xff")
    assert elements.words(dataset, keyword) == ()
    assert elements.real_numbers(dataset, keyword) is None
    with pytest.raises(InputRefused, match=f"^header: {keyword} cannot be read$") as caught:
        elements.value_of(dataset, keyword)
    assert CANARY not in caught.value.detail
    assert caught.value.__suppress_context__


@pytest.mark.parametrize(("representation", "content"), [("LO", b"text"), ("US", b"\x01\x00"), ("UN", b"\x01\x00\x02")])
def test_what_is_no_sequence_has_no_items(representation: str, content: bytes) -> None:
    dataset = raw("SharedFunctionalGroupsSequence", representation, content)
    assert elements.readable_items(dataset, "SharedFunctionalGroupsSequence") == ()
    with pytest.raises(InputRefused, match=r"^header: SharedFunctionalGroupsSequence"):
        elements.items(dataset, "SharedFunctionalGroupsSequence")


def test_a_sequence_has_no_text() -> None:
    dataset = Dataset()
    dataset.SourceImageSequence = [raw("PatientName", "PN", CANARY.encode())]
    assert elements.text(dataset, "SourceImageSequence") == ""


@pytest.mark.parametrize("content", [b"1\\nan", b"inf", b"1\\", b"one"])
def test_decimals_that_are_no_finite_numbers_are_none(content: bytes) -> None:
    assert elements.real_numbers(raw("WindowCenter", "LO", content), "WindowCenter") is None
