"""Controls: recompressions that check the run itself."""

from __future__ import annotations

import dataclasses
import hashlib
from collections.abc import Callable, Iterator
from functools import partial
from typing import TypeAlias

import numpy as np

from safecheck.codecs.base import Codec, Reached
from safecheck.codecs.registry import available, codec, reversible_form, reversible_names
from safecheck.codecs.reversible import cheapest
from safecheck.errors import CodecUnavailable
from safecheck.evaluation.assignment import Assignment, Candidate
from safecheck.evaluation.original import Original
from safecheck.evaluation.rows import measure_row
from safecheck.evaluation.treatment import Treated, over_compress, recompress, reverse
from safecheck.frames import Samples
from safecheck.measures.local import PATCH_SIDE
from safecheck.record.rows import MeasureRow

__all__ = ["ControlWork", "checked_row", "full_controls", "pipe_control"]

ControlWork: TypeAlias = Callable[[], tuple[Treated, MeasureRow]]
"""Runs one control and measures it over the frame."""

PLANTED_SHARE = 64
"""The planted displacement is the span of the values used over this: large enough for any unit, small beside edges."""


def pipe_control(original: Original) -> MeasureRow:
    """The reversible control that every frame carries."""
    return checked_row(original, reverse(original, cheapest(), original.control_code))


def checked_row(original: Original, treated: Treated) -> MeasureRow:
    """Measure a treated frame, and hold its largest error against what the codec promises, where it promises any."""
    row, bound, error = measure_row(original, treated), treated.error_bound, treated.coding_error
    if bound is None or error is None:
        return row
    # Where every stored value came back, so does every value in the unit.
    held = error <= bound and (error > 0 or treated.flattened_max is not None or not row.max_frame)
    return _marked(row, held, f"largest error {error} in stored values, at most {bound} promised")


def full_controls(
    original: Original, assignment: Assignment, candidates: tuple[MeasureRow, ...]
) -> Iterator[ControlWork]:
    """Yield the controls that a seeded share of frames carries, each codec's own among them; none depends on another.

    Parameters
    ----------
    candidates
        Rows of the frame's candidates.
    """
    run = tuple(_one_of_each_codec(assignment, {row.candidate for row in candidates}))
    for exact in _exact_codecs(run):
        if exact.refuses(original.frame.raster.format, original.frame.raster.shape) is None:
            yield partial(_reversed, original, exact)
    for candidate in run:
        own_rows = tuple(row for row in candidates if row.codec == candidate.codec)
        first = next(row for row in own_rows if row.candidate == candidate.name)
        yield partial(_repeat, original, candidate, first)
        yield partial(_over_compress, original, candidate, own_rows)
    planted = _plant(original)
    if planted is not None:
        yield lambda: planted


def _exact_codecs(run: tuple[Candidate, ...]) -> tuple[Codec, ...]:
    """Every reversible codec of this machine but the pipe's own, and the reversible form of each codec that was run."""
    found = [made for name in reversible_names() if available(name) and _works(made := codec(name))]
    found += [form for candidate in run if (form := reversible_form(candidate.codec)) is not None]
    by_name = {each.name: each for each in found}
    by_name.pop(cheapest().name, None)
    return tuple(by_name.values())


def _works(made: Codec) -> bool:
    """Whether the library of a codec is not only there, but was built with the codec."""
    try:
        return bool(made.version)
    except CodecUnavailable:
        return False


def _reversed(original: Original, exact: Codec) -> tuple[Treated, MeasureRow]:
    """A reversible code."""
    treated = reverse(original, exact)
    return treated, checked_row(original, treated)


def _repeat(original: Original, candidate: Candidate, first: MeasureRow) -> tuple[Treated, MeasureRow]:
    """A candidate once more."""
    (again,) = recompress(original, candidate, "repeat")
    return again, _marked(measure_row(original, again), *_repeated(first, again))


def _over_compress(
    original: Original, candidate: Candidate, own_rows: tuple[MeasureRow, ...]
) -> tuple[Treated, MeasureRow]:
    """A codec far beyond every ratio that was asked of it."""
    over = over_compress(original, candidate, min(row.code_bytes for row in own_rows))
    row = measure_row(original, over)
    return over, _marked(row, *_over_compressed(original, row, own_rows))


def _marked(row: MeasureRow, held: bool, found: str) -> MeasureRow:
    """Write a finding into a control's row."""
    return dataclasses.replace(row, control_held=held, control_found=found)


