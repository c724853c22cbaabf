"""All shards, in the order of the tasks, into the tables of the dossier."""

from __future__ import annotations

import os
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa

from safecheck.errors import DossierError
from safecheck.record.tables import write_table
from safecheck.runner.shards import SHARD_TABLES, LeftOut, Paper, paper_of, read_shard
from safecheck.runner.tasks import Task

__all__ = ["Merged", "merge"]


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
    """
    papers = [_paper(work, task) for task in tasks]
    rows = {}
    for table in SHARD_TABLES:
        expected = sum(paper.tables[table].rows for paper in papers)
        rows[table] = _write(dossier / f"{table}.parquet", table, _batches(tasks, papers, work, table))
        if rows[table] != expected:
            raise DossierError(f"the table {table} got {rows[table]} rows, expected {expected} from the shards")
    return _sum_up(papers, rows)


def _paper(work: Path, task: Task) -> Paper:
    """Paper of a shard that must be there."""
    paper = paper_of(work, task)
    if paper is None:
        raise DossierError("a part of the results is missing or damaged; the same command does it again")
    return paper


def _batches(tasks: Sequence[Task], papers: Sequence[Paper], work: Path, table: str) -> Iterator[pa.Table]:
    """Read one shard after the other."""
    for task, paper in zip(tasks, papers, strict=True):
        if paper.tables[table].rows:
            yield read_shard(work, task, table)


def _write(path: Path, table: str, batches: Iterator[pa.Table]) -> int:
    """Write a table so that it is whole or absent, also after a power cut."""
    aside = path.with_name(f"{path.name}.aside")
    rows = write_table(aside, table, batches)
    with aside.open("rb") as file:
        os.fsync(file.fileno())
    aside.replace(path)
    return rows


def _sum_up(papers: Sequence[Paper], rows: dict[str, int]) -> Merged:
    """Add up what stands beside the tables."""
    notes: Counter[str] = Counter()
    assessed: Counter[str] = Counter()
    left_out: list[LeftOut] = []
    for paper in papers:
        notes.update(paper.notes)
        left_out.extend(paper.left_out)
        assessed.update(input_ for input_, _ in paper.frames)
    # An original none of whose frames was assessed stays, with 0: each input is accounted for.
    assessed.subtract(each.input for each in left_out if each.side == "original")
    return Merged(rows, tuple(left_out), dict(sorted(assessed.items())), dict(sorted(notes.items())))
