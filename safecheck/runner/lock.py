"""One run at a time in a dossier: a file held by a lock of the system, which ends with the process that took it.

What a killed run leaves is a file without a lock, and that is no obstacle to the next.
"""

from __future__ import annotations

import errno
import os
import sys
from pathlib import Path

from safecheck.errors import UsageError

__all__ = ["release", "take"]

_HELD_BY_ANOTHER = frozenset({errno.EAGAIN, errno.EACCES, errno.EDEADLK})
"""What POSIX and Windows answer where another holds the lock."""

if sys.platform == "win32":
    import msvcrt

    def _lock(descriptor: int) -> None:
        msvcrt.locking(descriptor, msvcrt.LK_NBLCK, 1)

else:
    import fcntl

    def _lock(descriptor: int) -> None:
        # Of the open file, not of the process: a second run in one process is refused too, and closing another
        # descriptor of the same file does not end it.
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)


def take(path: Path) -> int:
    """Take the lock of a file, which is made where it is not there.

    Returns
    -------
    int
        Descriptor that holds the lock, for `release`; not inherited by other programs.

    Raises
    ------
    UsageError
        If another run holds it.
    OSError
        If the file cannot be opened, or the file system knows no locks.
    """
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o666)
    try:
        _lock(descriptor)
    except OSError as error:
        os.close(descriptor)
        if error.errno in _HELD_BY_ANOTHER:
            raise UsageError(
                "another run is at work in the dossier's folder; expected to wait for its end, or another folder"
            ) from None
        raise
    except BaseException:
        os.close(descriptor)
        raise
    return descriptor


def release(descriptor: int) -> None:
    """Give a lock back."""
    os.close(descriptor)
