"""Controls of the run, and the files left out with their reasons."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Mapping, Sequence
from typing import Literal

from safecheck.record.document import RecordDocument
from safecheck.record.inputs import CountEntry, InputCounts
from safecheck.record.outcomes import ControlEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import count, listed, plural
from safecheck.report.sections.front import controls_line
from safecheck.report.sections.view import View, dash, place_words
from safecheck.wording import ON_REFERENCE, RUN_INVALID

__all__ = ["controls", "left_out", "not_run"]


def controls(view: View) -> Section:
    """The section Controls."""
    record = view.record
    says = (
        f"{RUN_INVALID}. No figure of this run may be relied on." if not record.controls_held else controls_line(view)
    )
    columns = (
        Column("Control"),
        Column("Codec"),
        Column("What was asked of it"),
        Column("Frames", number=True),
        Column("Held", number=True),
        Column("Not held", number=True),
    )
    rows = tuple(
        Row(
            (*_names(item), item.text, *map(count, (item.frames, item.held, item.not_held))), strong=bool(item.not_held)
        )
        for item in record.controls
    )
    blocks: list[Block] = [Prose(says, "strong")]
    if rows:
        blocks.append(Table(columns, rows))
    blocks += [Prose(_not_held(item)) for item in record.controls if item.not_held]
    return Section("Controls", tuple(blocks))


def _names(item: ControlEntry) -> tuple[str, str]:
    """Control and its codec; a displacement is planted without any."""
    return item.control, dash(item.codec if item.control != "planted" else "")


def _not_held(item: ControlEntry) -> str:
    """Where a control was first not held, and what was found there."""
    name = f"{item.control}, {item.codec}" if item.codec else item.control
    place = f" First at {place_words(item.first_not_held)}." if item.first_not_held else ""
    found = f" Found: {item.found}." if item.found else ""
    return f"Control {name}: not held on {plural(item.not_held, 'frame')}.{place}{found}"


def left_out(view: View) -> Section:
    """The section Files left out."""
    record = view.record
    inputs = record.inputs
    blocks: list[Block] = [
        Prose(_sum_line("Originals", _counts(inputs)), "strong"),
        *_disagreement(record.left_out, "original", inputs.excluded, inputs.refused),
    ]
    if inputs.delivered_files:
        excluded, refused = inputs.delivered_excluded, inputs.delivered_refused
        counts = (inputs.delivered_files, inputs.delivered_assessed, excluded, refused)
        blocks += [
            Prose(_sum_line("Delivered copies", counts), "strong"),
            *_disagreement(record.left_out, "delivered", excluded, refused),
        ]
    blocks += [Prose(_frame_line(record), "strong"), *_reasons(record.left_out)]
    if inputs.patient_unknown_studies:
        unknown = plural(inputs.patient_unknown_studies, "study names", "studies name")
        blocks.append(Prose(f"{unknown} no patient; each counts as a patient of its own."))
    blocks += _noticed(view)
    return Section("Files left out, and what was noticed", tuple(blocks))


def _counts(inputs: InputCounts) -> tuple[int, int, int, int]:
    """Files, assessed, excluded and refused of the originals."""
    return inputs.files, inputs.assessed, inputs.excluded, inputs.refused


def _sum_line(name: str, counts: tuple[int, int, int, int]) -> str:
    """The sum, said to agree or not."""
    files, assessed, excluded, refused = counts
    line = (
        f"{name}: {plural(files, 'file')} = {count(assessed)} assessed + {count(excluded)} excluded + "
        f"{count(refused)} refused"
    )
    return f"{line}." if files == assessed + excluded + refused else f"{line}: THE SUMS DO NOT AGREE."


def _frame_line(record: RecordDocument) -> str:
    """Frames assessed and refused, those inside files otherwise assessed apart."""
    refused = record.inputs.frames_refused
    inside = sum(item.frames for item in record.left_out if item.side == "original")
    line = f"Frames of originals: {count(record.inputs.frames_assessed)} assessed, {count(refused)} refused"
    if not refused and not inside:
        return f"{line}."
    line = (
        f"{line} = {count(inside)} inside files otherwise assessed + {count(refused - inside)} of files refused whole"
    )
    return f"{line}." if refused >= inside else f"{line}: THE SUMS DO NOT AGREE."


def _disagreement(
    entries: tuple[CountEntry, ...], side: Literal["original", "delivered"], excluded: int, refused: int
) -> list[Block]:
    """Say so where the reasons do not add up to the counts."""
    sums = {"excluded": 0, "refused": 0}
    for item in entries:
        if item.side == side:
            sums[item.status] += item.files
    if (sums["excluded"], sums["refused"]) == (excluded, refused):
        return []
    text = (
        f"THE REASONS DO NOT ADD UP: they name {count(sums['excluded'])} excluded and "
        f"{count(sums['refused'])} refused files."
    )
    return [Prose(text, "strong")]


def _reasons(entries: tuple[CountEntry, ...]) -> list[Block]:
    """Files by reason."""
    if not entries:
        return [Prose("No file was left out.")]
    columns = (
        Column("Side"),
        Column("Status"),
        Column("Code"),
        Column("Reason"),
        Column("Files", number=True),
        Column("Frames of other files", number=True),
    )
    rows = [
        Row((item.side, item.status, item.reason, item.sentence, count(item.files), count(item.frames)))
        for item in entries
    ]
    files, frames = sum(item.files for item in entries), sum(item.frames for item in entries)
    rows.append(Row(("Sum", "", "", "", count(files), count(frames)), strong=True))
    note = (
        "Excluded: by rule no subject of an assessment. Refused: its pixels would be read on a doubtful path. Files "
        "were left out whole; frames of other files were refused while the rest of the file was assessed."
    )
    return [Table(columns, tuple(rows), note=note)]


def _noticed(view: View) -> list[Block]:
    """What preflight set right, what was not run, and the content rules applied."""
    record = view.record
    frames = Column("Frames", number=True)
    idle = not_run(record.notes, [item.candidate for item in record.candidates])
    missed = {text: number for text, number in record.notes.items() if text.endswith(ON_REFERENCE)}
    noticed = {text: number for text, number in record.notes.items() if not _parts_of(text) and text not in missed}
    parts: tuple[tuple[str, tuple[Column, ...], list[Row]], ...] = (
        (
            "Noticed and set right before measuring",
            (Column("What was noticed"), frames),
            [Row((text, count(number))) for text, number in sorted(noticed.items())],
        ),
        (
            "Not run",
            (Column("Why"), Column("Candidates"), frames),
            [Row((reason, listed(names), count(number))) for reason, names, number in idle],
        ),
        (
            "One setting for a series, sought where the ratio was not met",
            (Column("What was reached instead"), frames),
            [Row((text, count(number))) for text, number in sorted(missed.items())],
        ),
        (
            "Content rules applied",
            (Column("Rule, explained under Definitions"), frames),
            [Row((rule, count(number))) for rule, number in sorted(record.content_rules.items())],
        ),
        (
            "Why a modality's own content rule gave way to padding-only-1",
            (Column("Reason"), frames),
            [Row((text, count(number))) for text, number in sorted(record.content_reasons.items())],
        ),
    )
    return [block for head, columns, rows in parts if rows for block in (Heading(head), Table(columns, tuple(rows)))]


_NOT_RUN = re.compile(r"(?P<name>.+?) not run: (?P<reason>.+)")


def _parts_of(note: str) -> tuple[str, str] | None:
    """Candidate and reason of a note that says a candidate was not run; None of any other note."""
    found = _NOT_RUN.fullmatch(note)
    return (found["name"], found["reason"]) if found else None


def not_run(notes: Mapping[str, int], order: Sequence[str]) -> list[tuple[str, list[str], int]]:
    """Pool what was not run: reason without the sizes of frames, candidates, and frames of each of them.

    Candidates that share a reason and a number of frames share a line.
    """
    pooled: Counter[tuple[str, str]] = Counter()
    for text, frames in notes.items():
        found = _parts_of(text)
        if found:
            reason = re.sub(r"\b\d+ ?[x×] ?\d+ pixels\b", "size of the frame", found[1])
            pooled[reason, found[0]] += frames
    lines: dict[tuple[str, int], list[str]] = {}
    for (reason, name), frames in pooled.items():
        lines.setdefault((reason, frames), []).append(name)
    rank = {name: index for index, name in enumerate(order)}
    return [
        (reason, sorted(names, key=lambda name: (rank.get(name, len(rank)), name)), frames)
        for (reason, frames), names in sorted(lines.items())
    ]
