"""The last pages: definitions, versions and selftest, the plan as read, what to keep, signatures."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

from safecheck.record.document import CodecCheckEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Signatures, Table
from safecheck.report.definitions import CONTENT_RULES, REGION_FIGURES, TERMS, definition_of
from safecheck.report.numbers import NONE, count, plural, rounded_time, signed
from safecheck.report.sections.view import View, dash, rest_sentence

__all__ = ["definitions", "keeping", "plan", "signatures", "versions"]

PLAN_LINES = 200
ROLES = ("Responsible clinician", "Medical physicist", "PACS administrator", "Keeper of the change record")


def definitions(view: View) -> Section:
    """The section Definitions: those of the measures that this record shows."""
    record = view.record
    names = dict.fromkeys(
        [item.measure for item in record.figures]
        + [item.measure for item in record.outcomes]
        + [item.measure for item in record.worst_places]
    )
    terms = tuple(Row((term, text)) for term, text in TERMS)
    blocks: list[Block] = [Table((Column("Word"), Column("Meaning")), terms)]
    rows = []
    for name in names:
        known = definition_of(name)
        if known:
            rows.append(Row((f"{known.label} ({name})", known.formula, known.source)))
    if record.regions:
        rows += [Row(line) for line in REGION_FIGURES]
    columns = (Column("Measure"), Column("Formula and domain"), Column("Source"))
    if rows:
        blocks += [Heading("Measures"), Table(columns, tuple(rows))]
    rules = tuple(Row((rule, CONTENT_RULES[rule])) for rule in record.content_rules if rule in CONTENT_RULES)
    if rules:
        blocks += [Heading("Content rules"), Table((Column("Rule"), Column("What is content")), rules)]
    return Section("Definitions", tuple(blocks))


def versions(view: View) -> Section:
    """The section Versions and selftest."""
    record, run = view.record, view.run
    programs = tuple(Row((name, version)) for name, version in sorted(record.versions.items()))
    checks = tuple(
        Row(
            (
                item.codec,
                f"{item.library} {item.version}".strip(),
                "yes" if item.available else "no",
                _exact(view, item),
                dash(item.detail),
            )
        )
        for item in record.selftest
    )
    columns = (
        Column("Codec"),
        Column("Library"),
        Column("On this machine"),
        Column("Reversible form exact"),
        Column("Detail"),
    )
    facts = [
        Row(("Started", f"{run.started:%Y-%m-%d %H:%M:%S %Z}")),
        Row(("Finished", f"{run.finished:%Y-%m-%d %H:%M:%S %Z}")),
        Row(("Workers", count(run.workers))),
        *(Row((f"Time for {name}", rounded_time(seconds))) for name, seconds in sorted(run.seconds.items())),
    ]
    if run.system:
        facts.insert(0, Row(("System", run.system)))
    heads = (Column("Program or library"), Column("Version"))
    blocks: list[Block] = [Table(heads * 2, _two_by_two(programs))]
    if checks:
        blocks += [Heading("Selftest of the codecs"), Table(columns, checks)]
    blocks += _carriage(view)
    blocks += [Heading("The run"), Table((Column("What"), Column("Value")), tuple(facts))]
    blocks += _tables(view)
    return Section("Versions and selftest", tuple(blocks))


def _carriage(view: View) -> list[Block]:
    """Codecs whose code stream says other than the image of its samples, or that were given them offset or scaled."""
    if not view.record.carriage:
        return []
    columns = (
        Column("Codec"),
        Column("Stored", "bits", number=True),
        Column("Sign"),
        Column("Code stream says", "bits", number=True),
        Column("Added before coding", "stored values", number=True),
        Column("Factor before coding", "times", number=True),
        Column("Clipped on reading"),
        Column("Rows", number=True),
    )
    rows = tuple(
        Row(
            (
                item.codec,
                count(item.bits_stored),
                "signed" if item.signed else "unsigned",
                count(item.code_precision),
                signed(f"{item.sample_offset:d}"),
                f"{item.sample_scale:.6g}",
                "yes" if item.clipped_on_reading else "no",
                count(item.rows),
            )
        )
        for item in view.record.carriage
    )
    note = "All other codes were given the samples as they are stored, and say their bits."
    return [Heading("How samples were carried into the codes"), Table(columns, rows, note=note)]


def _exact(view: View, check: CodecCheckEntry) -> str:
    """Whether the reversible form gave back every sample: in the selftest, else in this run's control, else a dash."""
    if check.reversible_exact is not None:
        return "yes" if check.reversible_exact else "NO"
    found = [item for item in view.record.controls if (item.control, item.codec) == ("reversible", check.codec)]
    if not found:
        return NONE
    return "NO, in this run's control" if any(item.not_held for item in found) else "yes, in this run's control"


