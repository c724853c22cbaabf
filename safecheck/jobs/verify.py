"""Verification: the seal, and a seeded sample of rows computed again from the images."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

from safecheck.codecs import registry
from safecheck.documents import from_json
from safecheck.errors import DossierError, UsageError
from safecheck.evaluation import Assignment, Candidate
from safecheck.jobs.dossier import RECORD, readers
from safecheck.jobs.inputs import gather_inputs
from safecheck.jobs.recompute import ABSOLUTE, RELATIVE, recompute
from safecheck.jobs.regions import load_regions
from safecheck.jobs.site import open_site
from safecheck.jobs.versions import versions
from safecheck.policy.plan import Plan
from safecheck.record.canonical import sha256_of_file
from safecheck.record.document import RecordDocument
from safecheck.record.rows import TABLES
from safecheck.record.tables import TableReader, csv_bytes
from safecheck.report.seal import SEAL, check_seal
from safecheck.statistics.summary import Surroundings, summarise

__all__ = ["NO_DOSSIER", "Verified", "read_record", "verify"]

NO_DOSSIER = "no such dossier; expected a folder that a run has written"


@dataclass(frozen=True, slots=True)
class Verified:
    """What verification found."""

    differences: tuple[str, ...]
    """One sentence each; empty where nothing differs."""
    lines: tuple[str, ...]
    """What was checked."""


def read_record(dossier: Path) -> RecordDocument:
    """Read a dossier's record.

    Raises
    ------
    DossierError
        If it is missing or of another format.
    """
    try:
        content = (dossier / RECORD).read_bytes()
    except OSError as error:
        raise DossierError("the dossier holds no record.json") from error
    return from_json(RecordDocument, content)


def verify(
    dossier: Path,
    *,
    images: tuple[Path, ...],
    delivered: tuple[Path, ...],
    key_file: Path | None,
    regions_file: Path | None,
    frames: int,
    seed: int,
) -> Verified:
    """Check a dossier.

    Parameters
    ----------
    dossier
        Folder.
    images, delivered
        Inputs of the run; empty for the seal alone.
    key_file
        Site key under which the dossier was written.
    regions_file
        Region file of the run, where it had one.
    frames
        How many frames are computed again.
    seed
        Another seed draws other frames.

    Raises
    ------
    DossierError
        If the record is missing or of another format.
    UsageError
        If there is no such folder, the inputs or the key cannot be read, or they are not those of the run.
    """
    if not dossier.is_dir():
        raise UsageError(NO_DOSSIER)
    if not (dossier / SEAL).exists() and not (dossier / RECORD).exists():
        raise UsageError(NO_DOSSIER)
    lines = ["The seal was checked: every file against its hash"]
    differences = [difference.sentence for difference in check_seal(dossier)]
    if not differences:
        record = read_record(dossier)
        differences += _other_tables(dossier, record)
    if images and not differences:
        found, line = _recompute(dossier, record, images, delivered, key_file, regions_file, frames, seed)
        differences += found
        lines.append(line)
    return Verified(tuple(differences), tuple(lines))


def _other_tables(dossier: Path, record: RecordDocument) -> Iterator[str]:
    """Yield the tables that are not those whose hashes the record holds."""
    recorded = {entry.table: entry.sha256 for entry in record.tables}
    for table in TABLES:
        file = f"{table}.parquet"
        if not (dossier / file).is_file() or sha256_of_file(dossier / file) != recorded.get(table):
            yield f"{file} is not the table whose hash the record holds"
            continue
        csv = dossier / f"{table}.csv"
        # Another version may write the same numbers in other digits: only its own CSV is compared byte by byte.
        if csv.exists() and record.versions.get("pyarrow") == versions().get("pyarrow"):
            whole = TableReader(dossier / file, table).whole()
            if csv.read_bytes() != csv_bytes(whole):
                yield f"{csv.name} does not hold what {file} holds"


def _recompute(
    dossier: Path,
    record: RecordDocument,
    images: tuple[Path, ...],
    delivered: tuple[Path, ...],
    key_file: Path | None,
    regions_file: Path | None,
    frames: int,
    seed: int,
) -> tuple[list[str], str]:
    """Compute a seeded sample of frames again; what differs, and what was done."""
    site = open_site(key_file)
    if record.key_id != site.pseudonyms.key_id:
        raise UsageError("the dossier was written under another site key; name that key by --key")
    if record.delivered is not None and not delivered:
        raise UsageError("the run had delivered copies; name them by --delivered")
    if (record.regions or record.regions_without_frame) and regions_file is None:
        raise UsageError("the run had drawn regions; name their file by --regions")
    plan = Plan.model_validate_json(json.dumps(record.plan.content), strict=True)
    inputs = gather_inputs(images, delivered, scope=plan.scope, pseudonyms=site.pseudonyms)
    regions = load_regions(regions_file, site.pseudonyms) if regions_file else None
    if (regions.sha256 if regions else "") != record.plan.regions_sha256:
        raise UsageError("the regions given are not those of the run; name the same file by --regions")
    assignment = Assignment(tuple(map(Candidate.of, plan.candidates)), plan.windows, regions)
    tables = readers(dossier)
    found = recompute(tables, inputs, assignment, frames=frames, seed=seed)
    line = f"{found.drawn} of {found.frames} frames were computed again, and their rows held against the tables"
    differences = _explained([*_other_figures(record, plan, tables), *found.differences], record.versions)
    if found.missing:
        # Nothing was altered by that: what is given is not all of what the run was about.
        one = found.missing == 1
        what = "instance of the record is" if one else "instances of the record are"
        differences.insert(0, f"{found.missing} {what} not among the images given")
    return differences, line


def _other_figures(record: RecordDocument, plan: Plan, tables: Mapping[str, TableReader]) -> Iterator[str]:
    """Yield the parts of the record that do not follow from the tables."""
    around = Surroundings(
        plan_source=record.plan.source,
        key_id=record.key_id,
        versions=record.versions,
        selftest=record.selftest,
        tables=record.tables,
        notes=record.notes,
        archive_codecs=frozenset(name for name in registry.names() if registry.entry(name).archive_can_write),
        regions_sha256=record.plan.regions_sha256,
        patient_unknown_studies=record.inputs.patient_unknown_studies,
        regions_without_frame=record.regions_without_frame,
    )
    again = summarise(plan, tables, around)
    for name in RecordDocument.model_fields:
        one, other = _plain(record, name), _plain(again, name)
        if not _same(one, other):
            yield f"record.json: {name} does not follow from the tables"


def _same(one: object, other: object) -> bool:
    """Whether two JSON values are equal, their numbers within the tolerance: logarithms differ between processors."""
    if isinstance(one, dict) and isinstance(other, dict):
        return one.keys() == other.keys() and all(_same(value, other[key]) for key, value in one.items())
    if isinstance(one, list) and isinstance(other, list):
        return len(one) == len(other) and all(map(_same, one, other))
    if isinstance(one, float) and isinstance(other, float):
        return math.isclose(one, other, rel_tol=RELATIVE, abs_tol=ABSOLUTE)
    return one == other


def _plain(record: RecordDocument, name: str) -> object:
    """A part of a record as JSON values, without the names of crops, which the tables do not know."""
    value = record.model_dump(mode="json", include={name})[name]
    return [{**entry, "crop": ""} for entry in value] if name == "worst_places" else value


def _explained(differences: list[str], recorded: dict[str, str]) -> list[str]:
    """Tell another version apart from an altered row."""
    now = versions()
    changed = [
        f"{name} {recorded[name]} then, {now.get(name)} now" for name in recorded if recorded[name] != now.get(name)
    ]
    if differences and changed:
        return [f"versions differ ({'; '.join(changed)}), which may explain what follows", *differences]
    if differences:
        return [
            "versions are the same: images or rows were altered, or this processor computes otherwise",
            *differences,
        ]
    return differences
