"""The command line: parse, call a job, translate errors to one sentence and an exit code."""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from safecheck import __version__
from safecheck.errors import DossierError, Interrupted, SafecheckError, UsageError
from safecheck.main_job import perform, run_main_job, say_dry_run, say_outcome
from safecheck.options import (
    Basis,
    Captures,
    Codecs,
    Delivered,
    DraftPlan,
    DryRun,
    ErrorImages,
    Images,
    Key,
    Localizers,
    LossySources,
    MostFrames,
    NoAttachment,
    Paths,
    PlanFile,
    Quiet,
    Ratios,
    Regions,
    StudyFolder,
    Workers,
)
from safecheck.policy.conditions import ExitCondition
from safecheck.screen import Screen

if TYPE_CHECKING:
    from safecheck.jobs.assess import AssessRequest
    from safecheck.policy.plan import Scope

__all__ = ["app", "main"]

_TYPER_INTERRUPTED = 130
"""What typer makes of Ctrl-C."""
_RATIOS, _CODECS = "5,8,10,15,20", "tiled,jpeg2000"
"""Candidates without a plan."""
_MOST_FRAMES = 6
"""Frames of a transform study."""

app = typer.Typer(
    name="safecheck",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
    help=(
        "Measures what irreversible recompression would do to your own DICOM images and writes a record of it. "
        "It never says that an image is fit for diagnosis: that is for local regulation and licensed clinicians."
    ),
    epilog=(
        "Exit codes: 0 ran, controls held, no proposed candidate outside a declared limit (no finding on fitness "
        "for any use); 2 call or plan wrong; 3 more left out than the plan allows, or nothing evaluated; 4 controls "
        "not held; 5 incomplete, can be resumed; 6 verification found a difference; 7 too little evidence for the "
        "declared claim; 8 internal error; 10 a proposed candidate outside a declared limit."
    ),
)


@app.callback(invoke_without_command=True)
def _root(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="Print the version and leave.")] = False,
) -> None:
    if version:
        typer.echo(__version__)
        raise typer.Exit
    if context.invoked_subcommand is None:
        raise UsageError("no command is named; see safecheck --help")


@app.command()
def census(
    paths: Paths,
    draft_plan: DraftPlan = None,
    key: Key = None,
    localizers: Localizers = False,
    secondary_captures: Captures = False,
    allow_lossy_source: LossySources = False,
    quiet: Quiet = False,
) -> None:
    """Say what is there, and what is left out and why.

    Studies, groups of like images, bits, transfer syntaxes, sizes, and what is already lossy.
    """
    from safecheck.jobs import census as job

    if draft_plan is not None and draft_plan.exists():
        raise UsageError("the file for the draft plan exists already; name another")
    screen = Screen(quiet=quiet)
    found = job.take_census(
        tuple(paths),
        scope=_scope(localizers, secondary_captures, allow_lossy_source),
        key_file=key,
        progress=lambda done, total: screen.update(f"Reading headers: {done} of {total} files"),
    )
    screen.clear()
    for line in job.lines_of(found):
        typer.echo(line)
    if draft_plan is not None:
        job.write_draft_plan(found, draft_plan)
        typer.echo("A plan to start from was written; fill in what only you can say.")


