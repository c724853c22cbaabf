"""A pseudonym turned back, for the user's own screen only."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path

from safecheck.dicom.identity import identities
from safecheck.errors import UsageError
from safecheck.jobs.site import open_site

__all__ = ["lookup"]


def lookup(pseudonym: str, paths: Sequence[Path], key_file: Path | None) -> Iterator[str]:
    """Yield what the images say of the one whom a pseudonym names: nothing is kept, so the images are read again.

    Raises
    ------
    UsageError
        If no image given has that pseudonym under this site key.
    """
    found = sorted(set(identities(pseudonym, paths, open_site(key_file).pseudonyms)))
    if not found:
        raise UsageError("no image given has that pseudonym under this site key")
    yield from found
