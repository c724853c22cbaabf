"""Tables made by hand for the tests of this room."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from safecheck.record.rows import TABLES, columns_of
from safecheck.record.tables import TableReader, from_rows, write_table

_PLAIN = {"text": "", "whole": 1, "real": 1.0, "truth": False}


def row(table: str, **given: Any) -> Any:
    """A row with a plain value in every column that must have one."""
    row_class: Any = TABLES[table]
    known = {text.name: None if text.kind.endswith("null") else _PLAIN[text.kind] for text in columns_of(TABLES[table])}
    return row_class(**(known | given))


def measured(candidate: str, *, study: str = "S-1", frame: int = 1, **given: Any) -> Any:
    """A row of measures.parquet of a candidate."""
    known = {
        "role": "candidate",
        "candidate": candidate,
        "patient": f"P of {study}",
        "study": study,
        "series": f"R of {study}",
        "instance": f"I of {study}",
        "frame": frame,
        "stratum": "CT, HEAD",
        "modality": "CT",
        "body_part": "HEAD",
        "unit": "HU",
        "codec": candidate.split(" ")[0],
        "reached": "asked",
        "generation": "first",
        "archive_can_write": True,
        "rows": 10,
        "columns": 20,
        "channels": 1,
        "bits_stored": 12,
        "bits_allocated": 16,
        "source_bytes": 400,
        "code_bytes": 30,
        "content_pixels": 100,
        "lossless_bytes": 150,
        "lossless_codec": "jpegls-reversible",
        "ratio_bits_stored": 10.0,
    }
    return row("measures", **(known | given))


def reversible(*, study: str = "S-1", frame: int = 1, **given: Any) -> Any:
    """The pipe's reversible control of a frame."""
    known = {"role": "reversible", "max_frame": 0.0, "control_held": True, "codec": "jpegls-reversible"}
    return measured("reversible", study=study, frame=frame, **(known | given))


def reader(folder: Path, table: str, rows: list[Any]) -> TableReader:
    """Write rows and open them."""
    path = folder / f"{table}.parquet"
    write_table(path, table, [from_rows(table, rows)])
    return TableReader(path, table)
