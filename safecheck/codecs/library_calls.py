"""Where a codec library is called: whatever it raises has our name, and so has a code other than the one asked for."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

from safecheck.errors import CannotEncode, CorruptCode

__all__ = ["LIBRARY_ERRORS", "reading", "writing"]

LIBRARY_ERRORS = (RuntimeError, ValueError, TypeError, OverflowError, MemoryError)
"""What the libraries were seen, or say, to raise; the errors of imagecodecs are RuntimeError."""


@contextmanager
def writing(codec: str, library: str) -> Iterator[None]:
    """Around a call that writes a code, and the check of its header.

    Raises
    ------
    CannotEncode
        If the library gives up, or the check finds another code than asked for.
    """
    try:
        yield
    except CorruptCode as error:
        raise CannotEncode(f"{codec}: {library} wrote another code than asked for: {error}") from error
    except LIBRARY_ERRORS as error:
        raise CannotEncode(f"{codec}: {library} wrote no code: {error}") from error


@contextmanager
def reading(codec: str, library: str) -> Iterator[None]:
    """Around a call that reads a code.

    Raises
    ------
    CorruptCode
        If the library gives up.
    """
    try:
        yield
    except LIBRARY_ERRORS as error:
        raise CorruptCode(f"{codec}: {library} cannot read the code: {error}") from error
