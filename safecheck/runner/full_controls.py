"""Which frames carry the controls that only a seeded share of frames carries.

The choice depends on the inputs' content, the site key and the candidates alone. In each stratum frames that can carry
the over-compressed control come first, and every codec of the run finds a frame that it takes where there is one.
"""

from __future__ import annotations

import hmac
import math
from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass

from safecheck.codecs.base import Codec
from safecheck.codecs.registry import available, rated
from safecheck.dicom.instance import Instance
from safecheck.evaluation import Assignment
from safecheck.frames import PixelFormat

__all__ = ["ROOM_SIDE", "choose_full_controls", "codecs_of"]

ROOM_SIDE = 64
"""Rows and columns from which a code can be made much smaller than any candidate's before headers are all of it."""


@dataclass(frozen=True, slots=True, order=True)
class _Ranked:
    """A frame, in the order in which frames are drawn."""

    small: bool
    """Below `ROOM_SIDE` on a side: drawn last."""
    refusing: int
    """Codecs of the run that do not take it."""
    drawn: bytes
    """Keyed hash."""
    input: str
    number: int
    taking: frozenset[int]
    """Positions of the codecs that take it."""


def codecs_of(assignment: Assignment) -> tuple[Codec, ...]:
    """Each codec of the candidates as it first stands among them, of those that work on this machine."""
    first = {candidate.codec: candidate for candidate in reversed(assignment.candidates)}
    return tuple(rated(name, **dict(first[name].settings)) for name in sorted(first) if available(name))


def choose_full_controls(
    instances: Iterable[Instance],
    codecs: Sequence[Codec],
    key: bytes,
    share_percent: float,
    seed: int,
    without: Collection[tuple[str, int]] = (),
) -> frozenset[tuple[str, int]]:
    """Choose frames for the full controls, stratum by stratum.

    Parameters
    ----------
    instances
        The originals to assess, in any order.
    codecs
        Of the run, from `codecs_of`.
    key
        Site key.
    share_percent
        Share of the frames of each stratum, 0 to 100, rounded up; at least one frame, and at least one that each codec
        takes, where it takes any. A larger share keeps the frames of a smaller one.
    seed
        Another seed chooses other frames.
    without
        (input pseudonym, frame number) of frames known to be refused, which can carry nothing.

    Returns
    -------
    frozenset of tuple
        (input pseudonym, frame number from 1).
    """
    strata: dict[str, list[_Ranked]] = {}
    for instance in instances:
        small = min(instance.rows, instance.columns) < ROOM_SIDE
        taking = _taking(instance, codecs)
        ranked = strata.setdefault(instance.origin.stratum, [])
        for number in range(1, instance.frames + 1):
            message = f"full controls\0{seed}\0{instance.input}\0{number}"
            drawn = hmac.digest(key, message.encode(), "sha256")
            ranked.append(_Ranked(small, len(codecs) - len(taking), drawn, instance.input, number, taking))
    chosen = (each for ranked in strata.values() for each in _drawn(ranked, len(codecs), share_percent, without))
    return frozenset((each.input, each.number) for each in chosen)


def _drawn(
    ranked: list[_Ranked], codecs: int, share_percent: float, without: Collection[tuple[str, int]]
) -> list[_Ranked]:
    """Frames of one stratum: first those that the codecs are owed, then the least keyed hashes up to the share."""
    # 5 % of 20 frames is one frame, whatever the last binary digit of the product says.
    wanted = max(1, math.ceil(len(ranked) * share_percent / 100 - 1e-9))
    usable = [each for each in ranked if (each.input, each.number) not in without]
    owed = {}
    for codec in range(codecs):
        first = min((each for each in usable if codec in each.taking), default=None)
        if first is not None:
            owed[first.input, first.number] = first
    rest = [each for each in usable if (each.input, each.number) not in owed]
    rest.sort(key=lambda each: (each.small, each.drawn))
    return [*owed.values(), *rest[: max(0, wanted - len(owed))]]


def _taking(instance: Instance, codecs: Sequence[Codec]) -> frozenset[int]:
    """Positions of the codecs that take an instance's frames, as far as its header tells; its sign is not known yet."""
    grey = instance.photometric in ("MONOCHROME1", "MONOCHROME2")
    try:
        form = PixelFormat(instance.bits_allocated, instance.bits_stored, False, "MONOCHROME2" if grey else "RGB")
    except ValueError:  # the pixel path refuses such frames
        return frozenset()
    shape = (instance.rows, instance.columns)
    return frozenset(place for place, codec in enumerate(codecs) if codec.refuses(form, shape) is None)