def _one_of_each_codec(assignment: Assignment, run: set[str]) -> Iterator[Candidate]:
    """First candidate of each codec that was run on the frame, with its settings."""
    seen: set[str] = set()
    for candidate in assignment.candidates:
        if candidate.name in run and candidate.codec not in seen:
            seen.add(candidate.codec)
            yield candidate


def _repeated(first: MeasureRow, again: Treated) -> tuple[bool, str]:
    """The same frame gives the same code."""
    equal = (first.code_bytes, first.code_crc32) == (again.code_bytes, again.code_crc32)
    return equal, "the same code" if equal else "another code than the first time"


def _over_compressed(original: Original, over: MeasureRow, own_rows: tuple[MeasureRow, ...]) -> tuple[bool, str]:
    """More damage than any candidate of the codec did, or the measures do not see damage."""
    if not original.baseline.peak_range or over.rmse_content is None:
        return True, "constant frame, exempt"
    if over.unchanged:
        return True, "exact even so, exempt"
    # Where the codec cannot go lower there is nothing beyond the candidate to be seen.
    larger = [row for row in own_rows if row.code_bytes > over.code_bytes]
    if not larger:
        return True, "the codec makes it no smaller, exempt"
    errors = [row.rmse_content for row in larger if row.rmse_content is not None]
    found = f"RMSE {over.rmse_content:.4g}, candidates up to {max(errors, default=0.0):.4g} {over.unit}"
    return all(over.rmse_content > error for error in errors), found


def _plant(original: Original) -> tuple[Treated, MeasureRow] | None:
    """Displace one seeded patch by a known amount, and see whether the measures find it; None where none fits."""
    patch = _patch(original)
    if patch is None:
        return None
    inside = np.s_[patch[0] : patch[0] + PATCH_SIDE, patch[1] : patch[1] + PATCH_SIDE]
    displaced = _displaced(original, inside)
    if displaced is None:
        return None
    values = original.frame.values(displaced)
    size = float(np.abs(values[inside] - original.values[inside]).max())
    if size == 0.0:
        return None
    treated = Treated(
        role="planted",
        candidate="planted",
        samples=displaced,
        values=values,
        code_bytes=displaced.nbytes,
        code_crc32=None,
        codec="none",
        codec_version="",
        settings="{}",
        archive_can_write=False,
        reached=Reached.SETTING,
    )
    row = measure_row(original, treated)
    row = dataclasses.replace(row, planted_size=size, planted_row=patch[0], planted_column=patch[1])
    return treated, _marked(row, *_found_again(row, size, patch))


def _found_again(row: MeasureRow, size: float, patch: tuple[int, int]) -> tuple[bool, str]:
    """Whether the planted displacement came back with its size, row and column."""
    found = row.max_content or 0.0
    same_place = (row.worst_patch_row, row.worst_patch_column) == patch
    text = (
        f"planted {size:.6g} {row.unit} at row {patch[0]}, column {patch[1]}; "
        f"found {found:.6g} at row {row.worst_patch_row}, column {row.worst_patch_column}"
    )
    return abs(found - size) <= 1e-9 * size and same_place, text


def _patch(original: Original) -> tuple[int, int] | None:
    """First row and column of one counted patch, drawn by a hash of the place of the frame: repeatable, unguessed."""
    counted = np.argwhere(original.baseline.patches.counted)
    if not len(counted):
        return None
    key = original.frame.key
    drawn = hashlib.sha256(f"{key.instance}/{key.frame}".encode()).digest()
    row, column = counted[int.from_bytes(drawn[:8]) % len(counted)]
    return int(row) * PATCH_SIDE, int(column) * PATCH_SIDE


def _displaced(original: Original, inside: tuple[slice, ...]) -> Samples | None:
    """Samples with one patch moved by a whole number of stored steps, up or down; None where neither fits."""
    samples, form = original.frame.raster.samples, original.frame.raster.format
    step = max(1, int(np.ptp(samples.astype(np.int64))) // PLANTED_SHARE)
    patch = samples[inside].astype(np.int64)
    for move in (step, -step):
        if patch.min() + move >= form.lowest and patch.max() + move <= form.highest:
            displaced = samples.copy()
            displaced[inside] = (patch + move).astype(samples.dtype)
            return displaced
    return None
