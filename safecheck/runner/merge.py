"""All shards, in the order of the tasks, into the tables of the dossier."""

from __future__ import annotations

import itertools
import os
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import pyarrow as pa

from safecheck.errors import DossierError
from safecheck.record.tables import write_table
from safecheck.runner.faults import resumable
from safecheck.runner.shards import SHARD_TABLES, LeftOut, Paper, paper_of, read_shard
from safecheck.runner.tasks import Task

__all__ = ["Merged", "merge"]

_AT_ONCE = 16
"""Shards in memory at once."""


@dataclass(frozen=True, slots=True)
class Merged:
    """What all shards hold besides the rows in the tables."""

    rows: dict[str, int]
    """Table -> rows written."""
    left_out: tuple[LeftOut, ...]
    """Frames, and delivered copies of frames, that gave no rows; in the order of the tasks."""
    assessed: dict[str, int]
    """Input pseudonym of an original -> frames assessed, for each original of the run."""
    notes: dict[str, int]
    """What preflight noticed and set right -> in how many frames."""


@resumable()
def merge(tasks: Sequence[Task], work: Path, dossier: Path) -> Merged:
    """Write the three tables of the frames into the dossier; memory does not grow with the number of rows.

    Parameters
    ----------
    tasks
        All tasks of the run, in order.
    work
        Work folder with a shard for each.
    dossier
        Folder in which the tables stand afterwards.

    Raises
    ------
    DossierError
        If a shard is missing or damaged; resuming does it again.
    Interrupted
        If the system refuses to write, as on a full disk.
    """
    tally = _Tally()
    for task in tasks:
        tally.add(_paper(work, task))
    rows = {}
    for table in SHARD_TABLES:
        batches = _batches(tasks, tally.rows[table], work, table)
        rows[table] = _write(dossier / f"{table}.parquet", table, batches)
        if rows[table] != sum(tally.rows[table]):
            raise DossierError(f"the table {table} has {rows[table]} rows, its shards {sum(tally.rows[table])}")
    return Merged(rows, tuple(tally.left_out), dict(sorted(tally.assessed.items())), dict(sorted(tally.notes.items())))


@dataclass(slots=True)
class _Tally:
    """What stands beside the rows, added up one shard after the other."""

    rows: dict[str, list[int]] = field(default_factory=lambda: {table: [] for table in SHARD_TABLES})
    """Table -> rows of each shard."""
    left_out: list[LeftOut] = field(default_factory=list)
    assessed: Counter[str] = field(default_factory=Counter)
    notes: Counter[str] = field(default_factory=Counter)

    def add(self, paper: Paper) -> None:
        """Add a shard's paper."""
        for table, rows in self.rows.items():
            rows.append(paper.tables[table].rows)
        self.left_out.extend(paper.left_out)
        self.notes.update(paper.notes)
        self.assessed.update(input_ for input_, _ in paper.frames)
        # An original none of whose frames was assessed stays, with 0: each input is accounted for.
        self.assessed.subtract(each.input for each in paper.left_out if each.side == "original")


def _paper(work: Path, task: Task) -> Paper:
    """Paper of a shard that must be there."""
    paper = paper_of(work, task)
    if paper is None:
        raise DossierError("a part of the results is missing or damaged; the same command does it again")
    return paper


def _batches(tasks: Sequence[Task], rows: Sequence[int], work: Path, table: str) -> Iterator[pa.Table]:
    """Read the shards in order, a few at once."""
    filled = iter([task for task, count in zip(tasks, rows, strict=True) if count])
    while few := list(itertools.islice(filled, _AT_ONCE)):
        # Joined, since a hundred columns of a few rows each take far more memory in pieces than in one.
        yield pa.concat_tables([read_shard(work, task, table) for task in few]).combine_chunks()


def _write(path: Path, table: str, batches: Iterator[pa.Table]) -> int:
    """Write a table so that it is whole or absent, also after a power cut."""
    aside = path.with_name(f"{path.name}.aside")
    rows = write_table(aside, table, batches)
    with aside.open("rb+") as file:
        os.fsync(file.fileno())
    aside.replace(path)
    return rows
