"""Verification: the seal, and a seeded sample of rows computed again from the images."""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import json
import math
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from safecheck.dicom.instance import Instance
from safecheck.dicom.reader import open_instance
from safecheck.documents import from_json
from safecheck.errors import DossierError
from safecheck.evaluation import Assignment, Candidate, evaluate
from safecheck.jobs.dossier import RECORD, readers
from safecheck.jobs.inputs import gather_inputs
from safecheck.jobs.regions import load_regions
from safecheck.jobs.site import open_site
from safecheck.jobs.versions import versions
from safecheck.policy.plan import Plan
from safecheck.record.document import RecordDocument
from safecheck.report.seal import check_seal

__all__ = ["ABSOLUTE", "RELATIVE", "Verified", "read_record", "verify"]

RELATIVE, ABSOLUTE = 1e-9, 1e-12
"""Figures computed again agree within these, whatever the processor."""
_TEXT_OF_CODECS = frozenset({"codec_version", "encodes"})
"""Columns that another library version changes without changing a figure."""


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
        If the folder holds no dossier.
    UsageError
        If the inputs or the key cannot be read.
    """
    if not dossier.is_dir():
        raise DossierError("no such dossier; expected a folder that a run has written")
    differences = [difference.sentence for difference in check_seal(dossier)]
    lines = ["The seal was checked: every file against its hash"]
    if images and not differences:
        found, more = _recompute(dossier, images, delivered, key_file, regions_file, frames, seed)
        differences += found
        lines += more
    return Verified(tuple(differences), tuple(lines))


def _recompute(
    dossier: Path,
    images: tuple[Path, ...],
    delivered: tuple[Path, ...],
    key_file: Path | None,
    regions_file: Path | None,
    frames: int,
    seed: int,
) -> tuple[list[str], list[str]]:
    """Compute a seeded sample of frames again and hold every figure against its row."""
    record, site = read_record(dossier), open_site(key_file)
    if record.key_id != site.pseudonyms.key_id:
        raise DossierError("the dossier was written under another site key; name that key by --key")
    plan = Plan.model_validate_json(json.dumps(record.plan.content), strict=True)
    inputs = gather_inputs(images, delivered, scope=plan.scope, pseudonyms=site.pseudonyms)
    regions = load_regions(regions_file, site.pseudonyms) if regions_file else None
    assignment = Assignment(tuple(map(Candidate.of, plan.candidates)), plan.windows, regions)
    measures = readers(dossier)["measures"].whole().to_pylist()
    rows: dict[tuple[str, int], list[dict[str, Any]]] = {}
    for row in measures:
        rows.setdefault((row["instance"], row["frame"]), []).append(row)
    known = {each.instance: each for each in inputs.assessed}
    drawn = sorted(rows, key=lambda key: hashlib.sha256(f"{seed}/{key[0]}/{key[1]}".encode()).digest())[:frames]
    differences: list[str] = []
    for instance, number in drawn:
        if instance not in known:
            differences.append(f"instance {instance} of the record is not among the images given")
            continue
        copy = inputs.pairs.get(known[instance].input)
        differences += _differing(known[instance], copy, number, assignment, rows[instance, number])
    lines = [f"{len(drawn)} of {len(rows)} frames were computed again, all their rows held within 1e-9"]
    return _explained(differences, record.versions), lines


def _differing(
    instance: Instance, copy: Instance | None, number: int, assignment: Assignment, rows: list[dict[str, Any]]
) -> Iterator[str]:
    """Yield what differs between a frame's rows and the same rows computed again."""
    with contextlib.ExitStack() as stack:
        frame = stack.enter_context(open_instance(instance)).frame(number)
        delivered = stack.enter_context(open_instance(copy)).frame(number) if copy else None
        full = any(row["role"] == "planted" or row["role"] == "repeat" for row in rows)
        again = evaluate(frame, assignment, full_controls=full, delivered=delivered)
    computed = {(row.role, row.candidate, row.codec): dataclasses.asdict(row) for row in again.measures}
    for row in rows:
        other = computed.get((row["role"], row["candidate"], row["codec"]))
        place = f"instance {instance.instance}, frame {number}, {row['candidate']}"
        if other is None:
            yield f"{place}: no such row comes out"
            continue
        for name, value in row.items():
            if name not in _TEXT_OF_CODECS and not _agree(value, other[name]):
                yield f"{place}: {name} is {value} in the table and {other[name]} computed again"


def _agree(one: object, other: object) -> bool:
    """Whether two values of a cell are the same within the tolerance."""
    if isinstance(one, float) and isinstance(other, float):
        return math.isclose(one, other, rel_tol=RELATIVE, abs_tol=ABSOLUTE)
    return one == other


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
