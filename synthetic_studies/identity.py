"""Who and where: an invented hospital, invented patients, and UIDs that follow from a seed alone."""

from __future__ import annotations

import uuid
from dataclasses import dataclass

__all__ = ["EQUIPMENT", "HOSPITAL", "Patient", "Scope"]

HOSPITAL = "Quillhaven Hospital (invented)"
EQUIPMENT = "Invented Imaging Works"

_NAMESPACE = uuid.UUID("5f1d1c5e-6f0e-5c61-9a53-0c7f3a2b9d10")
_SMALL = ("Zero", "One", "Two", "Three", "Four", "Five", "Six", "Seven", "Eight", "Nine")
_TEENS = (
    "Ten",
    "Eleven",
    "Twelve",
    "Thirteen",
    "Fourteen",
    "Fifteen",
    "Sixteen",
    "Seventeen",
    "Eighteen",
    "Nineteen",
)
_TENS = ("Twenty", "Thirty", "Forty", "Fifty", "Sixty", "Seventy", "Eighty", "Ninety")


def _in_words(number: int) -> str:
    """0 to 99 in words, anything else in digits."""
    if not 0 <= number < 100:
        return str(number)
    if number < 20:
        return (_SMALL + _TEENS)[number]
    tens, ones = divmod(number, 10)
    return _TENS[tens - 2] + (f"-{_SMALL[ones]}" if ones else "")


@dataclass(frozen=True, slots=True)
class Patient:
    """An invented patient, known by a number."""

    number: int
    age_years: int = 50
    sex: str = "O"

    @property
    def name(self) -> str:
        """A name that nobody can take for a person's."""
        return f"Synthetic^Body {_in_words(self.number)}"

    @property
    def identifier(self) -> str:
        """Patient ID."""
        return f"SYN-{self.number:06d}"


@dataclass(frozen=True, slots=True)
class Scope:
    """What UIDs are derived from: equal scopes give equal UIDs, other options give others."""

    kind: str
    seed: int
    options: tuple[object, ...] = ()

    def uid(self, *parts: object) -> str:
        """UID under the root 2.25 (PS3.5 B.2: the decimal form of a UUID)."""
        text = "|".join(repr(part) for part in (self.kind, self.seed, *self.options, *parts))
        return f"2.25.{uuid.uuid5(_NAMESPACE, text).int}"
