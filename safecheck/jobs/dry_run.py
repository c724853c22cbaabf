"""What a run would do: counts, time, disk, claims that the sample cannot carry, and the plan's hash."""

from __future__ import annotations

from collections.abc import Iterator

from safecheck.jobs.assess import Prepared
from safecheck.jobs.plans import is_available, missing_controls
from safecheck.jobs.trial import expect
from safecheck.runner.pool import cores
from safecheck.runner.progress import full_controls_of
from safecheck.statistics.bounds import patients_needed
from safecheck.wording import NO_BOUND, SHORT_CAUTION, sentence_of

__all__ = ["dry_run"]

_BYTES_PER_FRAME_AND_CANDIDATE = 600
"""Rows of all tables in Parquet and CSV, measured on CT; an estimate for the disk."""
_START_S = 5.0
"""From the start of the command to the first frame, and from the last one to the end of the report."""


def dry_run(prepared: Prepared) -> Iterator[str]:
    """Yield the lines that a dry run prints; a few frames are run to learn the speed."""
    inputs, plan = prepared.inputs, prepared.loaded.plan
    frames = sum(each.frames for each in inputs.assessed)
    studies = len(prepared.studies)
    patients = len({each.patient for each in inputs.assessed})
    yield f"Files: {len(inputs.assessed)} to assess, {len(inputs.left_out) + len(inputs.out_of_scope)} left out"
    yield f"Frames: {frames}, studies: {studies}, patients: {patients}"
    yield from _reasons(prepared)
    if inputs.matching is not None:
        yield (
            f"Delivered copies: {len(inputs.matching.pairs)} matched, {len(inputs.matching.unmatched_delivered)} "
            f"without an original, {len(inputs.matching.unmatched_originals)} originals without a copy"
        )
    yield f"Candidates: {len(plan.candidates)}, limits: {len(plan.limits)}"
    for name in dict.fromkeys(candidate.codec for candidate in plan.candidates):
        yield f"  {name}: {'available' if is_available(name) else 'not available here'}"
    for name in missing_controls():
        yield f"  {name}, a control of every run: not available here"
    yield from _cost(prepared)
    yield from _evidence(prepared, patients)
    yield from _idle_limits(prepared)
    yield f"Plan hash (SHA-256): {prepared.loaded.sha256}"
    yield SHORT_CAUTION


def _reasons(prepared: Prepared) -> Iterator[str]:
    """Files left out by reason."""
    counts: dict[str, int] = {}
    for left in prepared.inputs.left_out:
        counts[left.reason] = counts.get(left.reason, 0) + 1
    if prepared.inputs.out_of_scope:
        counts["not-selected"] = len(prepared.inputs.out_of_scope)
    for reason, files in sorted(counts.items()):
        yield f"  {files} left out: {sentence_of(reason)}"


def _cost(prepared: Prepared) -> Iterator[str]:
    """Time, rows and disk, from a few frames that are run for the purpose."""
    if not prepared.tasks:
        yield "Time, rows and disk: nothing to assess"
        return
    missing = [each.codec for each in prepared.assignment.candidates if not is_available(each.codec)]
    missing += missing_controls()
    if missing:
        yield f"Time and rows: not known, and the run is refused, while {missing[0]} is not available here"
        return
    frames = [frame for task in prepared.tasks for frame in task.frames]
    expected = expect(frames, prepared.assignment, full_controls_of(prepared.assignment))
    if expected is None:
        yield "Time and rows: not known, the frames tried were refused"
    else:
        # Workers share out tasks, and one without a task helps nobody.
        workers = prepared.request.workers or cores()
        seconds = _START_S + expected.seconds / min(workers, len(prepared.tasks))
        yield f"Time: about {seconds:.0f} s on {workers} workers, after compiled code is prepared"
        yield (
            f"Rows: about {expected.measures:.0f} of measures, {expected.windows:.0f} of windows, "
            f"{expected.regions:.0f} of regions"
        )
    disk = len(frames) * (len(prepared.assignment.candidates) + 2) * _BYTES_PER_FRAME_AND_CANDIDATE
    yield f"Disk: about {max(disk / 1e6, 0.1):.1f} MB"


def _idle_limits(prepared: Prepared) -> Iterator[str]:
    """Limits that no image here can be held against."""
    origins = [each.origin for each in prepared.inputs.assessed]
    regions = prepared.assignment.regions.regions if prepared.assignment.regions else ()
    has: dict[str, set[str]] = {
        "modality": {origin.modality for origin in origins},
        "body_part": {origin.body_part for origin in origins},
        "region": {region.label for region in regions},
        "region_role": {str(region.role) for region in regions},
    }
    for limit in prepared.loaded.plan.limits:
        for key, found in has.items():
            wanted = getattr(limit, key)
            if wanted and wanted not in found:
                yield f"Limit {limit.name!r}: nothing here has the {key.replace('_', ' ')} {wanted!r}"


def _evidence(prepared: Prepared, patients: int) -> Iterator[str]:
    """What the sample cannot carry."""
    plan = prepared.loaded.plan
    if plan.sample.drawn != "random":
        yield f"Evidence: {NO_BOUND}"
    if plan.claim is None:
        return
    share, confidence = plan.claim.exceeding_at_most_percent / 100, plan.claim.confidence_percent / 100
    needed = patients_needed(share, confidence=confidence)
    if patients < needed or plan.sample.drawn != "random":
        yield (
            f"Evidence: the claim (at most {plan.claim.exceeding_at_most_percent:g} % of patients, confidence "
            f"{plan.claim.confidence_percent:g} %) needs {needed} patients drawn at random, none of whom exceeds"
        )
