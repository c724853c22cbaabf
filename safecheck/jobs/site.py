"""The site: its key, the names made with it, and the journal of plans and results seen here."""

from __future__ import annotations

import contextlib
import datetime
import hashlib
import json
import sqlite3
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from safecheck.dicom.pseudonyms import Pseudonyms, default_key_path, load_or_make_key

__all__ = ["Declared", "Site", "open_site"]

Declared = Literal["before the first results", "after the first results", "not known"]

_SCHEMA = """
create table if not exists plans (sha256 text primary key, first_seen text not null);
create table if not exists kernels (versions text primary key);
create table if not exists results (study text primary key, first_seen text not null);
"""


@dataclass(frozen=True, slots=True)
class Site:
    """The site key and what stands beside it."""

    key: bytes
    pseudonyms: Pseudonyms
    journal: Path
    """SQLite file beside the key; holds hashes, pseudonyms and times."""

    def see_plan(self, sha256: str) -> None:
        """Remember when a plan was first seen; a journal that cannot be written is no reason to stop."""
        with contextlib.suppress(sqlite3.Error), self._open() as journal:
            journal.execute("insert or ignore into plans values (?, ?)", (sha256, _now()))

    def see_results(self, studies: Iterable[str]) -> None:
        """Remember when results of studies were first had."""
        with contextlib.suppress(sqlite3.Error), self._open() as journal:
            rows = [(study, _now()) for study in sorted(set(studies))]
            journal.executemany("insert or ignore into results values (?, ?)", rows)

    def see_kernels(self, versions: Mapping[str, str]) -> None:
        """Remember that kernels were compiled and cached under these versions."""
        with contextlib.suppress(sqlite3.Error), self._open() as journal:
            journal.execute("insert or ignore into kernels values (?)", (_text(versions),))

    def has_kernels(self, versions: Mapping[str, str]) -> bool:
        """Whether kernels were compiled and cached under these versions; if not so, workers compile them again."""
        try:
            with self._open() as journal:
                found = journal.execute("select 1 from kernels where versions = ?", (_text(versions),)).fetchone()
        except sqlite3.Error:
            return False
        return found is not None

    def declared(self, sha256: str, studies: Iterable[str]) -> Declared:
        """Whether a plan was first seen before or after the first results of any of the studies."""
        try:
            with self._open() as journal:
                plan = journal.execute("select first_seen from plans where sha256 = ?", (sha256,)).fetchone()
                results = dict(journal.execute("select study, first_seen from results"))
        except sqlite3.Error:
            return "not known"
        if plan is None:
            return "not known"
        earlier = [seen for study in set(studies) if (seen := results.get(study)) is not None and seen < plan[0]]
        return "after the first results" if earlier else "before the first results"

    @contextlib.contextmanager
    def _open(self) -> Iterator[sqlite3.Connection]:
        with contextlib.suppress(OSError):
            # For its owner's eyes only, like the key; what SQLite writes beside it takes the same mode.
            self.journal.touch(mode=0o600)
        with contextlib.closing(sqlite3.connect(self.journal, timeout=10)) as journal, journal:
            journal.executescript(_SCHEMA)
            yield journal


def open_site(key_file: Path | None) -> Site:
    """Read the site key, or make one on first use.

    Parameters
    ----------
    key_file
        None for the user's configuration folder.

    Raises
    ------
    UsageError
        If the key file cannot be read or made, or others may read it.
    """
    key = load_or_make_key(key_file)
    beside = key_file or default_key_path()
    return Site(key, Pseudonyms(key), beside.with_name(f"{beside.name}.journal"))


def _text(versions: Mapping[str, str]) -> str:
    """Versions, and a hash of where this installation lies, since compiled code is cached beside it."""
    place = hashlib.sha256(__file__.encode()).hexdigest()[:16]
    return json.dumps({**versions, "installation": place}, sort_keys=True)


def _now() -> str:
    return datetime.datetime.now(datetime.UTC).isoformat(timespec="microseconds")
