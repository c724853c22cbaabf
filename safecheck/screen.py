"""One line of progress on the user's screen, written over as work goes on."""

from __future__ import annotations

import sys
import time
from typing import Protocol

import typer

__all__ = ["Advance", "Screen"]

_LEAST_PAUSE_S = 0.2


class Advance(Protocol):
    """How far a run is."""

    @property
    def done(self) -> int:
        """Parts done."""
        ...

    @property
    def total(self) -> int:
        """Parts in all."""
        ...

    @property
    def frames(self) -> int:
        """Frames in the parts done."""
        ...

    @property
    def remaining_s(self) -> float | None:
        """Time that remains; None while too little is known."""
        ...

    @property
    def note(self) -> str:
        """What happened that is worth telling, or ''."""
        ...


class Screen:
    """The error stream: a line written over on a terminal, one line for each kind of work elsewhere.

    Parameters
    ----------
    quiet
        Show nothing.
    """

    def __init__(self, *, quiet: bool) -> None:
        self._quiet = quiet
        self._rewrites = sys.stderr.isatty()
        self._last = ""
        self._since = 0.0

    def update(self, text: str) -> None:
        """Show a sentence; its words up to a colon say what kind of work it is of."""
        same_kind = text.split(":")[0] == self._last.split(":")[0]
        if self._quiet or (same_kind and time.monotonic() - self._since < _LEAST_PAUSE_S):
            return
        if self._rewrites:
            typer.echo(f"\r\x1b[K{text}", nl=False, err=True)
        elif not same_kind:
            typer.echo(text, err=True)
        self._last, self._since = text, time.monotonic()

    def progress(self, found: Advance) -> None:
        """Show how far a run is."""
        left = "" if found.remaining_s is None else f", about {_duration(found.remaining_s)} left"
        if found.note:
            self.clear()
            self.update(found.note)
        self.update(
            f"Assessing: {found.done} of {_counted(found.total, 'part')}, {_counted(found.frames, 'frame')}{left}"
        )

    def clear(self) -> None:
        """Leave an empty line behind."""
        if self._rewrites and self._last and not self._quiet:
            typer.echo("\r\x1b[K", nl=False, err=True)
        self._last = ""


def _counted(number: int, one: str) -> str:
    """'1 frame', '2 frames'."""
    return f"{number} {one}{'' if number == 1 else 's'}"


def _duration(seconds: float) -> str:
    """Seconds in words."""
    if seconds < 90:
        return f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 5400 else f"{seconds / 3600:.1f} h"
