"""Delivered copies: each original matched to what the archive returned, by what headers say and never by pixels."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Hashable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import TypeAlias

from safecheck.dicom.expectations import Expectation, expectations
from safecheck.dicom.instance import Instance

__all__ = ["WAYS", "Matching", "Pair", "Unmatched", "match"]

_STEP_MM = 0.01
_NO_COPY = "no delivered copy fits"
_NO_ORIGINAL = "no original fits"


@dataclass(frozen=True, slots=True)
class Pair:
    """An original and the copy of it that was delivered."""

    original: Instance
    delivered: Instance
    how: str
    """One of `WAYS`."""

    @property
    def facts(self) -> tuple[Expectation, ...]:
        """What the delivered header says beside what the standard asks."""
        return expectations(self.original, self.delivered)


@dataclass(frozen=True, slots=True)
class Unmatched:
    """An instance of either side without its other."""

    instance: Instance
    why: str
    """A short sentence."""


@dataclass(frozen=True, slots=True)
class Matching:
    """Every instance of both sides stands in exactly one of the three."""

    pairs: tuple[Pair, ...]
    unmatched_originals: tuple[Unmatched, ...]
    unmatched_delivered: tuple[Unmatched, ...]


_Keys: TypeAlias = Callable[[Instance], Iterable[Hashable]]


@dataclass(frozen=True, slots=True)
class _Way:
    """One way to match: what either side can be found by; none where an instance lacks it."""

    name: str
    of_original: _Keys
    of_delivered: _Keys
    final: bool = False
    """A copy that names its original in this way is matched in no other."""


def match(originals: Iterable[Instance], delivered: Iterable[Instance]) -> Matching:
    """Match originals and delivered copies.

    A pair is made where, in one way, exactly one original and one copy fit each other; where more fit, none is
    chosen. Patient and study must agree wherever both sides name them, and rows, columns and number of frames must
    be equal.

    Parameters
    ----------
    originals
        Of the input.
    delivered
        As the archive returned them, gathered with lossy sources allowed.

    Returns
    -------
    Matching
        Pairs and unmatched originals in the order of the originals, unmatched copies in their own.
    """
    work = _Work(tuple(originals), tuple(delivered))
    for way in _WAYS:
        work.try_way(way)
    pairs = tuple(
        Pair(work.left[o], work.right[d], how) for o, (d, how) in sorted(work.matched.items(), key=lambda each: each[0])
    )
    return Matching(
        pairs,
        tuple(Unmatched(work.left[o], work.why_left.get(o, _NO_COPY)) for o in sorted(work.open_left)),
        tuple(
            Unmatched(each, work.why_right.get(d, _NO_ORIGINAL))
            for d, each in enumerate(work.right)
            if d not in work.taken
        ),
    )


@dataclass(slots=True)
class _Work:
    """State of a matching; instances are meant by their place on their side."""

    left: tuple[Instance, ...]
    right: tuple[Instance, ...]
    matched: dict[int, tuple[int, str]] = field(default_factory=dict)
    taken: set[int] = field(default_factory=set)
    settled: set[int] = field(default_factory=set)
    """Copies for which no further way is tried."""
    why_left: dict[int, str] = field(default_factory=dict)
    why_right: dict[int, str] = field(default_factory=dict)
    open_left: set[int] = field(init=False)

    def __post_init__(self) -> None:
        """Begin with every original open."""
        self.open_left = set(range(len(self.left)))

    def try_way(self, way: _Way) -> None:
        """Pair what fits in one way, and note why the rest of what it touches does not."""
        fitting = _Edges()
        for o, d in self._meetings(way):
            contradiction = _contradiction(self.left[o], self.right[d])
            if contradiction is None:
                fitting.add(o, d)
            else:
                self._note(o, d, f"{contradiction}, by {way.name}")
            if way.final:
                self.settled.add(d)
        for o, copies in fitting.of_left.items():
            if all(len(side) == 1 for side in (copies, *(fitting.of_right[d] for d in copies))):
                self._pair(o, min(copies), way.name)
                continue
            for copy in copies:
                self._note(o, copy, f"more than one fits, by {way.name}")

    def _meetings(self, way: _Way) -> Iterator[tuple[int, int]]:
        """Open originals and copies that share a key."""
        index: dict[Hashable, list[int]] = defaultdict(list)
        for d, each in enumerate(self.right):
            if d not in self.taken and d not in self.settled:
                for key in set(way.of_delivered(each)):
                    index[key].append(d)
        for o in sorted(self.open_left):
            found = {d for key in set(way.of_original(self.left[o])) for d in index.get(key, ())}
            yield from ((o, d) for d in sorted(found))

    def _note(self, o: int, d: int, why: str) -> None:
        self.why_left.setdefault(o, why)
        self.why_right.setdefault(d, why)

    def _pair(self, o: int, d: int, how: str) -> None:
        self.matched[o] = d, how
        self.taken.add(d)
        self.open_left.discard(o)


@dataclass(slots=True)
class _Edges:
    """Which originals and copies fit each other."""

    of_left: dict[int, set[int]] = field(default_factory=lambda: defaultdict(set))
    of_right: dict[int, set[int]] = field(default_factory=lambda: defaultdict(set))

    def add(self, o: int, d: int) -> None:
        """Add one fit."""
        self.of_left[o].add(d)
        self.of_right[d].add(o)


def _names_study(each: Instance) -> bool:
    # A study that the file does not name goes by the input's pseudonym.
    return each.study != each.input


def _names_patient(each: Instance) -> bool:
    return each.patient != each.study


def _contradiction(original: Instance, delivered: Instance) -> str | None:
    """Why two that meet are no pair."""
    sides = (original, delivered)
    if all(map(_names_patient, sides)) and original.patient != delivered.patient:
        return "another patient"
    if all(map(_names_study, sides)) and original.study != delivered.study:
        return "another study"
    if _size(original) != _size(delivered):
        return "another number of rows, columns or frames"
    return None


def _size(each: Instance) -> tuple[int, int, int]:
    return each.rows, each.columns, each.frames


def _own_uid(each: Instance) -> Sequence[Hashable]:
    return (each.uid,) if each.uid else ()


def _source_uids(each: Instance) -> Sequence[Hashable]:
    return each.source_uids


def _series_of(each: Instance) -> Iterator[Hashable]:
    """A series by its own name, and by study and number where the archive gave it a new UID."""
    if each.series != each.study:
        yield each.series
    if _names_study(each) and each.series_number is not None:
        yield each.study, each.series_number


def _places(each: Instance, reach: int) -> Iterator[tuple[Hashable, int]]:
    """Series and position in steps of 0.01 mm, with that many steps around it."""
    position = each.origin.slice_position_mm
    if position is not None:
        step = round(position / _STEP_MM)
        yield from ((series, step + by) for series in _series_of(each) for by in range(-reach, reach + 1))


def _numbered_places(each: Instance, reach: int) -> Iterator[Hashable]:
    if each.instance_number is not None:
        yield from ((place, each.instance_number) for place in _places(each, reach))


def _numbers(each: Instance) -> Iterator[Hashable]:
    if each.instance_number is not None:
        yield from ((series, each.instance_number, each.origin.modality) for series in _series_of(each))


_WAYS = (
    _Way("source image sequence", _own_uid, _source_uids, final=True),
    _Way("same instance UID", _own_uid, _own_uid, final=True),
    # Original and copy may both be derived from an image that neither side holds.
    _Way("same source image", _source_uids, _source_uids),
    _Way("geometry and numbers", lambda each: _numbered_places(each, 0), lambda each: _numbered_places(each, 1)),
    _Way("geometry", lambda each: _places(each, 0), lambda each: _places(each, 1)),
    _Way("series and instance number", _numbers, _numbers),
)
WAYS: tuple[str, ...] = tuple(way.name for way in _WAYS)
"""In the order in which they are tried; the surer come first."""
