"""Starting worker processes, one of them ahead of its orders.

This file imports nothing slow, so that a worker can load its libraries while its caller still loads its own.
"""

from __future__ import annotations

import contextlib
import os
import pickle
import subprocess
import sys
from pathlib import Path
from types import TracebackType
from typing import Self

__all__ = ["PREPARE", "Standby", "close", "start_process"]

PREPARE = "prepare"
"""An order to load the compiled kernels; given only where they have been compiled before."""
_LIBRARIES = ("OMP_NUM", "OPENBLAS_NUM", "MKL_NUM", "VECLIB_MAXIMUM", "NUMBA_NUM")
_ONE_THREAD = {f"{library}_THREADS": "1" for library in _LIBRARIES}
"""Processes share the cores already; libraries read these when they are loaded."""


def start_process() -> subprocess.Popen[bytes]:
    """Start a worker with the parent's import path, one thread per library, and a process group of its own.

    The group keeps Ctrl-C from reaching it; nothing it prints goes anywhere, since it may hold identifiers. The import
    path goes by the environment, which other users of the machine cannot see.
    """
    command = [sys.executable, "-P", "-c", "from safecheck.runner.process import main; main()"]
    path = os.pathsep.join(entry or str(Path.cwd()) for entry in sys.path)
    environment = os.environ | _ONE_THREAD | {"PYTHONPATH": path}
    if sys.platform == "win32":
        flags = subprocess.CREATE_NEW_PROCESS_GROUP
        return subprocess.Popen(
            command, stdin=-1, stdout=-1, stderr=subprocess.DEVNULL, env=environment, creationflags=flags
        )
    return subprocess.Popen(command, stdin=-1, stdout=-1, stderr=subprocess.DEVNULL, env=environment, process_group=0)


def close(process: subprocess.Popen[bytes]) -> None:
    """End a worker at once, and close what leads to it."""
    process.kill()
    process.wait()
    for stream in (process.stdin, process.stdout):
        if stream is not None:
            # What a dead worker did not read cannot be flushed.
            with contextlib.suppress(OSError):
                stream.close()


class Standby:
    """A worker started before it is known what is to be done; ended on leaving, unless someone took it."""

    def __init__(self) -> None:
        self._process: subprocess.Popen[bytes] | None = start_process()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        left = self.take()
        if left is not None:
            close(left)

    def prepare(self) -> None:
        """Let it load the compiled kernels; one that is dead already is noticed when it is given a task."""
        if self._process is not None and self._process.stdin is not None:
            with contextlib.suppress(OSError):
                self._process.stdin.write(pickle.dumps(PREPARE))
                self._process.stdin.flush()

    def take(self) -> subprocess.Popen[bytes] | None:
        """Give the process away, once."""
        process, self._process = self._process, None
        return process
