"""The first pages: what was asked, what was run, the outcomes in words, the cautions in full."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from typing import Any

from safecheck.record.candidates import CandidateEntry
from safecheck.record.delivered import DeliveredEntry
from safecheck.record.outcomes import OutcomeEntry
from safecheck.report.blocks import Block, Column, Contents, Facts, Heading, Numbered, Prose, Row, Table, Title
from safecheck.report.definitions import label_of
from safecheck.report.numbers import bytes_text, count, figure, joined, listed, plural, rounded_time, unit_after
from safecheck.report.sections.view import View
from safecheck.wording import CAUTIONS, NO_LIMITS, RECORD_TITLE, SHORT_CAUTION

__all__ = [
    "candidate_lines",
    "controls_line",
    "delivered_line",
    "exit_line",
    "front",
    "limit_words",
    "outcome_words",
    "ratio_groups",
    "refused_frames",
    "studies_words",
]

ROWS_ON_FIRST_PAGE = 22
"""Rows of the table of outcomes; those outside come first, so that none of them is cut for one within."""


def front(view: View) -> tuple[Block, ...]:
    """Blocks of the first pages."""
    return (
        _title(view),
        Facts((("Asked", _asked(view)), ("Run", _run(view)))),
        *_outcomes(view),
        *_cautions(view),
        Contents(),
    )


def _title(view: View) -> Title:
    """The head of the first page."""
    change = view.change
    facts = (
        ("Change reference", change.get("reference") or "none given"),
        ("Plan declared by", change.get("declared_by") or "the command line"),
        ("Plan declared on", change.get("declared_on") or "not stated"),
        ("Run finished", f"{view.run.finished:%Y-%m-%d %H:%M} {view.run.finished.tzname() or ''}".strip()),
    )
    return Title(RECORD_TITLE, view.subject, facts, view.record_sha256)


def _asked(view: View) -> tuple[str, ...]:
    """What the plan asks."""
    change, content = view.change, view.record.plan.content
    lines = []
    if view.record.plan.source == "file":
        lines.append(
            f"What recompression would do to: {change.get('compressed_copy')}, recompressed "
            f"{change.get('compressed_when')}."
        )
    lines.append(_sample_line(content.get("sample")))
    lines += [*candidate_lines(view), _plan_line(view)]
    return tuple(line for line in lines if line)


def candidate_lines(view: View) -> tuple[str, ...]:
    """What was proposed, what stands for context, and what of the plan was run on no frame."""
    run = [item for item in view.candidates if item.frames]
    proposed = listed(ratio_groups([item for item in run if item.status == "proposed"]))
    context = listed(ratio_groups([item for item in run if item.status == "context"]))
    idle = listed(ratio_groups([item for item in view.candidates if not item.frames]))
    lines = (
        f"Proposed: {proposed}." if proposed else "",
        f"For context: {context}." if context else "",
        f"In the plan, but run on no frame: {idle}." if idle else "",
    )
    return tuple(line for line in lines if line) or ("Proposed: nothing.",)


def _sample_line(sample: Any) -> str:  # noqa: ANN401 - a table of the plan as read
    """How the studies were drawn."""
    if not isinstance(sample, dict) or not sample.get("drawn"):
        return ""
    words = {"random": "at random", "consecutive": "consecutively", "chosen": "by choice"}
    source = f" from: {sample['source']}" if sample.get("source") else ""
    return f"Studies were drawn {words.get(str(sample['drawn']), sample['drawn'])}{source}."


def ratio_groups(candidates: Sequence[CandidateEntry]) -> tuple[str, ...]:
    """'jpeg2000 5:1, 8:1' as 'jpeg2000 at 5, 8 to 1', where the names say no more than codec and ratio."""
    plain: dict[str, list[str]] = {}
    for item in candidates:
        ratio = f"{item.ratio_asked:g}" if item.ratio_asked is not None else ""
        if item.candidate == f"{item.codec} {ratio}:1":
            plain.setdefault(item.codec, []).append(ratio)
        else:
            plain.setdefault(item.candidate, [])
    return tuple(f"{name} at {joined(ratios)}:1" if ratios else name for name, ratios in plain.items())


def _plan_line(view: View) -> str:
    """Where the plan came from, and when it was declared."""
    plan, run = view.record.plan, view.run
    if plan.source == "command line":
        return f"Candidates were given on the command line, without a plan file; hash {plan.sha256[:16]}."
    when = {
        "before the first results": "declared before the first results",
        "after the first results": "FIRST SEEN AFTER RESULTS OF THE SAME INPUTS",
        "not known": "declared at a time that is not known",
    }[run.plan_declared]
    return f"The plan is a file, {when}; its hash begins {plan.sha256[:16]}."


def _run(view: View) -> tuple[str, ...]:
    """What was run."""
    record, run = view.record, view.run
    inputs = record.inputs
    total = sum(item.bytes_now for item in record.strata)
    files = (
        f"{plural(inputs.files, 'file')} read: {count(inputs.assessed)} assessed, {count(inputs.excluded)} excluded, "
        f"{count(inputs.refused)} refused."
    )
    images = (
        f"{plural(inputs.frames_assessed, 'frame')} of {plural(inputs.series, 'series', 'series')}, "
        f"{plural(inputs.studies, 'study', 'studies')} and {plural(inputs.patients, 'patient')}, in "
        f"{plural(len(record.strata), 'group')} of like images ({bytes_text(total)} as they lie in the archive)"
        f"{refused_frames(view)}."
    )
    if not view.ran:
        images = f"No frame was assessed{refused_frames(view)}."
    copies, held = delivered_line(record.delivered), controls_line(view)
    time = f"{plural(run.workers, 'worker')}, {rounded_time(run.wall_time.total_seconds())}."
    if run.sessions > 1:
        time = f"{time} Stopped and resumed {plural(run.sessions - 1, 'time')}."
    lines = (files, images, copies, f"{held} {time}")
    return tuple(line for line in lines if line)


def refused_frames(view: View) -> str:
    """'; 3 frames refused', or nothing."""
    number = view.record.inputs.frames_refused
    return f"; {plural(number, 'frame')} refused" if number else ""


def controls_line(view: View) -> str:
    """Whether the controls held; without frames none was run."""
    if not view.record.controls_held:
        return "CONTROLS WERE NOT HELD: the run is invalid."
    return "Controls held." if view.ran else "No control was run."


def delivered_line(found: DeliveredEntry | None) -> str:
    """How many delivered copies were matched and measured; nothing where none were handed in."""
    if found is None:
        return ""
    if not found.pairs_measured:
        return f"Delivered copies were handed in, but NONE WAS MEASURED ({count(found.pairs)} matched to an original)."
    return (
        f"{plural(found.pairs, 'delivered copy', 'delivered copies')} matched to an original, "
        f"{count(found.pairs_measured)} measured."
    )


def exit_line(view: View) -> str:
    """The exit code in words; without limits that comes first, and no word on limits after it."""
    record = view.record
    if not view.without_limits:
        return f"Exit {record.exit_code}: {record.exit_text}"
    text = record.exit_text.removesuffix(f", {NO_LIMITS}").removesuffix(_OF_LIMITS)
    return f"{_sentence_case(NO_LIMITS)}. Exit {record.exit_code}: {text}"


_OF_LIMITS = ", no proposed candidate outside a declared limit"


def _outcomes(view: View) -> tuple[Block, ...]:
    """The exit text, then one line per limit and proposed candidate."""
    record = view.record
    blocks: list[Block] = [Heading("Outcomes"), Prose(SHORT_CAUTION, "caution")]
    blocks.append(Prose(exit_line(view), "outcome"))
    more = [item for item in record.conditions if item.code != record.exit_code]
    if more:
        also = "; ".join(f"{item.code}, {item.text}" for item in more)
        blocks.append(Prose(f"These hold as well: {also}.", "note"))
    if not view.without_limits:
        blocks.append(Prose(_sentence_case(record.outcomes_text) + ".", "strong"))
    lines = view.outcomes("proposed")
    if lines:
        blocks.append(_outcome_table(lines))
    return tuple(blocks)


def _sentence_case(text: str) -> str:
    """Return the text with a capital first letter and without its full stop."""
    return (text[:1].upper() + text[1:]).rstrip(".")


def _outcome_table(lines: Sequence[OutcomeEntry]) -> Table:
    """The table of the first page, a group of rows per limit."""
    columns = (
        Column("Limit and candidate"),
        Column("Outcome"),
        Column("Studies"),
        Column("Bound on patients not assessed"),
    )
    shown = _shown(lines)
    rows: list[Row] = []
    for name in dict.fromkeys(item.limit for item in shown):
        same = [item for item in shown if item.limit == name]
        rows += [Row((limit_words(same[0]),), group=True), *(_outcome_row(item) for item in same)]
    return Table(columns, tuple(rows), note=_rest(lines[len(shown) :]))


def _shown(lines: Sequence[OutcomeEntry]) -> Sequence[OutcomeEntry]:
    """As many lines as fit, each limit taking a row of its own."""
    for size in range(len(lines), 0, -1):
        if size + len({item.limit for item in lines[:size]}) <= ROWS_ON_FIRST_PAGE:
            return lines[:size]
    return lines[:1]


def limit_words(item: OutcomeEntry) -> str:
    """A limit in one line."""
    bound = f"{figure(item.bound, 12)}{unit_after(item.unit)}"
    return f"{item.limit}: {label_of(item.measure)} {item.side} {bound}, {item.scope}"


def studies_words(item: OutcomeEntry) -> str:
    """'within in 28 of 30 studies, 2 not evaluated, 5 frames not taken by the codec'."""
    if not item.studies:
        return "no study in scope"
    parts = [f"within in {count(item.studies_within)} of {plural(item.studies, 'study', 'studies')}"]
    if item.studies_not_evaluated:
        parts.append(f"{count(item.studies_not_evaluated)} not evaluated")
    if item.frames_not_run:
        parts.append(f"{plural(item.frames_not_run, 'frame')} not taken by the codec")
    return ", ".join(parts)


def _outcome_row(item: OutcomeEntry) -> Row:
    """One candidate under a limit."""
    outside = item.outcome == "outside declared limits"
    return Row((item.candidate, outcome_words(item), studies_words(item), item.bound_text), strong=outside)


def _rest(cut: Sequence[OutcomeEntry]) -> str:
    """How many lines the first page leaves out, by outcome."""
    if not cut:
        return ""
    counts = Counter(item.outcome for item in cut)
    parts = joined([f"{number} {outcome}" for outcome, number in counts.items()])
    return f"and {len(cut)} more ({parts}); all stand in the section Limits and outcomes."


def outcome_words(item: OutcomeEntry) -> str:
    """The outcome, with the mark of a limit that tells nothing."""
    if item.over_compressed_also_within is True:
        return f"{item.outcome}; does not tell the over-compressed control apart"
    return item.outcome


def _cautions(view: View) -> tuple[Block, ...]:
    """Cautions in full: those that always stand, then those that this run gives rise to."""
    given = view.record.cautions
    extra = tuple(text for text in given if text not in CAUTIONS)
    blocks: list[Block] = [Heading("Cautions"), Numbered(CAUTIONS)]
    if extra:
        blocks += [Prose("Because of what this run held:", "strong"), Numbered(extra, first=len(CAUTIONS) + 1)]
    return tuple(blocks)
