"""Values of header elements, in two manners: one takes the malformed for absent, the other refuses the file by it.

Intake describes any file that comes, so its readers (`words`, `text`, `whole`, `readable_items`) never raise. The
pixel path must not guess, so its readers (`value_of`, `whole_number`, `terms`, `term`, `items`) refuse an element that
is there but cannot be read. A refusal names the element and never its value.
"""

from __future__ import annotations

import functools
import math
import re
from collections.abc import Callable
from typing import Any, TypeAlias, TypeVar

from pydicom.datadict import tag_for_keyword
from pydicom.dataset import Dataset
from pydicom.multival import MultiValue
from pydicom.sequence import Sequence
from pydicom.tag import BaseTag, Tag

from safecheck.dicom.quiet import quiet_library
from safecheck.errors import InputRefused

__all__ = [
    "Name",
    "items",
    "readable_items",
    "real_numbers",
    "term",
    "terms",
    "text",
    "value_of",
    "whole",
    "whole_number",
    "words",
]

Name: TypeAlias = str | int
"""Keyword of an element; its tag where it has no keyword of its own, as in repeating groups."""
_T = TypeVar("_T")
_WHOLE = re.compile(r"[+-]?\d{1,12}(?:\.0*)?")


def value_of(dataset: Dataset, name: Name) -> Any:  # noqa: ANN401
    """Return the converted value of an element, or None where it is absent or empty.

    Raises
    ------
    InputRefused
        'header': the element is there but cannot be read.
    """
    return _read(dataset, name, lambda value: None if value in ("", b"") else value)


def words(dataset: Dataset, name: Name) -> tuple[str, ...]:
    """Values of an element as stripped texts; none where it is absent or malformed."""
    try:
        return _words(dataset, name)
    except InputRefused:  # whoever needs the element says so
        return ()


def text(dataset: Dataset, name: Name) -> str:
    r"""Text of an element, values joined by '\'; '' where absent or malformed."""
    return "\\".join(words(dataset, name))


def whole(dataset: Dataset, name: Name) -> int | None:
    """Whole number of an element of one value; None where absent or malformed."""
    found = text(dataset, name)
    return int(found.split(".")[0]) if _WHOLE.fullmatch(found) else None


def whole_number(dataset: Dataset, name: Name, *, missing: int | None = None) -> int:
    """Return a single whole number.

    Raises
    ------
    InputRefused
        'header': absent with no stand-in given, several values, or not a whole number.
    """
    if value_of(dataset, name) is None:
        if missing is None:
            raise InputRefused("header", f"{_called(name)} is missing")
        return missing
    found = whole(dataset, name)
    if found is None:
        raise InputRefused("header", f"{_called(name)} is not one whole number")
    return found


def real_numbers(dataset: Dataset, name: Name) -> tuple[float, ...] | None:
    """Return all values of a decimal element; None where absent or where one of them is no finite number."""
    try:
        numbers = _read(dataset, name, lambda value: tuple(float(each) for each in _listed(value)))
    except InputRefused:
        return None
    return numbers if numbers and all(map(math.isfinite, numbers)) else None


def terms(dataset: Dataset, name: Name) -> tuple[str, ...]:
    """Return the values of a text element in capitals, without padding; empty where absent.

    Raises
    ------
    InputRefused
        'header': the element is there but cannot be read.
    """
    return tuple(each.upper() for each in _words(dataset, name))


def term(dataset: Dataset, name: Name) -> str:
    """Return the first value of a text element in capitals, or ''.

    Raises
    ------
    InputRefused
        As `terms`.
    """
    found = terms(dataset, name)
    return found[0] if found else ""


def items(dataset: Dataset, name: Name) -> tuple[Dataset, ...]:
    """Return the items of a sequence, none where it is absent.

    Raises
    ------
    InputRefused
        'header': the sequence cannot be read, or the element is none.
    """
    value = value_of(dataset, name)
    if value is None:
        return ()
    if not isinstance(value, Sequence):
        raise InputRefused("header", f"{_called(name)} is not a sequence")
    return tuple(value)


def readable_items(dataset: Dataset, name: Name) -> tuple[Dataset, ...]:
    """Items of a sequence; none where it is absent or malformed."""
    try:
        return items(dataset, name)
    except InputRefused:  # as in `words`
        return ()


def _words(dataset: Dataset, name: Name) -> tuple[str, ...]:
    found = _read(dataset, name, _stripped)
    return found if found and any(found) else ()


def _stripped(value: Any) -> tuple[str, ...]:  # noqa: ANN401
    return tuple(str(each).strip(" \0\t\r\n") for each in _listed(value) if each is not None)


def _listed(value: Any) -> list[Any]:  # noqa: ANN401
    if isinstance(value, Sequence):
        raise TypeError("a sequence has no values")
    return list(value) if isinstance(value, MultiValue | list | tuple) else [value]


def _read(dataset: Dataset, name: Name, shape: Callable[[Any], _T]) -> _T | None:
    """Value of an element, shaped; None where it is absent."""
    tag = _tag_of(name)
    if tag not in dataset:
        return None
    try:
        with quiet_library():
            value = dataset[tag].value
            return None if value is None else shape(value)
    except Exception:
        # The library raises many kinds on malformed values, some with the value in their text.
        raise InputRefused("header", f"{_called(name)} cannot be read") from None


@functools.cache
def _tag_of(name: Name) -> BaseTag:
    number = tag_for_keyword(name) if isinstance(name, str) else name
    if number is None:
        raise KeyError(f"no element has the keyword {name}")
    return Tag(number)


def _called(name: Name) -> str:
    return name if isinstance(name, str) else f"element {_tag_of(name)}"