@app.command()
def assess(
    paths: Paths,
    out: Annotated[Path | None, typer.Option("--out", metavar="DOSSIER", help="Folder for the dossier.")] = None,
    plan: PlanFile = None,
    ratios: Ratios = _RATIOS,
    codecs: Codecs = _CODECS,
    regions: Regions = None,
    delivered: Delivered = None,
    dry_run: DryRun = False,
    with_images: Images = False,
    no_attachment: NoAttachment = False,
    workers: Workers = None,
    key: Key = None,
    localizers: Localizers = False,
    secondary_captures: Captures = False,
    allow_lossy_source: LossySources = False,
    quiet: Quiet = False,
) -> None:
    """Recompress, measure and write the record.

    The same command into the same dossier goes on where it was stopped.
    """
    if out is None and not dry_run:
        raise UsageError("no dossier is named; expected --out and a folder")
    if plan is not None and (ratios != _RATIOS or codecs != _CODECS):
        raise UsageError("--plan declares the candidates; --ratios and --codecs go without it")

    def request() -> AssessRequest:
        from safecheck.jobs.assess import AssessRequest

        return AssessRequest(
            paths=tuple(paths),
            out=out,
            plan_file=plan,
            ratios=_numbers(ratios),
            codecs=tuple(name.strip() for name in codecs.split(",") if name.strip()),
            scope=_scope(localizers, secondary_captures, allow_lossy_source),
            regions_file=regions,
            delivered=tuple(delivered or ()),
            key_file=key,
            workers=workers,
            with_images=with_images,
            attachment=not no_attachment,
            dry_run=dry_run,
        )

    (say_dry_run if dry_run else run_main_job)(request, Screen(quiet=quiet))


@app.command()
def report(
    dossier: Annotated[Path, typer.Argument(help="Dossier of a finished run.")],
    out: Annotated[Path, typer.Option("--out", metavar="FILE", help="PDF to write, outside the dossier.")],
) -> None:
    """Draw the PDF again from the record.

    Without images; every page says REDRAWN.
    """
    from safecheck.jobs.redraw import redraw

    redraw(dossier, out)
    typer.echo("The report was drawn again from the record.")


@app.command()
def verify(
    dossier: Annotated[Path, typer.Argument(help="Dossier of a finished run.")],
    images: Annotated[
        list[Path] | None,
        typer.Option("--images", metavar="PATH", help="Inputs of the run: compute some rows again."),
    ] = None,
    delivered: Annotated[
        list[Path] | None, typer.Option("--delivered", metavar="PATH", help="Delivered copies of the run.")
    ] = None,
    regions: Regions = None,
    frames: Annotated[int, typer.Option("--frames", min=1, help="How many frames to compute again.")] = 10,
    seed: Annotated[int, typer.Option("--seed", help="Another seed draws other frames.")] = 1,
    key: Key = None,
) -> None:
    """Check the seal; with images, compute rows again."""
    from safecheck.jobs.verify import verify as job

    found = job(
        dossier,
        images=tuple(images or ()),
        delivered=tuple(delivered or ()),
        key_file=key,
        regions_file=regions,
        frames=frames,
        seed=seed,
    )
    for line in (*found.lines, *found.differences):
        typer.echo(line)
    if found.differences:
        raise typer.Exit(ExitCondition.DIFFERENCE)
    typer.echo("No difference was found.")


@app.command()
def transforms(
    paths: Paths,
    out: StudyFolder,
    frames: MostFrames = _MOST_FRAMES,
    regions: Regions = None,
    with_images: ErrorImages = False,
    basis: Basis = False,
    key: Key = None,
    localizers: Localizers = False,
    secondary_captures: Captures = False,
    allow_lossy_source: LossySources = False,
    quiet: Quiet = False,
) -> None:
    """Set cosine, Walsh-Hadamard and Fourier side by side.

    On the middle frame of each series: which part of a loss is the transform's, the tile size's, the quantiser's.
    """
    from safecheck.jobs.transforms import TransformRequest, lines_of, study_transforms

    screen = Screen(quiet=quiet)
    request = TransformRequest(
        paths=tuple(paths),
        out=out,
        scope=_scope(localizers, secondary_captures, allow_lossy_source),
        regions_file=regions,
        key_file=key,
        most_frames=frames,
        with_images=with_images,
        basis_functions=basis,
    )
    study = study_transforms(request, screen.update)
    screen.clear()
    for line in lines_of(study):
        typer.echo(line)
    if not study.frames:
        typer.echo("No frame could be studied; nothing was written.")
        raise typer.Exit(ExitCondition.LEFT_OUT)
    typer.echo(f"Pages: {out}/transforms.pdf")


