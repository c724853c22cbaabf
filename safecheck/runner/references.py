"""The reference frame of each series: where one setting is found that then serves every frame of the series.

Which frame it is depends on the inputs alone: the middle one of those to be assessed, in order along the normal of the
slices. Where it is refused, or where a codec does not take it, the next nearest to the middle stands in.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable
from contextlib import AbstractContextManager
from typing import Protocol, TypeAlias

from safecheck.dicom.instance import Instance
from safecheck.evaluation import Assignment, SeriesDial, find_dials
from safecheck.frames import Frame

__all__ = [
    "REFERENCES",
    "FrameReader",
    "OpenInstance",
    "Reference",
    "SeriesKey",
    "find_series_dials",
    "references_of",
    "series_of",
]

REFERENCES = 16
"""Frames nearest to the middle of a series that are tried; where none of them can be read, no setting is found."""

Reference: TypeAlias = tuple[Instance, int]
"""An instance and a frame number from 1."""
SeriesKey: TypeAlias = tuple[str, str]
"""Pseudonyms of study and series."""

_NONE_READ = f"none of the {REFERENCES} frames nearest to the middle of the series can be read"


class FrameReader(Protocol):
    """An open instance."""

    def frame(self, number: int) -> Frame:
        """Read one frame, counted from 1.

        Raises
        ------
        InputRefused
            If its pixel path is doubtful.
        """
        ...


class OpenInstance(Protocol):
    """Opens an instance for reading frames one at a time."""

    def __call__(self, instance: Instance, /) -> AbstractContextManager[FrameReader]:
        """Open; raises InputRefused if it cannot be read."""
        ...


def series_of(instance: Instance) -> SeriesKey:
    """Series of an instance."""
    return instance.study, instance.series


def references_of(instances: Iterable[Instance]) -> dict[SeriesKey, tuple[Reference, ...]]:
    """Give the frames of each series that may serve as its reference, the middle one first.

    Parameters
    ----------
    instances
        The originals to assess, in any order.

    Returns
    -------
    dict
        Series -> at most `REFERENCES` frames, nearest to the middle first, of two as near the earlier one. Frames stand
        in order of slice position along the normal, where there is one, then instance number, then frame number.
    """
    ordered = sorted(instances, key=lambda each: (series_of(each), _place(each)))
    return {key: _nearest(list(series)) for key, series in itertools.groupby(ordered, series_of)}


def _place(instance: Instance) -> tuple[bool, float, int, str]:
    """Where an instance stands in its series."""
    position = instance.origin.slice_position_mm
    number = -1 if instance.instance_number is None else instance.instance_number
    return position is None, position or 0.0, number, instance.input


def _nearest(series: list[Instance]) -> tuple[Reference, ...]:
    """Frames of a series in order, from the middle outwards."""
    frames = [(instance, number) for instance in series for number in range(1, instance.frames + 1)]
    middle = (len(frames) - 1) // 2
    near = sorted(range(len(frames)), key=lambda index: (abs(index - middle), index))
    return tuple(frames[index] for index in near[:REFERENCES])


def find_series_dials(
    references: Iterable[Reference], assignment: Assignment, open_instance: OpenInstance
) -> dict[str, SeriesDial]:
    """Find the setting of every candidate that needs one for a series.

    Parameters
    ----------
    references
        Of the series, from `references_of`.
    assignment
        What is done to every frame.
    open_instance
        Opens an instance.

    Returns
    -------
    dict
        Name of each candidate by ratio per series -> its setting, or why there is none. A function of the images alone.
    """
    found = {candidate.name: SeriesDial(None, _NONE_READ) for candidate in assignment.per_series}
    for instance, number in references:
        left = [candidate for candidate in assignment.per_series if found[candidate.name].settings is None]
        if not left:
            break
        try:
            with open_instance(instance) as reader:
                frame = reader.frame(number)
        except Exception:
            # Whatever is wrong with the frame, its own task says why it is left out.
            continue
        found |= find_dials(frame, left)
    return found
