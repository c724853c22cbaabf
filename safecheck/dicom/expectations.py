"""What a delivered header says of its loss, beside what the standard asks (PS3.3 C.7.6.1.1.2, C.7.6.1.1.5)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from safecheck.dicom.instance import Instance
from safecheck.dicom.syntaxes import Loss, syntax_named
from safecheck.dicom.terms import NOT_A_NUMBER

__all__ = ["Expectation", "expectations"]

_ABSENT = "absent"


@dataclass(frozen=True, slots=True)
class Expectation:
    """One attribute of a delivered copy."""

    name: str
    found: str
    """As the header has it, in known terms; never a raw UID."""
    asked: str
    """What the standard asks of such a copy."""
    agrees: bool


def expectations(
    original: Instance, delivered: Instance, *, pixels_differ: bool | None = None
) -> tuple[Expectation, ...]:
    """Hold a delivered header against the standard.

    Parameters
    ----------
    original
        Of the pair.
    delivered
        Of the pair.
    pixels_differ
        Whether decoded pixels differ from the original's, once measured: a loss that no header shows. None if
        not measured.

    Returns
    -------
    tuple of Expectation
        Flag, ratio, method, Image Type value 1, SOP Instance UID.
    """
    again = bool(pixels_differ) or (delivered.origin.history.lossy and not _kept_loss(original, delivered))
    return (
        _flag(original, delivered, again),
        _ratio(original, delivered, again),
        _method(original, delivered, again),
        _image_type(original, delivered, again),
        _identity(original, delivered, again),
    )


def _kept_loss(original: Instance, delivered: Instance) -> bool:
    """Whether the copy is lossy by its original's history alone: same record, and no lossy step of its own shown."""
    before, after = original.origin, delivered.origin
    untouched = before.source_syntax == after.source_syntax
    reversible = syntax_named(after.source_syntax).loss is Loss.REVERSIBLE
    record = [(each.history.ratios, each.history.methods) for each in (before, after)]
    return before.history.lossy and (untouched or reversible) and record[0] == record[1]


def _flag(original: Instance, delivered: Instance, again: bool) -> Expectation:
    found = delivered.origin.history.declared
    name = "Lossy Image Compression (0028,2110)"
    if again or original.origin.history.declared == "01":
        return Expectation(name, found or _ABSENT, "01", found == "01")
    return Expectation(name, found or _ABSENT, "00 or absent", found in ("", "00"))


def _appended(
    name: str, before: tuple[str, ...], after: tuple[str, ...], asked: str, fits: Callable[[str], bool], required: bool
) -> Expectation:
    """A record of successive steps: each new one is appended, never put in the place of an earlier."""
    found = "\\".join(after) or _ABSENT
    whole = f"{asked}, after those of the original" if before else asked
    if not after and not before and not required:
        return Expectation(name, found, f"{whole} (may be absent)", True)
    added = len(after) > len(before) and after[: len(before)] == before and fits(after[-1])
    return Expectation(name, found, whole if required or before else f"{whole} (may be absent)", added)


def _kept(name: str, before: tuple[str, ...], after: tuple[str, ...]) -> Expectation:
    asked = "\\".join(before) or _ABSENT
    return Expectation(name, "\\".join(after) or _ABSENT, f"as the original: {asked}", after == before)


def _requires_record(delivered: Instance) -> bool:
    """Whether ratio (DX family) or ratio and method (enhanced images; from memory) stand with Type 1C."""
    return delivered.object_class.startswith(("Digital ", "Enhanced ", "Legacy Converted Enhanced "))


def _ratio(original: Instance, delivered: Instance, again: bool) -> Expectation:
    name = "Lossy Image Compression Ratio (0028,2112)"
    before, after = original.origin.history.ratios, delivered.origin.history.ratios
    if not again:
        return _kept(name, before, after)
    return _appended(name, before, after, "a ratio", _is_number, _requires_record(delivered))


def _is_number(ratio: str) -> bool:
    return ratio not in ("", NOT_A_NUMBER)


def _method(original: Instance, delivered: Instance, again: bool) -> Expectation:
    name = "Lossy Image Compression Method (0028,2114)"
    before, after = original.origin.history.methods, delivered.origin.history.methods
    if not again:
        return _kept(name, before, after)
    term = syntax_named(delivered.origin.source_syntax).method
    required = _requires_record(delivered) and not delivered.object_class.startswith("Digital ")
    return _appended(name, before, after, term or "a method", lambda found: found == term or not term, required)


def _image_type(original: Instance, delivered: Instance, again: bool) -> Expectation:
    found = "DERIVED" if delivered.derived else "not DERIVED"
    name = "Image Type value 1 (0008,0008)"
    if again:
        return Expectation(name, found, "DERIVED", delivered.derived)
    asked = "DERIVED" if original.derived else "not DERIVED"
    return Expectation(name, found, f"as the original: {asked}", delivered.derived == original.derived)


def _identity(original: Instance, delivered: Instance, again: bool) -> Expectation:
    new = bool(delivered.uid) and delivered.uid != original.uid
    found = "new" if new else ("as the original" if delivered.uid else _ABSENT)
    name = "SOP Instance UID (0008,0018)"
    if again:
        return Expectation(name, found, "new", new)
    # A reversible copy may keep the UID or take a new one.
    return Expectation(name, found, "new or as the original", bool(delivered.uid))
