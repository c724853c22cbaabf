"""What a dossier was begun with, so that only the same run may resume in it."""

from __future__ import annotations

import dataclasses
import enum
import hashlib
import hmac
import os
import shutil
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np

from safecheck.dicom.instance import Instance
from safecheck.documents import Document, from_json
from safecheck.errors import DocumentError, DossierError, ResumeMismatch, UsageError
from safecheck.evaluation import Assignment
from safecheck.record.canonical import canonical_bytes, document_bytes
from safecheck.runner.faults import word_of
from safecheck.runner.lock import release, take

__all__ = ["WORK", "Manifest", "WorkFolder", "begin", "describe"]

WORK = "work"
"""Folder inside a dossier that holds the manifest and the shards while a run goes on."""
_MANIFEST = "manifest.json"
_LOCK = "lock"


class Manifest(Document):
    """What decides the rows of a run. Hashes are keyed where their content could be guessed."""

    version: int = 1
    """Of this document."""
    key_id: str
    """Short hash of the site key."""
    inputs: str
    """Keyed hash of all inputs by content, with their frames and delivered copies."""
    plan: str
    """Hash of the plan."""
    assignment: str
    """Keyed hash of what is done to every frame."""
    versions: dict[str, str]
    """This package, Python and the libraries that numbers depend on."""


def describe(
    instances: Iterable[Instance],
    pairs: Mapping[str, Instance],
    assignment: Assignment,
    *,
    plan_hash: str,
    key: bytes,
    key_id: str,
    versions: Mapping[str, str],
) -> Manifest:
    """Write down what a run is about.

    Parameters
    ----------
    instances
        The originals to assess, in any order.
    pairs
        Input pseudonym of an original -> the instance that the archive delivered for it.
    assignment
        What is done to every frame.
    plan_hash
        Of the plan as read.
    key, key_id
        Site key and its short hash.
    versions
        Name -> version of all that numbers depend on.
    """
    inputs = sorted(
        [each.input, each.frames, pairs[each.input].input if each.input in pairs else ""] for each in instances
    )
    return Manifest(
        key_id=key_id,
        inputs=_keyed(key, "inputs", inputs),
        plan=plan_hash,
        assignment=_keyed(key, "assignment", _plain(assignment)),
        versions=dict(sorted(versions.items())),
    )


@dataclass(slots=True)
class WorkFolder:
    """The work folder of a dossier, held against any other run until it is left."""

    path: Path
    _lock: int | None
    """None once it was given back."""

    def __enter__(self) -> WorkFolder:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.release()

    def release(self) -> None:
        """Let other runs in; what is in the folder stays, to be resumed."""
        if self._lock is not None:
            release(self._lock)
            self._lock = None

    def finish(self) -> None:
        """Remove the folder of a run whose dossier is complete; the manifest goes last, so a stop here resumes."""
        for path in self.path.iterdir():
            if path.name in (_MANIFEST, _LOCK):
                continue
            if path.is_dir():
                shutil.rmtree(path)
            else:
                path.unlink()
        # Windows removes no file that is open.
        self.release()
        (self.path / _LOCK).unlink()
        shutil.rmtree(self.path)


def begin(dossier: Path, manifest: Manifest) -> WorkFolder:
    """Begin a run in a folder, or go on with the same run that was stopped there.

    Parameters
    ----------
    dossier
        A folder that does not exist, is empty, or holds a run that was stopped.
    manifest
        What this run is about.

    Returns
    -------
    WorkFolder
        Inside the dossier; a context manager that keeps other runs out until it is left.

    Raises
    ------
    ResumeMismatch
        If the run in the folder was begun with another input, plan, key or version.
    UsageError
        If another run is at work in the folder, if it holds a finished dossier or anything else, or cannot be made.
    """
    work = dossier / WORK
    try:
        _check_free(dossier)
        work.mkdir(parents=True, exist_ok=True)
        held = WorkFolder(work, take(work / _LOCK))
        try:
            # Once more: another run may have finished in between.
            _check_free(dossier)
            _enter(work, manifest)
        except BaseException:
            held.release()
            raise
    except OSError as error:
        raise UsageError(f"the dossier's folder cannot be used: {word_of(error)}") from None
    return held


