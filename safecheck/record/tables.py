"""Tables in Parquet and CSV: the same rows give the same bytes in the same environment."""

from __future__ import annotations

import dataclasses
import functools
import io
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

from safecheck.errors import DossierError
from safecheck.record.rows import TABLES, columns_of

__all__ = [
    "CSV_LIMIT",
    "ROW_GROUP",
    "TableReader",
    "csv_bytes",
    "from_rows",
    "read_table",
    "schema_of",
    "table_writer",
    "write_csv",
    "write_table",
]

ROW_GROUP = 16_384
"""Rows per row group: fixed, since the bytes of the file depend on it."""
CSV_LIMIT = 100_000
"""Tables of fewer rows are written as CSV as well."""

_ARROW = {"text": pa.string(), "whole": pa.int64(), "real": pa.float64(), "truth": pa.bool_()}


@functools.cache
def schema_of(table: str) -> pa.Schema:
    """Arrow schema of a table of `safecheck.record.rows.TABLES`, each column's unit and meaning in its metadata."""
    fields = []
    for text in columns_of(TABLES[table]):
        kind, _, null = text.kind.partition(" or ")
        metadata = {"unit": text.unit, "meaning": text.meaning}
        fields.append(pa.field(text.name, _ARROW[kind], nullable=bool(null), metadata=metadata))
    return pa.schema(fields)


def from_rows(table: str, rows: Sequence[Any]) -> pa.Table:
    """Rows of a table's dataclass -> Arrow table."""
    schema = schema_of(table)
    names = [item.name for item in dataclasses.fields(TABLES[table])]
    columns = [pa.array([getattr(row, name) for row in rows], schema.field(name).type) for name in names]
    return pa.Table.from_arrays(columns, schema=schema)


def table_writer(path: Path, table: str) -> pa.parquet.ParquetWriter:
    """Open a Parquet writer with the settings that make equal rows equal bytes."""
    return pa.parquet.ParquetWriter(
        path, schema_of(table), compression="zstd", use_dictionary=True, write_statistics=True, version="2.6"
    )


def write_table(path: Path, table: str, batches: Iterable[pa.Table]) -> int:
    """Write tables one after the other into fixed row groups, whatever their sizes; return the number of rows."""
    written = 0
    with table_writer(path, table) as writer:
        for group in _regroup(batches, schema_of(table)):
            writer.write_table(group, row_group_size=ROW_GROUP)
            written += group.num_rows
    return written


def _regroup(batches: Iterable[pa.Table], schema: pa.Schema) -> Iterator[pa.Table]:
    """Cut and join tables into pieces of exactly `ROW_GROUP` rows, the last one smaller."""
    held: list[pa.Table] = []
    rows = 0
    for batch in batches:
        held.append(batch)
        rows += batch.num_rows
        while rows >= ROW_GROUP:
            joined = pa.concat_tables(held).combine_chunks()
            yield joined.slice(0, ROW_GROUP).combine_chunks()
            held = [joined.slice(ROW_GROUP)]
            rows -= ROW_GROUP
    joined = pa.concat_tables(held).combine_chunks() if held else schema.empty_table()
    if joined.num_rows:
        yield joined


def write_csv(path: Path, table: pa.Table) -> None:
    """Write a table as CSV (RFC 4180, UTF-8, a header line, empty for null)."""
    path.write_bytes(csv_bytes(table))


def csv_bytes(table: pa.Table) -> bytes:
    """Give a table as `write_csv` writes it."""
    buffer = io.BytesIO()
    pa.csv.write_csv(table, buffer)
    return buffer.getvalue()


def read_table(path: Path, table: str) -> pa.Table:
    """Read a whole table of a dossier.

    Raises
    ------
    DossierError
        If the file is missing, is no Parquet, or has other columns.
    """
    return TableReader(path, table).whole()


class TableReader:
    """A table of a dossier, read a column at a time: figures over 10^6 rows need a few columns, not the table.

    Parameters
    ----------
    path
        Parquet file.
    table
        Name in `safecheck.record.rows.TABLES`.

    Raises
    ------
    DossierError
        If the file is missing, is no Parquet, or has other columns.
    """

    def __init__(self, path: Path, table: str) -> None:
        try:
            self._file = pa.parquet.ParquetFile(path)
        except (OSError, pa.ArrowException) as error:
            raise DossierError(f"the table {path.name} of the dossier cannot be read") from error
        if not self._file.schema_arrow.equals(schema_of(table)):
            raise DossierError(f"the table {path.name} of the dossier has other columns than this version writes")
        self.table = table
        self._kept: dict[str, pa.ChunkedArray] = {}
        self.rows: int = self._file.metadata.num_rows

    def whole(self) -> pa.Table:
        """All rows and columns."""
        return self._file.read()

    def numbers(self, column: str) -> npt.NDArray[np.float64]:
        """Return a column of numbers, (rows,), NaN where it is null."""
        values = self._file.read([column]).column(0).cast(pa.float64())
        return np.asarray(values.fill_null(float("nan")).to_numpy(), dtype=np.float64)

    def codes(self, column: str) -> tuple[npt.NDArray[np.int64], tuple[Any, ...]]:
        """Return a column of names as whole numbers, (rows,), and the names that they stand for, sorted."""
        encoded = self._file.read([column]).column(0).combine_chunks().dictionary_encode()
        names = encoded.dictionary.to_pylist()
        order = sorted(range(len(names)), key=lambda index: names[index])
        rank = np.empty(len(names), dtype=np.int64)
        rank[order] = np.arange(len(names))
        codes = rank[encoded.indices.to_numpy(zero_copy_only=False)] if len(encoded) else np.empty(0, np.int64)
        return codes, tuple(names[index] for index in order)

    def at(self, indices: Sequence[int], columns: Sequence[str]) -> list[dict[str, Any]]:
        """Return some rows, some columns of each; the columns are kept, since places are asked for again and again."""
        for name in columns:
            if name not in self._kept:
                found = self._file.read([name]).column(0)
                self._kept[name] = found.dictionary_encode() if pa.types.is_string(found.type) else found
        wanted = pa.array(indices, pa.int64())
        taken = {name: self._kept[name].take(wanted).to_pylist() for name in columns}
        return [{name: taken[name][row] for name in columns} for row in range(len(indices))]
