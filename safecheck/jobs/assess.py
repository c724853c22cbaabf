"""The main job: read, recompress, measure, hold against limits, write the record."""

from __future__ import annotations

import dataclasses
import datetime
import json
import platform
import shutil
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path

from safecheck.codecs import registry
from safecheck.dicom.reader import open_instance
from safecheck.errors import UsageError
from safecheck.evaluation import Assignment, Candidate, evaluate, load_kernels
from safecheck.jobs.dossier import finish_dossier, readers, write_tables
from safecheck.jobs.inputs import Inputs, gather_inputs
from safecheck.jobs.places import write_places
from safecheck.jobs.plans import (
    DEFAULT_CODECS,
    DEFAULT_RATIOS,
    LoadedPlan,
    check_available,
    load_plan,
    plan_of_command_line,
)
from safecheck.jobs.regions import load_regions
from safecheck.jobs.selftest import run_selftest
from safecheck.jobs.site import Site, open_site
from safecheck.jobs.versions import versions
from safecheck.policy.plan import Scope
from safecheck.record.document import CodecCheckEntry, RecordDocument
from safecheck.record.run import RunFacts
from safecheck.regions.region import RegionSet
from safecheck.runner.executor import Executor
from safecheck.runner.faults import resumable
from safecheck.runner.manifest import Manifest, begin, describe
from safecheck.runner.merge import Merged, merge
from safecheck.runner.pool import LocalPool, cores
from safecheck.runner.progress import Progress
from safecheck.runner.run import refused_frames, run
from safecheck.runner.standby import Standby
from safecheck.runner.tasks import Task, plan_tasks
from safecheck.runner.worker import Treatment
from safecheck.statistics.summary import Surroundings, summarise

__all__ = ["AssessRequest", "Prepared", "Tell", "assess", "prepare_run"]

Tell = Callable[[str], None]
"""Takes one sentence for the user."""

_FINAL = "final"
_SESSIONS = "sessions.json"


@dataclass(frozen=True, slots=True)
class AssessRequest:
    """What a user asked for."""

    paths: tuple[Path, ...]
    out: Path | None
    """Dossier; a dry run may name none."""
    plan_file: Path | None = None
    ratios: tuple[float, ...] = DEFAULT_RATIOS
    codecs: tuple[str, ...] = DEFAULT_CODECS
    scope: Scope = field(default_factory=Scope)
    """Of the command line; what it takes in is added to the plan's own."""
    regions_file: Path | None = None
    delivered: tuple[Path, ...] = ()
    key_file: Path | None = None
    workers: int | None = None
    """None for all cores."""
    with_images: bool = False
    attachment: bool = True
    dry_run: bool = False
    """Only say what a run would do: what is missing is told, and refuses nothing."""


@dataclass(frozen=True, slots=True)
class Prepared:
    """All that is known before a frame is decoded."""

    request: AssessRequest
    loaded: LoadedPlan
    site: Site
    inputs: Inputs
    assignment: Assignment
    manifest: Manifest
    tasks: tuple[Task, ...]

    @property
    def studies(self) -> frozenset[str]:
        """Pseudonyms of the studies to assess."""
        return frozenset(each.study for each in self.inputs.assessed)


def prepare_run(request: AssessRequest, tell: Tell, standby: Standby | None = None) -> Prepared:
    """Read plan, key, regions and headers, and cut the work into tasks.

    A worker on standby makes itself ready meanwhile, unless kernels must be compiled first.

    Raises
    ------
    UsageError
        If a document, a path or the key is wrong, or a codec is missing that a run, other than a dry one, needs.
    """
    loaded = _loaded(request)
    if request.out is not None and not request.dry_run:
        check_available(loaded.plan)
    site = open_site(request.key_file)
    if standby is not None and site.has_kernels(versions()):
        standby.prepare()
    site.see_plan(loaded.sha256)
    if request.out is not None and _lies_in(request.out, (*request.paths, *request.delivered)):
        raise UsageError("the dossier would lie among the images; name a folder elsewhere with --out")
    inputs = gather_inputs(
        request.paths,
        request.delivered,
        scope=loaded.plan.scope,
        pseudonyms=site.pseudonyms,
        progress=lambda done, found: tell(f"Reading headers: {done} of {found} files"),
    )
    regions = load_regions(loaded.regions_file, site.pseudonyms) if loaded.regions_file else None
    for sentence in regions.refused if regions else ():
        tell(f"Left out of the regions: {sentence}")
    assignment = Assignment(tuple(map(Candidate.of, loaded.plan.candidates)), loaded.plan.windows, regions)
    manifest = describe(
        inputs.assessed,
        inputs.pairs,
        assignment,
        plan_hash=loaded.sha256,
        key=site.key,
        key_id=site.pseudonyms.key_id,
        versions=versions(),
    )
    prepared = Prepared(request, loaded, site, inputs, assignment, manifest, ())
    return dataclasses.replace(prepared, tasks=_tasks(prepared, frozenset()))