@app.command()
def lookup(
    pseudonym: Annotated[str, typer.Argument(help="As it stands in a record.")],
    paths: Paths,
    key: Key = None,
) -> None:
    """Turn a pseudonym back, on this screen only.

    The images are read again; nothing is kept.
    """
    from safecheck.jobs.lookup import lookup as job

    if not sys.stdout.isatty():
        raise UsageError("a pseudonym is turned back on a screen only, and the output goes elsewhere")
    for line in job(pseudonym, tuple(paths), key):
        typer.echo(line)


@app.command()
def selftest() -> None:
    """Say which codecs work on this machine.

    And whether the reversible ones are bit-exact.
    """
    from safecheck.jobs.selftest import lines_of, run_selftest

    checks = run_selftest()
    for line in lines_of(checks):
        typer.echo(line)
    if any(check.reversible_exact is False for check in checks):
        raise typer.Exit(ExitCondition.CONTROLS)


@app.command()
def demo(
    out: Annotated[Path, typer.Option("--out", metavar="FOLDER", help="New folder for study and dossier.")] = Path(
        "safecheck-demo"
    ),
    key: Key = None,
    quiet: Quiet = False,
) -> None:
    """Assess a synthetic study, to see a record."""
    from safecheck.jobs.demo import DOSSIER, STUDY, write_demo

    screen = Screen(quiet=quiet)
    screen.update("Making a synthetic study")
    plan = write_demo(out)

    def request() -> AssessRequest:
        from safecheck.jobs.assess import AssessRequest

        return AssessRequest(paths=(out / STUDY,), out=out / DOSSIER, plan_file=plan, key_file=key, with_images=True)

    say_outcome(perform(request, screen), demonstration=True)


def _scope(localizers: bool, secondary_captures: bool, lossy_sources: bool) -> Scope:
    """What the command line takes in."""
    from safecheck.policy.plan import Scope

    return Scope(localizers=localizers, secondary_captures=secondary_captures, lossy_sources=lossy_sources)


def _numbers(text: str) -> tuple[float, ...]:
    """'5,8,10' -> (5.0, 8.0, 10.0)."""
    try:
        return tuple(float(part) for part in text.split(",") if part.strip())
    except ValueError:
        raise UsageError(f"--ratios is expected as numbers with commas between, e.g. 5,8,10; found {text!r}") from None


def main() -> None:
    """Run the command line; every error becomes one sentence and an exit code, and no trace reaches the user."""
    sys.exit(_guarded(lambda: app(standalone_mode=False)))


def _guarded(call: Callable[[], object]) -> int:
    """Exit code of a call."""
    try:
        result = call()
    except (KeyboardInterrupt, typer.Abort, Interrupted) as error:
        text = str(error) if isinstance(error, Interrupted) else "stopped; the same command goes on"
        return _say(text, ExitCondition.INCOMPLETE)
    except typer.Exit as leave:
        return int(leave.exit_code)
    except SystemExit:
        # So typer leaves where the reader of a pipe is gone: not all was said, and nobody is there to be told.
        return int(ExitCondition.INCOMPLETE)
    except typer.TyperException as error:
        return _say(error.format_message(), ExitCondition.USAGE)
    except UsageError as error:
        return _say(str(error), ExitCondition.USAGE)
    except DossierError as error:
        return _say(str(error), ExitCondition.DIFFERENCE)
    except SafecheckError as error:
        return _say(str(error), ExitCondition.INTERNAL)
    except OSError as error:
        # Its own text names the path; the system's words for the fault do not.
        return _say(f"the system refused to read or write: {os.strerror(error.errno or 0)}", ExitCondition.INTERNAL)
    except Exception as error:
        # A foreign exception's text may hold identifiers or paths; its class cannot.
        return _say(f"internal error ({type(error).__name__})", ExitCondition.INTERNAL)
    if result == _TYPER_INTERRUPTED:
        return _say("stopped; the same command goes on", ExitCondition.INCOMPLETE)
    return result if isinstance(result, int) else 0


def _say(text: str, code: ExitCondition) -> int:
    """Print one sentence on the error stream and give the exit code."""
    with contextlib.suppress(BrokenPipeError):
        typer.echo(f"safecheck: {text}", err=True)
    return int(code)
