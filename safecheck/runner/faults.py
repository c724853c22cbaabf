"""Faults of the system while a run reads and writes its dossier: what is finished stays, so the run can go on later."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Iterator

from safecheck.errors import Interrupted

__all__ = ["interrupted_by", "resumable", "word_of"]


def word_of(error: OSError) -> str:
    """The system's word for a fault; its own text would name a path."""
    return os.strerror(error.errno) if error.errno else "a fault without a number"


def interrupted_by(word: str) -> Interrupted:
    """What a user is told of a fault, given the system's word for it."""
    return Interrupted(
        f"the system refused to write or read: {word}; what is finished stays, and the same command goes on once that "
        "is mended"
    )


@contextlib.contextmanager
def resumable() -> Iterator[None]:
    """Turn a fault of the system, such as a full disk, into a stop that can be resumed.

    Raises
    ------
    Interrupted
        For an OSError.
    """
    try:
        yield
    except BrokenPipeError:
        # Whoever read what the run tells is gone: no fault of the dossier.
        raise
    except OSError as error:
        raise interrupted_by(word_of(error)) from None