def _check_free(dossier: Path) -> None:
    """Raise if a folder holds anything but a run to be resumed."""
    found = {path.name for path in dossier.iterdir()} if dossier.exists() else set()
    if found and not (dossier / WORK / _MANIFEST).exists() and found != {WORK}:
        raise UsageError(_occupied(found))


def _enter(work: Path, manifest: Manifest) -> None:
    """Compare with the run that was begun here, or write down what this one is about."""
    if (work / _MANIFEST).exists():
        _compare(_read(work / _MANIFEST), manifest)
    else:
        _write(work / _MANIFEST, document_bytes(manifest))


def _occupied(found: set[str]) -> str:
    """Say why a folder without a stopped run cannot be used."""
    if "seal.json" in found:
        return "the folder holds a finished dossier; expected a new or empty folder, or a run to be resumed"
    return "the folder is not empty and holds no run to be resumed; expected a new or empty folder"


def _read(path: Path) -> Manifest:
    """Read the manifest of a stopped run."""
    try:
        return from_json(Manifest, path.read_bytes())
    except DocumentError as error:
        raise DossierError("the manifest of the stopped run cannot be read; start again in another folder") from error


def _write(path: Path, content: bytes) -> None:
    """Write a file so that it is whole or absent, also after a power cut."""
    aside = path.with_name(f"{path.name}.aside")
    with aside.open("wb") as file:
        file.write(content)
        file.flush()
        os.fsync(file.fileno())
    aside.replace(path)


def _compare(begun: Manifest, now: Manifest) -> None:
    """Raise if the stopped run was another; say what differs."""
    if begun.key_id != now.key_id:
        # All other hashes are keyed: under another key they differ whatever the inputs are.
        differ = ["site key"]
    else:
        names = {"inputs": "inputs", "plan": "plan", "assignment": "candidates, windows or regions"}
        differ = [word for name, word in names.items() if getattr(begun, name) != getattr(now, name)]
        differ += _versions(begun.versions, now.versions)
        if begun.version != now.version:
            differ.append("format of the work folder")
    if differ:
        raise ResumeMismatch(
            f"the run in this folder was begun with other values of: {', '.join(differ)}; expected the same ones, "
            "or a new folder"
        )


def _versions(begun: Mapping[str, str], now: Mapping[str, str]) -> list[str]:
    """Each version that differs, in words."""
    return [
        f"version of {name} ({begun.get(name, 'none')} then, {now.get(name, 'none')} now)"
        for name in sorted(begun.keys() | now.keys())
        if begun.get(name) != now.get(name)
    ]


def _keyed(key: bytes, what: str, content: Any) -> str:  # noqa: ANN401
    """HMAC-SHA256 over JSON values in canonical form."""
    return hmac.digest(key, what.encode() + b"\0" + canonical_bytes(content), "sha256").hex()


def _plain(value: object) -> Any:  # noqa: ANN401
    """Settings of any depth as JSON values: equal settings give equal values, in this process and in any other."""
    if isinstance(value, enum.Enum):
        return value.value
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        return ["real", value.hex()]
    if isinstance(value, Document):
        return [type(value).__name__, _plain(value.model_dump(mode="json"))]
    if isinstance(value, np.ndarray):
        return ["array", value.dtype.str, list(value.shape), hashlib.sha256(value.tobytes()).hexdigest()]
    if isinstance(value, Mapping):
        return {str(name): _plain(item) for name, item in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if dataclasses.is_dataclass(value):
        fields = {item.name: _plain(getattr(value, item.name)) for item in dataclasses.fields(value)}
        return [type(value).__name__, fields]
    raise TypeError(f"a value of kind {type(value).__name__} has no place in an assignment")
