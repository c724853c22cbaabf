"""Inputs of a run: both sides gathered, scoped and matched, and the row that each file gets."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal, TypeAlias

from safecheck.dicom.delivered import Matching, Pair, match
from safecheck.dicom.facts import Facts
from safecheck.dicom.instance import Instance
from safecheck.dicom.intake import Intake, LeftOut, gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.rules import Include
from safecheck.errors import UsageError
from safecheck.policy.plan import Scope
from safecheck.record.rows import InputRow

__all__ = ["UNMATCHED", "Inputs", "Refused", "Side", "gather_inputs", "input_rows"]

UNMATCHED = "unmatched"
Side: TypeAlias = Literal["original", "delivered"]


@dataclass(frozen=True, slots=True)
class Refused:
    """Frames of one input that gave no rows."""

    frames: int
    reason: str
    """Of the first."""
    detail: str


_NOTHING = Refused(0, "", "")


@dataclass(frozen=True, slots=True)
class Inputs:
    """What a run is about."""

    assessed: tuple[Instance, ...]
    """Originals in scope."""
    out_of_scope: tuple[Instance, ...]
    left_out: tuple[LeftOut, ...]
    delivered: Intake | None
    """None where no copies were given."""
    matching: Matching | None

    @property
    def pairs(self) -> dict[str, Instance]:
        """Input pseudonym of an original in scope -> its delivered copy."""
        if self.matching is None:
            return {}
        taken = {each.input for each in self.assessed}
        return {each.original.input: each.delivered for each in self.matching.pairs if each.original.input in taken}

    @property
    def patient_unknown_studies(self) -> int:
        """Studies whose files name no patient."""
        return len({each.study for each in self.assessed if each.patient == each.study})


def gather_inputs(
    paths: Sequence[Path],
    delivered: Sequence[Path],
    *,
    scope: Scope,
    pseudonyms: Pseudonyms,
    progress: Callable[[int, int], None] | None = None,
) -> Inputs:
    """Gather originals and delivered copies.

    Raises
    ------
    UsageError
        If a path does not exist, a list file cannot be read, or two identifiers share a pseudonym.
    """
    missing = [path for path in (*paths, *delivered) if not path.exists()]
    if missing:
        raise UsageError(f"{len(missing)} of the paths given do not exist; expected files or folders")
    include = Include(scope.localizers, scope.secondary_captures, scope.lossy_sources)
    found = gather(paths, pseudonyms=pseudonyms, include=include, progress=progress)
    assessed = tuple(each for each in found.instances if _in_scope(each, scope))
    outside = tuple(each for each in found.instances if not _in_scope(each, scope))
    copies = matching = None
    if delivered:
        every = Include(scope.localizers, scope.secondary_captures, lossy_sources=True)
        copies = gather(delivered, pseudonyms=pseudonyms, include=every, progress=progress)
        matching = match((*assessed, *outside), copies.instances)
    return Inputs(assessed, outside, found.left_out, copies, matching)


def _in_scope(instance: Instance, scope: Scope) -> bool:
    """Whether the plan's scope takes an instance; an empty list takes all."""
    return (not scope.modalities or instance.origin.modality in scope.modalities) and (
        not scope.body_parts or instance.origin.body_part in scope.body_parts
    )


def input_rows(
    inputs: Inputs, assessed_frames: Mapping[str, int], refused: Mapping[tuple[Side, str], Refused]
) -> list[InputRow]:
    """One row per file, in an order that does not depend on how the files were handed in.

    Parameters
    ----------
    inputs
        As gathered.
    assessed_frames
        Input pseudonym -> frames assessed.
    refused
        (side, input pseudonym) -> what was refused of it.
    """
    rows = [*_original_rows(inputs, assessed_frames, refused), *_delivered_rows(inputs, assessed_frames, refused)]
    return sorted(rows, key=lambda row: (row.side != "original", row.study, row.series, row.instance, row.input))


