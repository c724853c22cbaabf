"""The dossier: what lies in it, what a change of any byte does, and that equal runs give equal files."""

from __future__ import annotations

import hashlib
import json
import shutil
import subprocess
import zipfile
from collections.abc import Callable
from pathlib import Path

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet as parquet
import pytest
import rfc8785

from safecheck.jobs.verify import Verified, verify
from safecheck.report.seal import check_seal, write_seal
from tests.end_to_end.command import run
from tests.end_to_end.hospital import Hospital, Made, assess_here

TABLES = ("inputs", "measures", "regions", "windows")
FILES = {
    "CAUTIONS.txt",
    "SHA256SUMS",
    "record.json",
    "report.pdf",
    "run.json",
    "seal.json",
    "summary.txt",
    *(f"{table}.{kind}" for table in TABLES for kind in ("csv", "parquet")),
}


def files_of(folder: Path) -> list[str]:
    return sorted(path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file())


def copy_of(made: Made, folder: Path) -> Path:
    shutil.copytree(made.folder, folder / "copy")
    return folder / "copy"


def sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def test_the_run_ends_with_0_and_says_where_the_record_is(made: Made) -> None:
    assert (made.ended.code, made.ended.out.splitlines()[0]) == (0, f"Record: {made.folder}/report.pdf")
    assert "Limits: 1 within declared limits" in made.ended.out


def test_the_dossier_holds_its_files_and_nothing_else(made: Made) -> None:
    found = files_of(made.folder)
    assert {name for name in found if not name.startswith("places/")} == FILES
    assert any(name.startswith("places/") for name in found)


def test_sha256sum_checks_it_without_a_program_of_ours(made: Made) -> None:
    program = shutil.which("sha256sum")
    if program is None:
        pytest.skip("no sha256sum on this machine")
    ended = subprocess.run([program, "-c", "SHA256SUMS"], cwd=made.folder, capture_output=True, text=True, check=False)
    assert (ended.returncode, ended.stdout.count(": OK")) == (0, len(files_of(made.folder)) - 1)


def test_the_record_is_canonical_and_fixes_every_table(made: Made) -> None:
    content = (made.folder / "record.json").read_bytes()
    record = json.loads(content)
    assert rfc8785.dumps(record) == content
    assert {entry["table"]: entry["sha256"] for entry in record["tables"]} == {
        table: sha256(made.folder / f"{table}.parquet") for table in TABLES
    }
    assert sha256(made.folder / "record.json") in (made.folder / "summary.txt").read_text(encoding="utf-8")


def test_csv_and_parquet_hold_the_same_rows(made: Made) -> None:
    from pyarrow import csv

    for table in TABLES:
        columns = parquet.read_table(made.folder / f"{table}.parquet")
        options = csv.ConvertOptions(column_types=columns.schema, strings_can_be_null=False)
        written = csv.read_csv(made.folder / f"{table}.csv", convert_options=options)
        assert written.cast(columns.schema).equals(columns), table


def test_verify_finds_no_difference_in_an_untouched_dossier(made: Made, hospital: Hospital) -> None:
    ended = run("verify", made.folder, folder=hospital.folder)
    assert (ended.code, ended.out.splitlines()[-1]) == (0, "No difference was found.")


