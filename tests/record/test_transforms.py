from __future__ import annotations

import csv
import io

from safecheck.frames import FrameKey
from safecheck.record.transforms import COLUMNS, MEASURES, Finding, StudiedFrame, table_bytes
from safecheck.wording import lint


def studied(findings: tuple[Finding, ...], unit: str = "HU") -> StudiedFrame:
    return StudiedFrame(
        key=FrameKey("P-1", "S-1", "R-1", "I-1", 1, 2, None),
        modality="CT",
        stratum='CT, "CHEST", thickness unknown',
        unit=unit,
        rows=4,
        columns=4,
        bits_stored=12,
        content_rule="padding-only-1",
        content_pixels=16,
        may_show_text=False,
        under_18=False,
        source_lossy=False,
        notes=(),
        findings=findings,
    )


FINDINGS = (
    Finding("content", "cosine", 8, "ratio", 10.0, "rmse", 1.0 / 3.0),
    Finding("inner tiles", "", 8, "", None, "inner_tiles", 4.0),
)


def test_the_table_has_a_line_for_each_figure_and_every_figure_its_unit() -> None:
    content = table_bytes([studied(FINDINGS)])
    rows = list(csv.DictReader(io.StringIO(content.decode("utf-8"), newline="")))
    assert [row["measure"] for row in rows] == ["rmse", "inner_tiles"]
    assert [row["unit"] for row in rows] == ["HU", "1"]
    assert [float(row["value"]) for row in rows] == [1.0 / 3.0, 4.0]
    assert rows[0]["stratum"] == 'CT, "CHEST", thickness unknown'
    assert (rows[0]["instance_number"], rows[1]["fixed_at"], rows[1]["transform"]) == ("", "", "")


def test_the_table_begins_with_its_columns_and_lines_end_as_the_standard_says() -> None:
    # RFC 4180: lines end with CR LF.
    lines = table_bytes([]).decode("utf-8").split("\r\n")
    assert lines == [",".join(COLUMNS), ""]


def test_measures_keep_to_the_never_list() -> None:
    assert [word for measure in MEASURES.values() for word in lint(measure.meaning)] == []
