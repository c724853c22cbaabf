"""Controls of the run, and the files left out with their reasons."""

from __future__ import annotations

from typing import Literal

from safecheck.record.document import ControlEntry, CountEntry, InputCounts
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.numbers import count, plural
from safecheck.report.sections.view import View, dash, place_words
from safecheck.wording import RUN_INVALID

__all__ = ["controls", "left_out"]


def controls(view: View) -> Section:
    """The section Controls."""
    record = view.record
    says = "Controls held." if record.controls_held else f"{RUN_INVALID}. No figure of this run may be relied on."
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
            (item.control, dash(item.codec), item.text, *(count(n) for n in (item.frames, item.held, item.not_held))),
            strong=bool(item.not_held),
        )
        for item in record.controls
    )
    blocks: list[Block] = [Prose(says, "strong")]
    if rows:
        blocks.append(Table(columns, rows))
    blocks += [Prose(_not_held(item)) for item in record.controls if item.not_held]
    return Section("Controls", tuple(blocks))


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
    blocks += _reasons(record.left_out)
    if inputs.frames_refused:
        blocks.append(
            Prose(f"Within files assessed, {plural(inputs.frames_refused, 'frame was', 'frames were')} refused.")
        )
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
        f"{name}: {count(files)} files = {count(assessed)} assessed + {count(excluded)} excluded + "
        f"{count(refused)} refused"
    )
    return f"{line}." if files == assessed + excluded + refused else f"{line}: THE SUMS DO NOT AGREE."


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
    columns = (Column("Side"), Column("Status"), Column("Code"), Column("Reason"), Column("Files", number=True))
    rows = tuple(Row((item.side, item.status, item.reason, item.sentence, count(item.files))) for item in entries)
    note = "Excluded: by rule no subject of an assessment. Refused: its pixels would be read on a doubtful path."
    return [Table(columns, rows, note=note)]


def _noticed(view: View) -> list[Block]:
    """Content rules applied, and what preflight set right."""
    rules = sorted(view.record.content_rules.items())
    notes = sorted(view.record.notes.items())
    blocks: list[Block] = []
    for head, first, entries in (
        ("Content rules applied", "Rule", rules),
        ("Noticed and set right before measuring", "What was noticed", notes),
    ):
        if entries:
            rows = tuple(Row((text, count(frames))) for text, frames in entries)
            blocks += [Heading(head), Table((Column(first), Column("Frames", number=True)), rows)]
    return blocks