def _tasks(prepared: Prepared, refused: frozenset[tuple[str, int]]) -> tuple[Task, ...]:
    """The work cut into tasks, with the full controls on frames that are not known to be refused."""
    controls = prepared.loaded.plan.controls
    return plan_tasks(
        prepared.inputs.assessed,
        prepared.inputs.pairs,
        prepared.manifest,
        prepared.site.key,
        assignment=prepared.assignment,
        share_percent=controls.share_percent,
        seed=controls.seed,
        without=refused,
    )


def _lies_in(out: Path, paths: tuple[Path, ...]) -> bool:
    """Whether a folder lies in one of the folders given: its files would be taken for inputs."""
    place = out.resolve()
    return any(place.is_relative_to(path.resolve()) for path in paths if path.is_dir())


def _loaded(request: AssessRequest) -> LoadedPlan:
    """The plan of a file with what the command line adds, or one made from the command line."""
    if request.plan_file is None:
        return plan_of_command_line(request.ratios, request.codecs, request.scope, request.regions_file)
    loaded = load_plan(request.plan_file)
    asked, own = request.scope, loaded.plan.scope
    scope = own.model_copy(update={name: getattr(own, name) or getattr(asked, name) for name in type(own).model_fields})
    plan = loaded.plan.model_copy(update={"scope": scope})
    return LoadedPlan(plan, loaded.source, request.regions_file or loaded.regions_file)


def assess(
    request: AssessRequest,
    tell: Tell,
    report: Callable[[Progress], None],
    *,
    executor: Executor | None = None,
    standby: Standby | None = None,
) -> RecordDocument:
    """Run the main job, or go on with one that was stopped, and write the dossier.

    Parameters
    ----------
    request
        With a dossier to write.
    tell
        Takes sentences for the user.
    report
        Takes how far the run is.
    executor
        Who performs the tasks; None for processes on this machine.
    standby
        The first of these processes, where it was started ahead.

    Raises
    ------
    UsageError
        If the call, the plan or the dossier's folder is wrong.
    Interrupted
        If stopped, or if the system refuses to write; the same call goes on.
    """
    if request.out is None:
        raise UsageError("no dossier is named; expected --out and a folder")
    prepared = prepare_run(request, tell, standby)
    executor = executor or LocalPool(request.workers or cores(), standby)
    with begin(request.out, prepared.manifest) as held, resumable():
        record = _perform(prepared, held.path, request.out, executor, tell, report)
        held.finish()
    return record


def _perform(
    prepared: Prepared,
    work: Path,
    dossier: Path,
    executor: Executor,
    tell: Tell,
    report: Callable[[Progress], None],
) -> RecordDocument:
    """Assess all frames and write the dossier, from where the work folder stands."""
    started, sessions = _open_session(work)
    declared = prepared.site.declared(prepared.loaded.sha256, prepared.studies)
    clock = {"start": time.monotonic()}
    # The selftest runs beside the workers, whose start it would otherwise hold up.
    with ThreadPoolExecutor(1) as beside:
        checking = beside.submit(run_selftest)
        tasks = _run_all(prepared, work, executor, tell, report)
        checks = checking.result()
    clock["assessed"] = time.monotonic()
    tell("Writing the record")
    final = _fresh(work / _FINAL)
    merged = merge(tasks, work, final)
    record = _record(prepared, merged, final, checks)
    prepared.site.see_results(prepared.studies)
    facts = RunFacts(
        started=started,
        finished=datetime.datetime.now(datetime.UTC),
        workers=executor.workers,
        seconds={
            "assess": round(clock["assessed"] - clock["start"], 3),
            "record": round(time.monotonic() - clock["assessed"], 3),
        },
        sessions=sessions,
        host=platform.node(),
        system=f"{platform.system()} {platform.machine()}, Python {platform.python_version()}",
        plan_declared=declared if prepared.loaded.source == "file" else "not known",
    )
    finish_dossier(final, record, facts, attachment=prepared.request.attachment)
    _publish(final, dossier)
    return record


