"""Transfer syntaxes: their names and what each says about loss (PS3.5 chapter 8 and 10, PS3.6 Annex A).

The JPEG XL ones (Supplement 232) are not in pydicom 3.0.2; they stand here, pydicom's tables are left alone.
"""

from __future__ import annotations

import enum
from dataclasses import dataclass
from types import MappingProxyType

from pydicom.uid import UID

__all__ = [
    "BIG_ENDIAN",
    "DEFLATED",
    "ENCAPSULATED_UNCOMPRESSED",
    "EXPLICIT",
    "IMPLICIT",
    "ROOT",
    "SYNTAXES",
    "Coding",
    "Loss",
    "Syntax",
    "syntax_named",
    "syntax_of",
]

ROOT = "1.2.840.10008.1.2"
"""Beginning of every transfer syntax UID of the standard."""
IMPLICIT = ROOT
EXPLICIT = f"{ROOT}.1"
ENCAPSULATED_UNCOMPRESSED = f"{ROOT}.1.98"
DEFLATED = f"{ROOT}.1.99"
BIG_ENDIAN = f"{ROOT}.2"


class Loss(enum.Enum):
    """What the syntax alone says."""

    REVERSIBLE = "reversible"
    IRREVERSIBLE = "irreversible"
    EITHER = "either"
    UNKNOWN = "unknown"


class Coding(enum.Enum):
    """Family of code streams, which decides how a stream is looked into."""

    NATIVE = "native"
    RLE = "RLE"
    JPEG = "JPEG"
    JPEG_LS = "JPEG-LS"
    JPEG_2000 = "JPEG 2000"
    JPEG_XL = "JPEG XL"
    VIDEO = "video"
    REFERENCED = "referenced"
    UNKNOWN = "unknown"


@dataclass(frozen=True, slots=True)
class Syntax:
    """A transfer syntax."""

    uid: str
    """Empty for one that is private or unknown."""
    name: str
    coding: Coding
    loss: Loss
    method: str = ""
    """Defined Term that (0028,2114) takes when this syntax was used with loss, or ''."""


def _native() -> list[Syntax]:
    return [_known(suffix, Coding.NATIVE, Loss.REVERSIBLE) for suffix in ("", ".1", ".1.98", ".1.99", ".2")] + [
        _known(".5", Coding.RLE, Loss.REVERSIBLE)
    ]


def _jpeg() -> list[Syntax]:
    lossless = {57, 58, 65, 66, 70}
    return [
        _known(f".4.{n}", Coding.JPEG, Loss.REVERSIBLE if n in lossless else Loss.IRREVERSIBLE, "ISO_10918_1")
        for n in (*range(50, 67), 70)
    ]


def _wavelet_and_newer() -> list[Syntax]:
    jls, j2k, ht, jxl = "ISO_14495_1", "ISO_15444_1", "ISO_15444_15", "ISO_18181_1"
    return [
        _known(".4.80", Coding.JPEG_LS, Loss.REVERSIBLE, jls),
        _known(".4.81", Coding.JPEG_LS, Loss.EITHER, jls),
        _known(".4.90", Coding.JPEG_2000, Loss.REVERSIBLE, j2k),
        _known(".4.91", Coding.JPEG_2000, Loss.EITHER, j2k),
        _known(".4.92", Coding.JPEG_2000, Loss.REVERSIBLE, j2k),
        _known(".4.93", Coding.JPEG_2000, Loss.EITHER, j2k),
        _known(".4.201", Coding.JPEG_2000, Loss.REVERSIBLE, ht),
        _known(".4.202", Coding.JPEG_2000, Loss.REVERSIBLE, ht),
        _known(".4.203", Coding.JPEG_2000, Loss.EITHER, ht),
        Syntax(f"{ROOT}.4.110", "JPEG XL Lossless", Coding.JPEG_XL, Loss.REVERSIBLE, jxl),
        # The JPEG inside keeps its own record: its loss is that of JPEG.
        Syntax(f"{ROOT}.4.111", "JPEG XL JPEG Recompression", Coding.JPEG_XL, Loss.IRREVERSIBLE, "ISO_10918_1"),
        Syntax(f"{ROOT}.4.112", "JPEG XL", Coding.JPEG_XL, Loss.EITHER, jxl),
    ]


def _moving_and_referenced() -> list[Syntax]:
    whole = [f".4.{n}" for n in range(100, 109)]
    moving = [*whole, *(f"{suffix}.1" for suffix in whole[:7]), ".7.1", ".7.2", ".7.3"]
    referenced = (".4.94", ".4.95", ".4.204", ".4.205")
    return [_known(suffix, Coding.VIDEO, Loss.IRREVERSIBLE) for suffix in moving] + [
        _known(suffix, Coding.REFERENCED, Loss.UNKNOWN) for suffix in referenced
    ]


def _known(suffix: str, coding: Coding, loss: Loss, method: str = "") -> Syntax:
    uid = UID(ROOT + suffix)
    return Syntax(str(uid), uid.name, coding, loss, method)


SYNTAXES: MappingProxyType[str, Syntax] = MappingProxyType(
    {each.uid: each for each in _native() + _jpeg() + _wavelet_and_newer() + _moving_and_referenced()}
)
"""All that are told apart, by UID."""

_UNKNOWN = Syntax("", "private or unknown syntax", Coding.UNKNOWN, Loss.UNKNOWN)
_BY_NAME = {each.name: each for each in SYNTAXES.values()}


def syntax_of(uid: str) -> Syntax:
    """Transfer syntax of a UID; one that is not known shows neither its UID nor a name."""
    return SYNTAXES.get(uid, _UNKNOWN)


def syntax_named(name: str) -> Syntax:
    """Transfer syntax by the name that an `Origin` carries."""
    return _BY_NAME.get(name, _UNKNOWN)
