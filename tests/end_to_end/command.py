"""The command line as a user meets it: a process with its own standard streams, folders and environment."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

__all__ = ["PROJECT", "Ended", "command_line", "environment_of", "run"]

PROJECT = Path(__file__).parents[2]


@dataclass(frozen=True, slots=True)
class Ended:
    """How a call ended."""

    code: int
    out: str
    err: str

    @property
    def text(self) -> str:
        """All that it said."""
        return self.out + self.err


def command_line(*arguments: str | Path) -> list[str]:
    """Arguments of the process."""
    return [sys.executable, "-m", "safecheck", *map(str, arguments)]


def environment_of(**more: str | Path) -> dict[str, str]:
    """The environment with the project importable; HOME and the like may be set anew."""
    return os.environ | {"PYTHONPATH": str(PROJECT)} | {name: str(value) for name, value in more.items()}


def run(*arguments: str | Path, folder: Path, **environment: str | Path) -> Ended:
    """Run one command in a folder."""
    ended = subprocess.run(
        command_line(*arguments),
        cwd=folder,
        env=environment_of(**environment),
        capture_output=True,
        text=True,
        timeout=300,
        check=False,
    )
    assert "Traceback" not in ended.stderr, ended.stderr
    return Ended(ended.returncode, ended.stdout, ended.stderr)
