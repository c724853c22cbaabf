"""Header values as plain numbers and terms, or a refusal that names the element and never its value."""

from __future__ import annotations

import math
from typing import Any

from pydicom.dataset import Dataset
from pydicom.multival import MultiValue

from safecheck.dicom.quiet import quiet_library
from safecheck.errors import InputRefused

__all__ = ["items", "real_numbers", "term", "terms", "value_of", "whole_number"]


def value_of(dataset: Dataset, keyword: str) -> Any:  # noqa: ANN401
    """Return the converted value of an element, or None where it is absent or empty.

    Raises
    ------
    InputRefused
        'header': the element is there but cannot be read.
    """
    try:
        with quiet_library():
            value = dataset.get(keyword)
    except Exception:
        # The library raises many kinds here, some with the value in their text.
        raise InputRefused("header", f"{keyword} cannot be read") from None
    return None if value is None or value in ("", b"") else value


def whole_number(dataset: Dataset, keyword: str, *, missing: int | None = None) -> int:
    """Return a single whole number.

    Raises
    ------
    InputRefused
        'header': absent with no stand-in given, several values, or not a whole number.
    """
    value = value_of(dataset, keyword)
    if value is None:
        if missing is None:
            raise InputRefused("header", f"{keyword} is missing")
        return missing
    if isinstance(value, int):
        return int(value)
    try:
        return int(str(value))
    except ValueError:
        raise InputRefused("header", f"{keyword} is not one whole number") from None


def real_numbers(dataset: Dataset, keyword: str) -> tuple[float, ...] | None:
    """Return all values of a decimal element; None where absent or where one of them is no finite number."""
    try:
        value = value_of(dataset, keyword)
    except InputRefused:
        return None
    if value is None:
        return None
    values = list(value) if isinstance(value, MultiValue | list | tuple) else [value]
    try:
        numbers = tuple(float(each) for each in values)
    except (TypeError, ValueError):
        return None
    return numbers if all(math.isfinite(number) for number in numbers) else None


def terms(dataset: Dataset, keyword: str) -> tuple[str, ...]:
    """Return the values of a text element in capitals, without padding; empty where absent."""
    value = value_of(dataset, keyword)
    if value is None:
        return ()
    values = list(value) if isinstance(value, MultiValue | list | tuple) else [value]
    return tuple(str(each).strip().upper() for each in values)


def term(dataset: Dataset, keyword: str) -> str:
    """Return the first value of a text element in capitals, or ''."""
    found = terms(dataset, keyword)
    return found[0] if found else ""


def items(dataset: Dataset, keyword: str) -> tuple[Dataset, ...]:
    """Return the items of a sequence, none where it is absent.

    Raises
    ------
    InputRefused
        'header': the sequence cannot be read.
    """
    value = value_of(dataset, keyword)
    if value is None:
        return ()
    found = tuple(value)
    if not all(isinstance(each, Dataset) for each in found):
        raise InputRefused("header", f"{keyword} is not a sequence")
    return found
