"""Figures as text: equal decimals down a column, so that their points stand below each other."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence

__all__ = [
    "NONE",
    "aligned",
    "aligned_beside",
    "bytes_text",
    "count",
    "figure",
    "header_ratio",
    "joined",
    "listed",
    "percent",
    "plural",
    "rounded_time",
    "signed",
    "unit_after",
]

NONE = "–"
"""Stands where there is no value."""
_MINUS = "\u2212"


def decimals_for(values: Iterable[float], most: int = 4) -> int:
    """Decimals that give the largest value 3 significant digits and the smallest 2, within reason."""
    sizes = [abs(value) for value in values if value]
    if not sizes:
        return 0
    for_largest = 2 - math.floor(math.log10(max(sizes)))
    for_least = 1 - math.floor(math.log10(min(sizes)))
    return min(max(for_largest, min(for_least, for_largest + 2), 0), most)


def signed(text: str) -> str:
    """Replace the hyphen by a minus sign."""
    return text.replace("-", _MINUS)


def aligned(values: Sequence[float | None], decimals: int | None = None) -> tuple[str, ...]:
    """Write a column of figures with equal decimals; a value too small for them says so instead of being 0."""
    known = [value for value in values if value is not None]
    places = decimals_for(known) if decimals is None else decimals
    return tuple(_written(value, places) for value in values)


def aligned_beside(values: Sequence[float | None], bound: float, most: int = 12) -> tuple[str, ...]:
    """Write a column of figures with decimals enough that each shows on which side of a bound it lies."""
    known = [value for value in values if value is not None]
    places = decimals_for(known)
    while places < most and not all(_same_side(value, bound, places) for value in known):
        places += 1
    return aligned(values, places)


def _same_side(value: float, bound: float, places: int) -> bool:
    """Whether rounding leaves a value, and its size, above, at or below the bound as it is."""
    written = round(value, places)
    return all(
        _order(found, bound) == _order(full, bound) for found, full in ((written, value), (abs(written), abs(value)))
    )


def _order(value: float, bound: float) -> int:
    """-1 below, 0 equal, 1 above."""
    return (value > bound) - (value < bound)


def header_ratio(text: str) -> str:
    """Shorten the decimal numbers of a header's text to 6 significant digits."""
    return re.sub(r"\d+\.\d+", lambda found: f"{float(found.group()):.6g}", text)


def unit_after(unit: str) -> str:
    """Return a unit as it stands after a figure; a figure without unit carries none."""
    return "" if unit == "1" else f" {unit}"


def _written(value: float | None, places: int) -> str:
    """One figure; None is a dash."""
    if value is None:
        return NONE
    text = f"{value:,.{places}f}"
    if value and not float(text.replace(",", "")):
        return f"< {10**-places:.{places}f}" if value > 0 else f"> {_MINUS}{10**-places:.{places}f}"
    return signed(text)


def figure(value: float | None, digits: int = 3) -> str:
    """One figure on its own, to about `digits` significant digits; whole numbers in full."""
    if value is None:
        return NONE
    if value == int(value) and abs(value) < 1e15:
        return signed(f"{int(value):,}")
    places = max(digits - 1 - math.floor(math.log10(abs(value))), 0)
    return signed(f"{value:,.{places}f}".rstrip("0").rstrip(".") if places else f"{value:,.0f}")


def percent(value: float | None) -> str:
    """A percentage on its own, with its sign."""
    return NONE if value is None else f"{figure(value)} %"


def count(number: int | None) -> str:
    """A count, thousands separated."""
    return NONE if number is None else signed(f"{number:,}")


def plural(number: int, one: str, many: str = "") -> str:
    """'1 study', '2 studies'."""
    return f"{count(number)} {one if number == 1 else many or one + 's'}"


def joined(parts: Sequence[str], last: str = "and") -> str:
    """'a', 'a and b', 'a, b and c'."""
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} {last} {parts[-1]}"


def listed(names: Sequence[str]) -> str:
    """'a, b and c'; 'a, b; c' where a name itself holds a comma."""
    return "; ".join(names) if any("," in name for name in names) else joined(names)


def bytes_text(size: float | None) -> str:
    """Size in decimal units, as disks are sold: kB, MB, GB, TB."""
    if size is None:
        return NONE
    for unit, scale in (("TB", 1e12), ("GB", 1e9), ("MB", 1e6), ("kB", 1e3)):
        if abs(size) >= scale:
            return f"{figure(size / scale)} {unit}"
    return f"{size:,.0f} bytes"


def rounded_time(seconds: float) -> str:
    """A duration in the unit that suits it."""
    if seconds < 90:
        return f"{figure(seconds, 2)} s"
    return f"{figure(seconds / 60, 2)} min" if seconds < 5400 else f"{figure(seconds / 3600, 2)} h"