def test_verify_finds_a_changed_byte_in_each_file(made: Made, tmp_path: Path) -> None:
    copy = copy_of(made, tmp_path)
    for name in files_of(copy):
        path = copy / name
        whole = path.read_bytes()
        for position in (0, len(whole) // 2, len(whole) - 1):
            changed = bytearray(whole)
            changed[position] ^= 1
            path.write_bytes(changed)
            assert name in {difference.path for difference in check_seal(copy)}, (name, position)
        path.write_bytes(whole)
    assert check_seal(copy) == ()


def add(folder: Path) -> None:
    (folder / "places" / "more.txt").write_text("more", encoding="utf-8")


def remove(folder: Path) -> None:
    (folder / "windows.csv").unlink()


def remove_seal(folder: Path) -> None:
    (folder / "seal.json").unlink()


def remove_sums(folder: Path) -> None:
    (folder / "SHA256SUMS").unlink()


def change(folder: Path) -> None:
    content = bytearray((folder / "report.pdf").read_bytes())
    content[1000] ^= 1
    (folder / "report.pdf").write_bytes(content)


def link(folder: Path) -> None:
    (folder / "summary.txt").rename(folder.parent / "elsewhere.txt")
    (folder / "summary.txt").symlink_to(folder.parent / "elsewhere.txt")


@pytest.mark.parametrize(
    ("tamper", "sentence"),
    [
        (add, "places/more.txt is here and was not sealed"),
        (remove, "windows.csv was sealed and is missing"),
        (remove_seal, "seal.json was sealed and is missing"),
        (remove_sums, "SHA256SUMS was sealed and is missing"),
        (change, "report.pdf differs from what was sealed"),
        (link, "summary.txt is a link or another thing that is no regular file"),
    ],
    ids=lambda value: getattr(value, "__name__", ""),
)
def test_verify_names_a_difference_and_ends_with_6(
    made: Made, tmp_path: Path, tamper: Callable[[Path], None], sentence: str
) -> None:
    copy = copy_of(made, tmp_path)
    tamper(copy)
    ended = run("verify", copy, folder=tmp_path)
    assert (ended.code, sentence in ended.out.splitlines()) == (6, True), ended.text


def test_verify_with_images_computes_every_row_again(made: Made, hospital: Hospital) -> None:
    ended = run(
        "verify",
        made.folder,
        "--images",
        hospital.studies,
        "--key",
        hospital.key,
        "--regions",
        hospital.folder / "regions.json",
        "--frames",
        "99",
        folder=hospital.folder,
    )
    assert (ended.code, "8 of 8 frames were computed again" in ended.out) == (0, True), ended.text


def verify_images(dossier: Path, hospital: Hospital) -> Verified:
    regions = hospital.folder / "regions.json"
    return verify(
        dossier,
        images=(hospital.studies,),
        delivered=(),
        key_file=hospital.key,
        regions_file=regions,
        frames=99,
        seed=1,
    )


def alter(dossier: Path, table: str, column: str) -> None:
    """Change one number of a table."""
    path = dossier / f"{table}.parquet"
    rows = parquet.read_table(path)
    values = rows.column(column).to_pylist()
    index = next(index for index, value in enumerate(values) if value)
    values[index] = values[index] * 0.5 if isinstance(values[index], float) else values[index] + 1
    position = rows.schema.get_field_index(column)
    changed = rows.set_column(position, rows.schema.field(column), pa.array(values, rows.schema.field(column).type))
    parquet.write_table(changed, path)


def redo_record(dossier: Path) -> None:
    """Let the record name the tables, and the CSV hold them, as they are now."""
    record = json.loads((dossier / "record.json").read_bytes())
    for entry in record["tables"]:
        path = dossier / entry["file"]
        entry["sha256"] = sha256(path)
        pa.csv.write_csv(parquet.read_table(path), path.with_suffix(".csv"))
    (dossier / "record.json").write_bytes(rfc8785.dumps(record))


@pytest.mark.parametrize(
    ("table", "column"),
    [("measures", "rmse_content"), ("measures", "code_bytes"), ("windows", "ssim"), ("regions", "bias")],
    ids=lambda value: value,
)
def test_verify_with_images_finds_an_altered_figure_under_a_seal_redone(
    made: Made, hospital: Hospital, tmp_path: Path, table: str, column: str
) -> None:
    copy = copy_of(made, tmp_path)
    alter(copy, table, column)
    redo_record(copy)
    write_seal(copy)
    found = verify_images(copy, hospital)
    assert "altered" in found.differences[0]
    assert len([each for each in found.differences if f": {column} is " in each]) == 1, found.differences


def test_verify_with_images_finds_an_altered_figure_of_the_record_under_a_seal_redone(
    made: Made, hospital: Hospital, tmp_path: Path
) -> None:
    copy = copy_of(made, tmp_path)
    record = json.loads((copy / "record.json").read_bytes())
    figure = next(each for each in record["figures"] if each["measure"] == "rmse_content")
    figure["median"] *= 0.5
    (copy / "record.json").write_bytes(rfc8785.dumps(record))
    write_seal(copy)
    assert verify_images(copy, hospital).differences[1:] == ("record.json: figures does not follow from the tables",)


def test_verify_finds_a_csv_that_does_not_hold_its_table_under_a_seal_redone(made: Made, tmp_path: Path) -> None:
    copy = copy_of(made, tmp_path)
    text = (copy / "measures.csv").read_text(encoding="utf-8")
    (copy / "measures.csv").write_text(text.replace("jpeg2000", "jpeg2001", 1), encoding="utf-8")
    write_seal(copy)
    ended = run("verify", copy, folder=tmp_path)
    assert (ended.code, "measures.csv does not hold what measures.parquet holds" in ended.out) == (6, True)


def test_verify_with_images_asks_for_the_regions_of_the_run(made: Made, hospital: Hospital, tmp_path: Path) -> None:
    other = tmp_path / "regions.json"
    other.write_text((hospital.folder / "regions.json").read_text(encoding="utf-8") + "\n", encoding="utf-8")
    words = ("--images", hospital.studies, "--key", hospital.key, "--regions", other)
    ended = run("verify", made.folder, *words, folder=hospital.folder)
    assert (ended.code, ended.err) == (
        2,
        "safecheck: the regions given are not those of the run; name the same file by --regions\n",
    )


def test_verify_finds_a_table_that_the_record_does_not_name_under_a_seal_redone(made: Made, tmp_path: Path) -> None:
    copy = copy_of(made, tmp_path)
    alter(copy, "windows", "ssim")
    write_seal(copy)
    ended = run("verify", copy, folder=tmp_path)
    assert (ended.code, "windows.parquet is not the table whose hash the record holds" in ended.out) == (6, True)


def forget_rows(dossier: Path, table: str) -> None:
    """Take the last row out of a table, and redo record and seal."""
    path = dossier / f"{table}.parquet"
    rows = parquet.read_table(path)
    parquet.write_table(rows.slice(0, rows.num_rows - 1), path)
    redo_record(dossier)
    write_seal(dossier)


@pytest.mark.parametrize("table", ["measures", "windows", "regions"])
def test_verify_with_images_finds_a_row_that_was_taken_out(
    made: Made, hospital: Hospital, tmp_path: Path, table: str
) -> None:
    copy = copy_of(made, tmp_path)
    forget_rows(copy, table)
    found = verify_images(copy, hospital)
    assert found.differences[-1].endswith("the row is missing from the table")
    assert found.differences[-1].startswith(f"{table}, ")


def test_verify_with_images_asks_for_the_region_file_of_the_run(made: Made, hospital: Hospital) -> None:
    ended = run("verify", made.folder, "--images", hospital.studies, "--key", hospital.key, folder=hospital.folder)
    assert (ended.code, ended.err) == (2, "safecheck: the run had drawn regions; name their file by --regions\n")


def test_verify_under_another_key_is_refused_with_one_sentence(made: Made, hospital: Hospital) -> None:
    ended = run("verify", made.folder, "--images", hospital.studies, "--key", "another.key", folder=hospital.folder)
    assert (ended.code, ended.err.splitlines()) == (
        2,
        ["safecheck: the dossier was written under another site key; name that key by --key"],
    )


def as_zip(hospital: Hospital, folder: Path) -> list[Path]:
    with zipfile.ZipFile(folder / "export.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        for path in sorted(hospital.studies.rglob("*.dcm"), reverse=True):
            archive.write(path, f"export/{path.name}{path.parent.name}")
    return [folder / "export.zip"]


def as_list(hospital: Hospital, folder: Path) -> list[Path]:
    lines = [str(path) for path in sorted(hospital.studies.rglob("*.dcm"), key=lambda path: path.name[::-1])]
    (folder / "list.txt").write_text("\n".join(lines) + "\n", encoding="utf-8")
    return [folder / "list.txt"]


def in_other_order(hospital: Hospital, folder: Path) -> list[Path]:
    return [*sorted(hospital.studies.rglob("*.dcm"), reverse=True)]


@pytest.mark.parametrize("hand_in", [as_zip, as_list, in_other_order], ids=lambda value: value.__name__)
def test_equal_inputs_give_equal_tables_and_record_whatever_they_come_in_and_however_many_workers(
    made: Made, hospital: Hospital, tmp_path: Path, hand_in: Callable[[Hospital, Path], list[Path]]
) -> None:
    out = tmp_path / "dossier"
    assess_here(hospital.request(out, *hand_in(hospital, tmp_path), with_images=True))
    for name in ("record.json", "CAUTIONS.txt", *(f"{table}.parquet" for table in TABLES), "measures.csv"):
        assert (out / name).read_bytes() == (made.folder / name).read_bytes(), name
    places = {path.name: path.read_bytes() for path in (made.folder / "places").iterdir()}
    assert {path.name: path.read_bytes() for path in (out / "places").iterdir()} == places