def _two_by_two(rows: Sequence[Row]) -> tuple[Row, ...]:
    """Rows set in two halves side by side."""
    half = math.ceil(len(rows) / 2)
    right = [*rows[half:], *[Row(("", ""))] * (2 * half - len(rows))]
    return tuple(Row((*one.cells, *other.cells)) for one, other in zip(rows[:half], right, strict=True))


def _tables(view: View) -> list[Block]:
    """Files of the dossier that the record covers by their hashes."""
    if not view.record.tables:
        return []
    columns = (Column("File"), Column("Rows", number=True), Column("SHA-256"))
    rows = tuple(Row((item.file, count(item.rows), item.sha256)) for item in view.record.tables)
    return [Heading("Tables that the record covers"), Table(columns, rows)]


def plan(view: View) -> Section:
    """The section Plan as read."""
    entry = view.record.plan
    lines = [Row((path, value)) for path, value in _flat("", entry.content)]
    blocks: tuple[Block, ...] = (
        Prose(
            f"Read from the {entry.source}. Keys that are empty are not shown. SHA-256 of the plan: {entry.sha256}",
            "note",
        ),
        Table(
            (Column("Key"), Column("Value as read")),
            tuple(lines[:PLAN_LINES]),
            note=rest_sentence(PLAN_LINES, len(lines), "all stand in record.json"),
        ),
    )
    return Section("Plan as read", blocks)


def _flat(path: str, value: Any) -> Iterator[tuple[str, str]]:  # noqa: ANN401 - the plan's own values
    """Yield (dotted path, text): a line per value, but one line only for each table of a list."""
    if _is_empty(value):
        return
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from _flat(f"{path}.{key}" if path else str(key), inner)
    elif isinstance(value, list | tuple) and isinstance(value[0], dict):
        for index, table in enumerate(value):
            yield f"{path}[{index}]", "; ".join(f"{key} {text}" for key, text in _flat("", table))
    elif isinstance(value, list | tuple):
        yield path, ", ".join(_plain(inner) for inner in value)
    else:
        yield path, _plain(value)


def _is_empty(value: Any) -> bool:  # noqa: ANN401 - the plan's own values
    """Whether a key says nothing: none, an empty text or list, or a table of such keys."""
    if isinstance(value, dict):
        return all(_is_empty(inner) for inner in value.values())
    return value is None or value in ("", [], ())


def _plain(value: Any) -> str:  # noqa: ANN401 - the plan's own values
    """A value as the plan writes it."""
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, float):
        return f"{value:g}"
    return str(value)


def keeping(view: View) -> Section:
    """The section What to keep."""
    record = view.record
    program = record.versions.get("safecheck", "")
    keep = (
        ("Originals", _originals(record.inputs.files)),
        ("Site key", f"the key whose short hash is {record.key_id}; without it pseudonyms cannot be recomputed"),
        ("Plan", f"SHA-256 {record.plan.sha256[:16]}…"),
        ("Versions", f"those listed under Versions and selftest{f', program version {program}' if program else ''}"),
        ("Dossier", "the whole folder, with its seal"),
        ("Hash of the record", f"{view.record_sha256[:16]}…, kept where the dossier is not"),
        ("Review date", "when this decision is looked at again"),
    )
    columns = (
        Column("What to keep to recompute"),
        Column("Which"),
        Column("Where kept", blank=True),
        Column("Until", blank=True),
    )
    rows = tuple(Row((what, which, "", "")) for what, which in keep)
    return Section("What to keep, and review", (Table(columns, rows),))


def _originals(files: int) -> str:
    """The files that were read."""
    return f"the {plural(files, 'file')} as {'it was' if files == 1 else 'they were'} read"


def signatures(view: View) -> Section:
    """The section Opinions: blank blocks for named roles."""
    text = (
        "Each signatory states an opinion of their own. A signature here neither alters the figures nor is asked for "
        f"by this record, whose hash is {view.record_sha256[:16]}…"
    )
    return Section("Opinions", (Prose(text, "note"), Signatures("Opinion of the signatory", ROLES)), room_mm=134)
