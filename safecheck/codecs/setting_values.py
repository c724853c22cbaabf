"""Values of settings as a person writes them in a plan: checked, and said again as they were written."""

from __future__ import annotations

import json
import math
from collections.abc import Sequence

__all__ = ["choice", "number", "whole"]


def number(name: str, value: object, lowest: float, highest: float, *, remark: str = "") -> float:
    """Take a number within a range, both ends included.

    Parameters
    ----------
    name
        Of the setting.
    value
        As given; a whole number stands for the float of its value.
    lowest, highest
        Range.
    remark
        What is to be said of a value outside it, before what was expected.

    Raises
    ------
    ValueError
        With what was found and what was expected.
    """
    # Not a number falls outside every range.
    if isinstance(value, bool) or not isinstance(value, int | float) or not lowest <= value <= highest:
        raise ValueError(
            f"{name} is {_written(value)}{remark}, expected a number from {_plain(lowest)} to {_plain(highest)}"
        )
    return float(value)


def whole(name: str, value: object, lowest: int, highest: int) -> int:
    """Take a whole number within a range, both ends included; 85.0 stands for 85.

    Parameters
    ----------
    name
        Of the setting.
    value
        As given.
    lowest, highest
        Range.

    Raises
    ------
    ValueError
        With what was found and what was expected.
    """
    if isinstance(value, float) and value.is_integer():
        value = int(value)
    if isinstance(value, bool) or not isinstance(value, int) or not lowest <= value <= highest:
        raise ValueError(f"{name} is {_written(value)}, expected a whole number from {lowest} to {highest}")
    return value


def choice(name: str, value: object, choices: Sequence[str | int]) -> str | int:
    """Take one of the values that a setting knows; 8.0 stands for 8.

    Raises
    ------
    ValueError
        With what was found and what was expected.
    """
    for known in choices:
        if value == known and not isinstance(value, bool):
            return known
    raise ValueError(f"{name} is {_written(value)}, expected one of {', '.join(map(_written, choices))}")


def _written(value: object) -> str:
    """A value as JSON and TOML write it; not a number and infinity by name."""
    if isinstance(value, float):
        return "not a number" if math.isnan(value) else _plain(value)
    return json.dumps(value, ensure_ascii=False, default=str)


def _plain(value: float) -> str:
    """A number without an exponent where it needs none."""
    if math.isinf(value):
        return "infinite"
    return str(int(value)) if value == int(value) and abs(value) < 1e15 else f"{value:.12g}"