def _original_rows(
    inputs: Inputs, assessed_frames: Mapping[str, int], refused: Mapping[tuple[Side, str], Refused]
) -> Iterator[InputRow]:
    """Rows of the originals."""
    matched = {pair.original.input: (pair.how, pair.delivered.input) for pair in _pairs(inputs)}
    for each in inputs.assessed:
        done = assessed_frames.get(each.input, 0)
        lost = refused.get(("original", each.input), _NOTHING)
        how, pair = matched.get(each.input, (UNMATCHED if inputs.matching else "", ""))
        yield _row(
            "original",
            each.input,
            _known(each) | {"bytes": each.size_bytes},
            status="assessed" if done else "refused",
            reason=lost.reason,
            detail=lost.detail,
            frames_assessed=done,
            frames_refused=lost.frames,
            matched=how,
            pair=pair,
        )
    for each in inputs.out_of_scope:
        how, pair = matched.get(each.input, ("", ""))
        known = _known(each) | {"bytes": each.size_bytes}
        yield _row("original", each.input, known, status="excluded", reason="not-selected", matched=how, pair=pair)
    for left in inputs.left_out:
        yield _left_out_row("original", left)


def _delivered_rows(
    inputs: Inputs, assessed_frames: Mapping[str, int], refused: Mapping[tuple[Side, str], Refused]
) -> Iterator[InputRow]:
    """Rows of the delivered copies."""
    if inputs.delivered is None:
        return
    matched, taken = {pair.delivered.input: pair for pair in _pairs(inputs)}, inputs.pairs
    for each in inputs.delivered.instances:
        pair, lost = matched.get(each.input), refused.get(("delivered", each.input), _NOTHING)
        done = max(0, assessed_frames.get(pair.original.input, 0) - lost.frames) if pair else 0
        status, reason = _delivered_status(pair, lost, done, in_scope=bool(pair and pair.original.input in taken))
        yield _row(
            "delivered",
            each.input,
            _known(each) | {"bytes": each.size_bytes},
            status=status,
            reason=reason,
            detail=lost.detail,
            frames_assessed=done,
            frames_refused=lost.frames,
            new_uid=each.uid != pair.original.uid if pair else None,
            matched=pair.how if pair else UNMATCHED,
            pair=pair.original.input if pair else "",
        )
    for left in inputs.delivered.left_out:
        yield _left_out_row("delivered", left)


def _delivered_status(pair: Pair | None, lost: Refused, done: int, *, in_scope: bool) -> tuple[str, str]:
    """What became of a copy, and why: one without an original, or out of the plan's scope, was not measured."""
    if pair is None:
        return "excluded", "no-original"
    if not in_scope:
        return "excluded", "not-selected"
    if done:
        return "assessed", lost.reason
    return "refused", lost.reason or "original-refused"


def _pairs(inputs: Inputs) -> tuple[Pair, ...]:
    return inputs.matching.pairs if inputs.matching else ()


def _left_out_row(side: Side, left: LeftOut) -> InputRow:
    """Row of a file that was never opened for its pixels."""
    known = _known(left.facts) if left.facts else {}
    return _row(
        side,
        left.input,
        {"bytes": left.size_bytes} | known,
        status=left.status,
        reason=left.reason,
        detail=left.detail,
    )


def _row(side: Side, name: str, known: dict[str, Any], **more: Any) -> InputRow:  # noqa: ANN401
    """Row from what is known, the rest empty."""
    empty = dict.fromkeys(
        (
            "reason",
            "detail",
            "patient",
            "study",
            "series",
            "instance",
            "modality",
            "stratum",
            "object_class",
            "source_syntax",
            "photometric",
            "lossy_evidence",
            "lossy_declared",
            "lossy_ratio",
            "lossy_method",
            "matched",
            "pair",
        ),
        "",
    )
    counts = {"frames_assessed": 0, "frames_refused": 0}
    return InputRow(**({"input": name, "side": side} | empty | counts | known | more))


def _known(known: Instance | Facts) -> dict[str, Any]:
    """Columns that an instance taken in and a header read in vain have in common."""
    origin, history = known.origin, known.origin.history
    return {
        "patient": known.patient,
        "study": known.study,
        "series": known.series,
        "instance": known.instance,
        "series_number": known.series_number,
        "instance_number": known.instance_number,
        "modality": origin.modality,
        "stratum": origin.stratum,
        "object_class": known.object_class,
        "source_syntax": origin.source_syntax,
        "pixel_bytes": known.pixel_bytes,
        "frames": known.frames,
        "rows": known.rows,
        "columns": known.columns,
        "bits_allocated": known.bits_allocated,
        "bits_stored": known.bits_stored,
        "photometric": known.photometric,
        "lossy": history.lossy,
        "lossy_evidence": "; ".join(history.evidence),
        "lossy_declared": history.declared,
        "lossy_ratio": "\\".join(history.ratios),
        "lossy_method": "\\".join(history.methods),
        "derived": known.derived,
    }
