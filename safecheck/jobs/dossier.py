"""From shards to a sealed dossier; each file is written aside and renamed, the seal last of all."""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import os
from collections.abc import Iterable, Iterator
from pathlib import Path

from safecheck.jobs.inputs import Inputs, Refused, Side, input_rows
from safecheck.record.canonical import document_bytes, sha256_of_file
from safecheck.record.document import RecordDocument, TableEntry
from safecheck.record.rows import TABLES
from safecheck.record.run import RunFacts
from safecheck.record.tables import CSV_LIMIT, TableReader, from_rows, write_csv, write_table
from safecheck.report.drawing import draw_report
from safecheck.report.seal import write_seal
from safecheck.report.summary import summary_text
from safecheck.runner.merge import Merged
from safecheck.runner.shards import LeftOut

__all__ = ["CAUTIONS_FILE", "RECORD", "REPORT", "RUN", "SUMMARY", "finish_dossier", "readers", "write_tables"]

RECORD, RUN, REPORT, SUMMARY = "record.json", "run.json", "report.pdf", "summary.txt"
CAUTIONS_FILE = "CAUTIONS.txt"
"""Companion of the tables, which carry no lines above their data."""


def write_tables(dossier: Path, inputs: Inputs, merged: Merged) -> tuple[TableEntry, ...]:
    """Write the table of inputs beside the merged tables, CSV of the small ones, and give all their hashes."""
    rows = input_rows(inputs, merged.assessed, _refused(merged.left_out))
    with _aside(dossier / "inputs.parquet") as path:
        write_table(path, "inputs", [from_rows("inputs", rows)])
    entries = []
    for table, reader in readers(dossier).items():
        path = dossier / f"{table}.parquet"
        entries.append(TableEntry(table=table, file=path.name, sha256=sha256_of_file(path), rows=reader.rows))
        if reader.rows < CSV_LIMIT:
            with _aside(dossier / f"{table}.csv") as aside:
                write_csv(aside, reader.whole())
    return tuple(entries)


@contextlib.contextmanager
def _aside(path: Path) -> Iterator[Path]:
    """A path to write to, renamed to the wanted one at the end: a file is whole or absent."""
    aside = path.with_name(f"{path.name}.aside")
    yield aside
    with aside.open("rb+") as file:
        os.fsync(file.fileno())
    aside.replace(path)


def _refused(left_out: Iterable[LeftOut]) -> dict[tuple[Side, str], Refused]:
    """What was refused of each input of each side; one file may stand on both."""
    found: dict[tuple[Side, str], Refused] = {}
    for each in left_out:
        first = found.get((each.side, each.input), Refused(0, each.reason, each.detail))
        found[each.side, each.input] = dataclasses.replace(first, frames=first.frames + 1)
    return found


def readers(dossier: Path) -> dict[str, TableReader]:
    """The four tables of a dossier by name.

    Raises
    ------
    DossierError
        If one is missing or damaged.
    """
    return {table: TableReader(dossier / f"{table}.parquet", table) for table in TABLES}


def finish_dossier(dossier: Path, record: RecordDocument, run: RunFacts, *, attachment: bool) -> None:
    """Write record, run facts, PDF, summary and seal.

    Parameters
    ----------
    dossier
        Folder in which the tables and crops stand already.
    record, run
        What was found, and how the run was made.
    attachment
        Whether the PDF carries the record.
    """
    record_bytes = document_bytes(record)
    contents = {
        RECORD: record_bytes,
        RUN: document_bytes(run),
        CAUTIONS_FILE: ("\n\n".join(record.cautions) + "\n").encode(),
        REPORT: draw_report(record, record_bytes, run, dossier, attachment=attachment),
        SUMMARY: summary_text(record, hashlib.sha256(record_bytes).hexdigest(), run).encode(),
    }
    for name, content in contents.items():
        with _aside(dossier / name) as path:
            path.write_bytes(content)
    write_seal(dossier)
