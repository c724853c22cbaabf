"""Call the main job from the command line, and say what came of it."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import TYPE_CHECKING

import typer

from safecheck.runner.standby import Standby
from safecheck.screen import Screen

if TYPE_CHECKING:
    from safecheck.jobs.assess import AssessRequest
    from safecheck.record.document import RecordDocument

__all__ = ["perform", "run_main_job", "say_dry_run", "say_outcome"]


def run_main_job(request: Callable[[], AssessRequest], screen: Screen) -> None:
    """Run the main job, say what came of it and leave with its exit code."""
    record = perform(request, screen)
    say_outcome(record)
    if record.exit_code:
        raise typer.Exit(record.exit_code)


def perform(request: Callable[[], AssessRequest], screen: Screen) -> RecordDocument:
    """Run the main job; a worker loads its libraries while this process loads its own."""
    since = time.monotonic()
    with Standby() as standby:
        from safecheck.jobs.assess import assess as job

        asked = request()
        record = job(asked, screen.update, screen.progress, standby=standby)
    screen.clear()
    typer.echo(f"Record: {asked.out}/report.pdf")
    counts = record.inputs
    typer.echo(
        f"{_counted(counts.frames_assessed, 'frame')} of {_counted(counts.studies, 'study', 'studies')} assessed in "
        f"{time.monotonic() - since:.0f} s; {_counted(counts.excluded, 'file')} excluded, {counts.refused} refused, "
        f"{_counted(counts.frames_refused, 'frame')} refused"
    )
    return record


def say_outcome(record: RecordDocument, *, demonstration: bool = False) -> None:
    """Say what stands in the record."""
    if record.delivered is not None:
        copies = record.delivered
        typer.echo(
            f"Delivered copies: {_counted(copies.pairs_measured, 'pair')} measured, "
            f"{_counted(copies.copies_without_original, 'copy', 'copies')} without an original, "
            f"{_counted(copies.originals_without_copy, 'original')} without a copy"
        )
    typer.echo(f"Limits: {record.outcomes_text}")
    typer.echo(f"Controls: {'held' if record.controls_held else 'NOT HELD, run invalid'}")
    if demonstration:
        typer.echo(f"A run of this plan on these images ends with {record.exit_code}: {record.exit_text}")
    else:
        typer.echo(f"Exit {record.exit_code}: {record.exit_text}")


def say_dry_run(request: Callable[[], AssessRequest], screen: Screen) -> None:
    """Say what a run would do."""
    from safecheck.jobs.assess import prepare_run
    from safecheck.jobs.dry_run import dry_run

    prepared = prepare_run(request(), screen.update)
    screen.clear()
    for line in dry_run(prepared):
        typer.echo(line)


def _counted(number: int, one: str, many: str = "") -> str:
    """'1 study', '2 studies'."""
    return f"{number} {one if number == 1 else many or one + 's'}"
