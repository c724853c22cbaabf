"""Rows by candidate and stratum."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from safecheck.record.place import Place
from safecheck.record.tables import TableReader

__all__ = ["BRACKET", "PLACE_COLUMNS", "Groups", "Indices", "place_at", "places_at"]

Indices = npt.NDArray[np.int64]
"""(n,) row numbers of a table."""

BRACKET = "bracket"
"""Role of the neighbouring setting: it goes by its candidate's name, and speaks for it in no figure."""

PLACE_COLUMNS = ("patient", "study", "series", "instance", "series_number", "instance_number", "frame")
"""Columns of every table of treated frames that say where."""


@dataclass(frozen=True, slots=True, eq=False)
class Groups:
    """A table of treated frames, with the rows of each role, candidate and stratum at hand."""

    reader: TableReader
    roles: tuple[str, ...]
    candidates: tuple[str, ...]
    strata: tuple[str, ...]
    role_of: Indices
    candidate_of: Indices
    stratum_of: Indices

    @classmethod
    def of(cls, reader: TableReader) -> Groups:
        """Read the three columns once."""
        role_of, roles = reader.codes("role")
        candidate_of, candidates = reader.codes("candidate")
        stratum_of, strata = reader.codes("stratum")
        return cls(reader, roles, candidates, strata, role_of, candidate_of, stratum_of)

    def of_role(self, role: str) -> Indices:
        """Rows of a role."""
        if role not in self.roles:
            return np.empty(0, np.int64)
        return np.flatnonzero(self.role_of == self.roles.index(role))

    def of_candidate(self, candidate: str) -> Indices:
        """Rows of a candidate or control, without those of a neighbouring setting."""
        return self._named(candidate, bracket=False)

    def neighbours_of(self, candidate: str) -> Indices:
        """Rows of the neighbouring settings of a candidate."""
        return self._named(candidate, bracket=True)

    def _named(self, candidate: str, *, bracket: bool) -> Indices:
        """Rows that go by a name."""
        if candidate not in self.candidates:
            return np.empty(0, np.int64)
        named = self.candidate_of == self.candidates.index(candidate)
        neighbour = self.role_of == (self.roles.index(BRACKET) if BRACKET in self.roles else -1)
        return np.flatnonzero(named & (neighbour == bracket))

    def by_stratum(self, rows: Indices) -> Iterator[tuple[str, Indices]]:
        """Split rows by stratum; strata without any are left out."""
        of_rows = self.stratum_of[rows]
        for code in np.unique(of_rows):
            yield self.strata[code], rows[of_rows == code]


def places_at(reader: TableReader, rows: list[int], *, row: str = "", column: str = "") -> list[Place]:
    """Places of some rows; `row` and `column` name the columns that hold the place within the frame."""
    wanted = list(PLACE_COLUMNS)
    if reader.table == "measures":
        wanted.append("slice_position_mm")
    within = [name for name in (row, column) if name]
    found = reader.at(rows, [*wanted, *within])
    return [
        Place(
            **{name: entry[name] for name in wanted},
            row=entry[row] if row else None,
            column=entry[column] if column else None,
        )
        for entry in found
    ]


def place_at(reader: TableReader, index: int, *, row: str = "", column: str = "") -> Place:
    """Place of one row."""
    return places_at(reader, [index], row=row, column=column)[0]
