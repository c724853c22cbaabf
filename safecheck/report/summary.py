"""Half a page to paste into a change ticket, with the record's hash."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from safecheck.record.document import RecordDocument
from safecheck.record.outcomes import OutcomeEntry
from safecheck.record.run import RunFacts
from safecheck.report.numbers import count, figure, listed, plural, unit_after
from safecheck.report.sections.front import (
    candidate_lines,
    controls_line,
    delivered_line,
    exit_line,
    outcome_words,
    refused_frames,
    studies_words,
)
from safecheck.report.sections.view import View, view_of
from safecheck.wording import CAUTIONS, NO_LIMITS, RECORD_TITLE, RUN_INVALID

__all__ = ["summary_text"]

WIDTH = 100
OUTCOMES = 12


def summary_text(record: RecordDocument, record_sha256: str, run: RunFacts) -> str:
    """Write the summary as plain text, lines of at most 100 characters.

    Parameters
    ----------
    record
        The record.
    record_sha256
        SHA-256 of record.json, 64 hexadecimal digits.
    run
        When and how it was made.
    """
    view = view_of(record, record_sha256, run, None)
    paragraphs = [_head(view), *_asked_and_run(view), *_outcomes(view), _exit(view), *_cautions(record)]
    return "\n".join(paragraphs) + "\n"


def _wrapped(text: str, first: str = "", rest: str = "") -> str:
    """Break a paragraph into lines."""
    return textwrap.fill(text, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)


def _head(view: View) -> str:
    """Title, subject, reference and hash."""
    lines = [RECORD_TITLE.upper()]
    lines += [_wrapped(view.subject)] if view.subject else []
    lines.append(f"Change reference: {view.change.get('reference') or 'none given'}")
    lines.append(f"SHA-256 of record.json: {view.record_sha256}")
    if not view.record.controls_held:
        lines.append(RUN_INVALID)
    return "\n".join(lines) + "\n"


def _asked_and_run(view: View) -> list[str]:
    """Candidates, input and when the plan was declared."""
    inputs, run = view.record.inputs, view.run
    asked = " ".join(candidate_lines(view))
    ran = (
        f"{plural(inputs.files, 'file')}: {count(inputs.assessed)} assessed, {count(inputs.excluded)} excluded, "
        f"{count(inputs.refused)} refused; {plural(inputs.frames_assessed, 'frame')} assessed{refused_frames(view)}, "
        f"{plural(inputs.studies, 'study', 'studies')}, {plural(inputs.patients, 'patient')}. "
        f"Run finished {run.finished:%Y-%m-%d %H:%M %Z}. Plan {view.record.plan.sha256[:16]} declared: "
        f"{run.plan_declared}."
    )
    second = "SECOND GENERATION: sources were already lossy." if view.second_generation else ""
    parts = [ran, delivered_line(view.record.delivered), second]
    return [_wrapped(asked), _wrapped(" ".join(part for part in parts if part)), ""]


def _outcomes(view: View) -> list[str]:
    """Proposed candidates by limit and outcome, those outside first."""
    record, lines = view.record, view.outcomes("proposed")
    if not lines:
        return [f"Outcomes: {(record.outcomes_text or NO_LIMITS).rstrip('.')}.", ""]
    groups: dict[tuple[object, ...], list[OutcomeEntry]] = {}
    for item in lines:
        key = (item.limit, outcome_words(item), studies_words(item), item.bound_text)
        groups.setdefault(key, []).append(item)
    shown = [_wrapped(_outcome(same), "- ", "  ") for same in list(groups.values())[:OUTCOMES]]
    if len(groups) > OUTCOMES:
        shown.append(f"- and {len(groups) - OUTCOMES} more; all stand in the record")
    return [f"Outcomes: {record.outcomes_text.rstrip('.')}.", *shown, ""]


def _outcome(same: Sequence[OutcomeEntry]) -> str:
    """One limit with the candidates that share an outcome."""
    first = same[0]
    mark = outcome_words(first).removeprefix(first.outcome)
    return (
        f"{first.limit} ({first.side} {figure(first.bound, 12)}{unit_after(first.unit)}): {first.outcome} with "
        f"{listed([item.candidate for item in same])}, {studies_words(first)}{mark}; {first.bound_text}"
    )


def _exit(view: View) -> str:
    """Exit code and text."""
    return _wrapped(f"{controls_line(view)} {exit_line(view)}") + "\n"


def _cautions(record: RecordDocument) -> list[str]:
    """All cautions in full, those that this run gives rise to after those that always stand."""
    texts = [*CAUTIONS, *(text for text in record.cautions if text not in CAUTIONS)]
    return [_wrapped(text, f"{number}. ", "   ") for number, text in enumerate(texts, 1)]