def _run_all(
    prepared: Prepared, work: Path, executor: Executor, tell: Tell, report: Callable[[Progress], None]
) -> tuple[Task, ...]:
    """Run all tasks; where a frame that was to carry the full controls is refused, another one carries them."""
    treatment = Treatment(prepared.assignment, partial(evaluate, threads=_threads(prepared, executor)), open_instance)
    tasks: tuple[Task, ...] = ()
    again = prepared.tasks
    while again != tasks:
        tasks = again
        run(
            tasks,
            treatment,
            work,
            executor=executor,
            warm_up=lambda: _warm_up(prepared, tell),
            report=report,
        )
        again = _tasks(prepared, refused_frames(tasks, work))
    return tasks


def _threads(prepared: Prepared, executor: Executor) -> int:
    """Threads of each worker: more than one only where there are fewer tasks than cores, as with a single film."""
    busy = max(1, min(executor.workers, len(prepared.tasks)))
    return max(1, executor.workers // busy)


def _warm_up(prepared: Prepared, tell: Tell) -> None:
    """Compile once, here, before workers start; nothing to do where these versions have been compiled before."""
    site, made_of = prepared.site, versions()
    adaptive = any(("size", "adaptive") in each.settings for each in prepared.assignment.candidates)
    if adaptive:
        made_of["tiled"] = "adaptive"
    if site.has_kernels(made_of):
        return
    tell("Preparing compiled code (some seconds on the first run after an installation)")
    load_kernels(adaptive)
    site.see_kernels(made_of)


def _record(prepared: Prepared, merged: Merged, folder: Path, checks: tuple[CodecCheckEntry, ...]) -> RecordDocument:
    """The record from the tables, with crops where they were asked for."""
    tables = write_tables(folder, prepared.inputs, merged)
    around = Surroundings(
        plan_source=prepared.loaded.source,
        key_id=prepared.site.pseudonyms.key_id,
        versions=versions(),
        selftest=checks,
        tables=tables,
        notes=merged.notes,
        archive_codecs=frozenset(name for name in registry.names() if registry.entry(name).archive_can_write),
        regions_sha256=prepared.assignment.regions.sha256 if prepared.assignment.regions else "",
        patient_unknown_studies=prepared.inputs.patient_unknown_studies,
        regions_without_frame=_without_frame(prepared.assignment.regions, folder),
    )
    record = summarise(prepared.loaded.plan, readers(folder), around)
    if not prepared.request.with_images:
        return record
    places = write_places(
        folder, record.worst_places, prepared.inputs.assessed, prepared.inputs.pairs, prepared.assignment
    )
    return record.model_copy(update={"worst_places": places})


def _without_frame(regions: RegionSet | None, folder: Path) -> tuple[str, ...]:
    """Labels of regions that cover no frame assessed, and what the carrier's reader refused: named, not dropped."""
    if regions is None:
        return ()
    _, found = readers(folder)["regions"].codes("region")
    return (*(region.label for region in regions.regions if region.name not in found), *regions.refused)


def _open_session(work: Path) -> tuple[datetime.datetime, int]:
    """When the run was begun, and how often it was taken up, this time included."""
    path = work / _SESSIONS
    known = json.loads(path.read_text(encoding="utf-8")) if path.exists() else {}
    started = known.get("started") or datetime.datetime.now(datetime.UTC).isoformat()
    sessions = known.get("sessions", 0) + 1
    aside = path.with_suffix(".aside")
    aside.write_text(json.dumps({"started": started, "sessions": sessions}), encoding="utf-8")
    aside.replace(path)
    return datetime.datetime.fromisoformat(started), sessions


def _fresh(folder: Path) -> Path:
    """An empty folder, whatever an earlier session left there."""
    if folder.exists():
        shutil.rmtree(folder)
    folder.mkdir()
    return folder


def _publish(final: Path, dossier: Path) -> None:
    """Move the finished files into the dossier, the seal last: a dossier with a seal is complete."""
    for path in sorted(final.iterdir(), key=lambda path: path.name in ("seal.json", "SHA256SUMS")):
        target = dossier / path.name
        if target.is_dir():
            shutil.rmtree(target)
        path.replace(target)
