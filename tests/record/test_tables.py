"""Tables: equal rows give equal bytes, however they were handed in; columns keep their unit and meaning."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet
import pytest

from safecheck.errors import DossierError
from safecheck.record.canonical import canonical_bytes, sha256_of_file
from safecheck.record.rows import TABLES, columns_of
from safecheck.record.tables import ROW_GROUP, TableReader, from_rows, read_table, schema_of, write_csv, write_table

EXAMPLES = {"text": "name", "whole": 3, "real": 2.5, "truth": True}


def row_of(table: str, **given: Any) -> Any:
    """A row with a plain value in each column that must have one, null in the others."""
    row_class: Any = TABLES[table]
    values = {
        text.name: None if text.kind.endswith("null") else EXAMPLES[text.kind] for text in columns_of(TABLES[table])
    }
    return row_class(**(values | given))


@pytest.mark.parametrize("table", TABLES)
def test_rows_come_back_as_they_were_written(table: str, tmp_path: Path) -> None:
    rows = [row_of(table), row_of(table)]
    write_table(tmp_path / "t.parquet", table, [from_rows(table, rows)])
    found = read_table(tmp_path / "t.parquet", table).to_pylist()
    assert found == [dataclasses.asdict(row) for row in rows]


def test_the_bytes_do_not_depend_on_how_rows_were_cut(tmp_path: Path) -> None:
    rows = [row_of("windows", frame=index, ssim=index / 7) for index in range(ROW_GROUP + 500)]
    whole = from_rows("windows", rows)
    hashes = set()
    for cuts in ([0], [0, 1], [0, 100, 5000, ROW_GROUP], [0, ROW_GROUP - 1, ROW_GROUP + 1]):
        ends = [*cuts[1:], len(rows)]
        pieces = [whole.slice(start, end - start) for start, end in zip(cuts, ends, strict=True)]
        assert write_table(tmp_path / "t.parquet", "windows", pieces) == len(rows)
        hashes.add(sha256_of_file(tmp_path / "t.parquet"))
    assert len(hashes) == 1


def test_an_empty_table_has_its_columns(tmp_path: Path) -> None:
    assert write_table(tmp_path / "t.parquet", "regions", []) == 0
    assert read_table(tmp_path / "t.parquet", "regions").num_rows == 0


def test_every_column_says_what_it_holds() -> None:
    for table in TABLES:
        for field in schema_of(table):
            assert field.metadata[b"meaning"].endswith(b"."), field.name


def test_a_column_of_numbers_has_nan_for_null_and_names_are_coded_in_order(tmp_path: Path) -> None:
    rows = [row_of("windows", window=name, ssim=value) for name, value in (("b", 0.5), ("a", None), ("b", 1.0))]
    write_table(tmp_path / "t.parquet", "windows", [from_rows("windows", rows)])
    reader = TableReader(tmp_path / "t.parquet", "windows")
    numbers = reader.numbers("ssim")
    assert numbers[0] == 0.5
    assert numbers[1] != numbers[1]
    codes, names = reader.codes("window")
    assert names == ("a", "b")
    assert codes.tolist() == [1, 0, 1]
    assert reader.at([2], ("window", "ssim")) == [{"window": "b", "ssim": 1.0}]


def test_a_table_of_other_columns_is_refused(tmp_path: Path) -> None:
    pa.parquet.write_table(pa.table({"a": [1]}), tmp_path / "t.parquet")
    with pytest.raises(DossierError, match="other columns than this version writes"):
        read_table(tmp_path / "t.parquet", "measures")


def test_a_damaged_table_is_refused(tmp_path: Path) -> None:
    (tmp_path / "t.parquet").write_bytes(b"PAR1 and nothing else")
    with pytest.raises(DossierError, match=r"t\.parquet of the dossier cannot be read"):
        read_table(tmp_path / "t.parquet", "measures")


def test_csv_keeps_full_precision(tmp_path: Path) -> None:
    table = from_rows("windows", [row_of("windows", ssim=0.1 + 0.2)])
    write_csv(tmp_path / "t.csv", table)
    assert pa.csv.read_csv(tmp_path / "t.csv").column("ssim")[0].as_py() == 0.1 + 0.2


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        # RFC 8785, section 3.2.2 and Appendix B: numbers as ECMAScript writes them, keys by UTF-16 code units.
        ({"b": 1, "a": 1e21}, b'{"a":1e+21,"b":1}'),
        ({"x": 333333333.33333329}, b'{"x":333333333.3333333}'),
        ({"x": 4.50}, b'{"x":4.5}'),
        ({"x": 2e-3}, b'{"x":0.002}'),
        ({"x": 1e-27}, b'{"x":1e-27}'),
    ],
    ids=["large", "rounded", "short", "small", "tiny"],
)
def test_json_is_written_in_the_one_form_of_rfc_8785(value: Any, expected: bytes) -> None:
    assert canonical_bytes(value) == expected
