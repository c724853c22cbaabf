"""Shards: what one task gives, in a folder of its own that is whole or absent.

A shard is written aside under a name of its own and renamed when it is complete, so a stop at any moment leaves either
nothing or all of it. A power cut may still keep the rename and lose the content: the shard's own paper therefore holds
the hash of each table, and a shard that does not match is done again. That is cheaper than forcing each to the disk.
"""

from __future__ import annotations

import shutil
import uuid
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Literal

import pyarrow as pa

from safecheck.documents import Document, from_json
from safecheck.errors import DocumentError, DossierError
from safecheck.record.canonical import document_bytes, sha256_of_file
from safecheck.record.tables import read_table, write_table
from safecheck.runner.tasks import Task

__all__ = ["SHARD_TABLES", "LeftOut", "Paper", "ShardTable", "clear_aside", "paper_of", "read_shard", "write_shard"]

SHARD_TABLES = ("measures", "windows", "regions")
"""Tables that frames give."""
_SHARDS = "shards"
_ASIDE = "aside"
_PAPER = "frames.json"


class LeftOut(Document):
    """A frame that gave no rows, or a delivered copy that could not be set beside its original."""

    input: str
    """Pseudonym of the file."""
    side: Literal["original", "delivered"]
    frame: int
    """From 1."""
    reason: str
    """Code of `safecheck.wording.REASONS`."""
    detail: str
    """What was found, without identifiers."""


class ShardTable(Document):
    """One table of a shard."""

    rows: int
    sha256: str


class Paper(Document):
    """What stands beside the tables of a shard."""

    task: str
    """Name of the task."""
    frames: tuple[tuple[str, int], ...]
    """(input, frame number) of every frame of the task, in order."""
    left_out: tuple[LeftOut, ...]
    notes: dict[str, int]
    """What preflight noticed and set right, and in how many frames."""
    tables: dict[str, ShardTable]


def write_shard(
    work: Path,
    task: Task,
    tables: Mapping[str, Sequence[pa.Table]],
    left_out: Sequence[LeftOut],
    notes: Mapping[str, int],
) -> None:
    """Write what a task gave, whole or not at all.

    Parameters
    ----------
    work
        Work folder of the dossier.
    task
        The task.
    tables
        Name of each of `SHARD_TABLES` -> rows of the task's frames, in order of the frames.
    left_out
        Its frames, or their delivered copies, that gave none.
    notes
        What preflight noticed, and in how many frames.

    Raises
    ------
    OSError
        If the folder cannot be written.
    """
    aside = work / _ASIDE / f"{task.name[:16]}-{uuid.uuid4().hex}"
    aside.mkdir(parents=True)
    written = {}
    for name in SHARD_TABLES:
        path = aside / f"{name}.parquet"
        rows = write_table(path, name, tables[name])
        written[name] = ShardTable(rows=rows, sha256=sha256_of_file(path))
    paper = Paper(
        task=task.name,
        frames=_frames(task),
        left_out=tuple(left_out),
        notes=dict(sorted(notes.items())),
        tables=written,
    )
    (aside / _PAPER).write_bytes(document_bytes(paper))
    _take_place(aside, work / _SHARDS / task.name)


def paper_of(work: Path, task: Task) -> Paper | None:
    """Paper of a task's shard, or None where there is none that can be relied on; a damaged one is removed."""
    folder = work / _SHARDS / task.name
    if not folder.exists():
        return None
    try:
        paper = from_json(Paper, (folder / _PAPER).read_bytes())
    except (OSError, DocumentError):
        paper = None
    if paper is None or not _matches(paper, task, folder):
        shutil.rmtree(folder)
        return None
    return paper


def read_shard(work: Path, task: Task, table: str) -> pa.Table:
    """Rows that a task gave for one table.

    Raises
    ------
    DossierError
        If the shard is missing or damaged.
    """
    return read_table(work / _SHARDS / task.name / f"{table}.parquet", table)


def clear_aside(work: Path) -> None:
    """Remove what was being written when a run was stopped.

    Raises
    ------
    DossierError
        If it cannot be removed.
    """
    aside = work / _ASIDE
    try:
        (work / _SHARDS).mkdir(exist_ok=True)
        if aside.exists():
            shutil.rmtree(aside)
        aside.mkdir()
    except OSError as error:
        raise DossierError("what a stopped run left half-written in the work folder cannot be removed") from error


def _frames(task: Task) -> tuple[tuple[str, int], ...]:
    """(input, frame number) of a task's frames."""
    return tuple((each.instance.input, each.number) for each in task.frames)


def _matches(paper: Paper, task: Task, folder: Path) -> bool:
    """Whether a shard is this task's, and its tables are those that were written."""
    if paper.task != task.name or paper.frames != _frames(task) or set(paper.tables) != set(SHARD_TABLES):
        return False
    paths = {name: folder / f"{name}.parquet" for name in SHARD_TABLES}
    return all(path.is_file() and sha256_of_file(path) == paper.tables[name].sha256 for name, path in paths.items())


def _take_place(aside: Path, folder: Path) -> None:
    """Rename a complete shard to its place."""
    folder.parent.mkdir(exist_ok=True)
    try:
        aside.rename(folder)
    except OSError:
        if not (folder / _PAPER).is_file():
            raise
        # A worker that outlived its run came first: the same task gives the same rows.
        shutil.rmtree(aside)
