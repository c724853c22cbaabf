"""What was done to the frames of one series: the assignment with that series' own settings, found again from images."""

from __future__ import annotations

from collections.abc import Iterable

from safecheck.dicom.instance import Instance
from safecheck.dicom.reader import open_instance
from safecheck.evaluation import Assignment
from safecheck.runner.references import SeriesKey, find_series_dials, references_of, series_of

__all__ = ["SeriesAssignments"]


class SeriesAssignments:
    """Assignments by series; the same for all where no candidate needs a setting for a series.

    Parameters
    ----------
    assignment
        What is done to every frame.
    instances
        All originals to assess.
    """

    def __init__(self, assignment: Assignment, instances: Iterable[Instance]) -> None:
        self._assignment = assignment
        self._references = references_of(instances) if assignment.per_series else {}
        self._found: dict[SeriesKey, Assignment] = {}

    def of(self, instance: Instance) -> Assignment:
        """What is done to the frames of an instance."""
        key = series_of(instance)
        if key not in self._references:
            return self._assignment
        if key not in self._found:
            dials = find_series_dials(self._references[key], self._assignment, open_instance)
            self._found[key] = self._assignment.in_series(dials)
        return self._found[key]
