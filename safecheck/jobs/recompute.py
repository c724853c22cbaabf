"""Rows of a dossier computed again from the images, a seeded sample of frames, and held against the tables."""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, TypeAlias

from safecheck.dicom.instance import Instance
from safecheck.dicom.reader import open_instance
from safecheck.evaluation import Assignment, evaluate
from safecheck.jobs.inputs import Inputs
from safecheck.jobs.series import SeriesAssignments
from safecheck.record.rows import TABLES, columns_of
from safecheck.record.tables import TableReader

__all__ = ["ABSOLUTE", "RELATIVE", "Recomputed", "recompute"]

RELATIVE, ABSOLUTE = 1e-9, 1e-12
"""Figures computed again agree within these, whatever the processor."""
_NAMED_BY = {
    "measures": ("role", "candidate"),
    "windows": ("role", "candidate", "window"),
    "regions": ("role", "candidate", "region"),
}
"""Columns that tell the rows of one frame apart."""
_TEXT_OF_CODECS = frozenset({"codec_version", "encodes"})
"""Columns that another library version changes without changing a figure."""

_Frame: TypeAlias = tuple[str, int]
"""Instance pseudonym and frame number."""
_Row: TypeAlias = dict[str, Any]


@dataclass(frozen=True, slots=True)
class Recomputed:
    """What came of it."""

    drawn: int
    """Frames computed again."""
    frames: int
    """Frames of the dossier."""
    missing: int
    """Instances of the dossier that are not among the images given."""
    differences: tuple[str, ...]
    """One sentence each."""


def recompute(
    tables: Mapping[str, TableReader], inputs: Inputs, assignment: Assignment, *, frames: int, seed: int
) -> Recomputed:
    """Compute a seeded sample of frames again and hold every row of theirs against its table.

    Parameters
    ----------
    tables
        Of the dossier, by name.
    inputs
        Images of the run, gathered again.
    assignment
        What the run did to every frame.
    frames
        How many frames, at most.
    seed
        Another seed draws other frames.
    """
    every = _frames_of(tables["measures"])
    drawn = sorted(every, key=lambda each: hashlib.sha256(f"{seed}/{each[0]}/{each[1]}".encode()).digest())[:frames]
    rows = {table: _rows_of(tables[table], frozenset(drawn)) for table in _NAMED_BY}
    known = {each.instance: each for each in inputs.assessed}
    assignments = SeriesAssignments(assignment, inputs.assessed)
    differences: list[str] = []
    for instance, number in drawn:
        if instance not in known:
            continue
        found = {table: rows[table].get((instance, number), []) for table in _NAMED_BY}
        copy = inputs.pairs.get(known[instance].input)
        own = assignments.of(known[instance])
        differences += _differing(known[instance], copy, number, own, found)
    missing = {instance for instance, _ in every} - set(known)
    done = sum(instance in known for instance, _ in drawn)
    return Recomputed(done, len(every), len(missing), tuple(differences))


def _frame_column(reader: TableReader) -> Iterator[_Frame]:
    """Yield the frame of each row."""
    codes, names = reader.codes("instance")
    for code, number in zip(codes.tolist(), reader.numbers("frame").tolist(), strict=True):
        yield names[code], int(number)


def _frames_of(reader: TableReader) -> set[_Frame]:
    return set(_frame_column(reader))


def _rows_of(reader: TableReader, wanted: frozenset[_Frame]) -> dict[_Frame, list[_Row]]:
    """Rows of the frames wanted: a table may be far larger than they are."""
    places = [(index, frame) for index, frame in enumerate(_frame_column(reader)) if frame in wanted]
    columns = [column.name for column in columns_of(TABLES[reader.table])]
    rows: dict[_Frame, list[_Row]] = {}
    for (_, frame), row in zip(places, reader.at([index for index, _ in places], columns), strict=True):
        rows.setdefault(frame, []).append(row)
    return rows


def _differing(
    instance: Instance, copy: Instance | None, number: int, assignment: Assignment, rows: Mapping[str, list[_Row]]
) -> Iterator[str]:
    """Yield what differs between a frame's rows and the same rows computed again."""
    with contextlib.ExitStack() as stack:
        frame = stack.enter_context(open_instance(instance)).frame(number)
        delivered = stack.enter_context(open_instance(copy)).frame(number) if copy else None
        full = any(row["role"] in ("planted", "repeat") for row in rows["measures"])
        again = evaluate(frame, assignment, full_controls=full, delivered=delivered)
    for table, names in _NAMED_BY.items():
        place = f"{table}, instance {instance.instance}, frame {number}"
        computed = [dataclasses.asdict(row) for row in getattr(again, table)]
        for sentence in _compared(rows[table], computed, names):
            yield f"{place}, {sentence}"


def _compared(rows: list[_Row], computed: list[_Row], names: tuple[str, ...]) -> Iterator[str]:
    """Yield the rows and values in which two lists of rows differ."""
    expected = {tuple(row[name] for name in names): row for row in computed}
    seen = set()
    for row in rows:
        key = tuple(row[name] for name in names)
        words = ", ".join(key[1:])
        if key in seen or key not in expected:
            yield f"{words}: {'the row stands there twice' if key in seen else 'no such row comes out'}"
            continue
        seen.add(key)
        for name, value in row.items():
            if name not in _TEXT_OF_CODECS and not _agree(value, expected[key][name]):
                yield f"{words}: {name} is {value} in the table and {expected[key][name]} computed again"
    for key in expected.keys() - seen:
        yield f"{', '.join(key[1:])}: the row is missing from the table"


def _agree(one: object, other: object) -> bool:
    """Whether two values of a cell are the same within the tolerance."""
    if isinstance(one, float) and isinstance(other, float):
        return math.isclose(one, other, rel_tol=RELATIVE, abs_tol=ABSOLUTE)
    return one == other
