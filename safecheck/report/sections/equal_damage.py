"""Equal damage: the ratio at which each codec does what the reference candidate does, by one figure at a time."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.equal_damage import Between, EqualDamageEntry
from safecheck.record.inputs import StratumEntry
from safecheck.report.blocks import Block, Column, Heading, Prose, Row, Section, Table
from safecheck.report.definitions import label_of
from safecheck.report.numbers import NONE, aligned, count, figure, joined, plural, unit_after
from safecheck.report.sections.view import View, rest_sentence

__all__ = ["equal_damage"]

STRATA = 24
_TWO_DECIMALS = 10.0
"""Ratios below this have two decimals, others one."""

_CAUTION = (
    "Equal by the figure named only. By every other figure, in where the error lies and in what it looks like, the "
    "codecs may differ."
)
_COLUMNS = (
    Column("Measure, and the codec that does the same by it"),
    Column("counted", number=True, over="Frames"),
    Column("below", number=True, over="Frames"),
    Column("above", number=True, over="Frames"),
    Column("reference", "bits", number=True, over="Bits per pixel, median"),
    Column("codec", "bits", number=True, over="Bits per pixel, median"),
)


def equal_damage(view: View) -> tuple[Section, ...]:
    """The section Equal damage; none where only one codec was run, unless the reference declared took no frame."""
    entries = view.record.equal_damage
    if not entries:
        return _without_reference(view)
    blocks: list[Block] = [Prose(_intro(entries[0].reference)), Prose(_CAUTION, "caution")]
    with_entries = {item.stratum for item in entries}
    strata = [item for item in view.record.strata if item.stratum in with_entries]
    for stratum in strata[:STRATA]:
        own = [item for item in entries if item.stratum == stratum.stratum]
        blocks += [Heading(_heading(stratum)), _table(own)]
    rest = rest_sentence(STRATA, len(strata), "their entries stand in record.json")
    if rest:
        blocks.append(Prose(rest, "note"))
    return (Section("Equal damage", tuple(blocks)),)


def _without_reference(view: View) -> tuple[Section, ...]:
    """One sentence where the plan names a reference that took no frame; nothing else to say without entries."""
    declared = view.record.plan.content.get("reference")
    if not any(item.candidate == declared and not item.frames for item in view.candidates) or not view.ran:
        return ()
    text = f"No codec is held beside {declared}, the reference candidate that the plan names: it took no frame."
    return (Section("Equal damage", (Prose(text),)),)


def _intro(reference: str) -> str:
    """What is held beside what, and by which rule."""
    return (
        f"The achieved ratio, on the bits-stored basis, at which each codec does the damage of {reference}, the "
        "reference candidate. On every frame it lies between candidates that were run on this frame: the curve of the "
        "codec joins them by straight lines in the logarithms of ratio and damage, and its first crossing counts. "
        "Nothing is extrapolated: below are frames on which the codec does more even at its smallest ratio run, above "
        "those on which it does less even at its largest; for the percentiles they count as smaller, or larger, than "
        "that ratio. One codec with other settings counts as another."
    )


def _heading(stratum: StratumEntry) -> str:
    """A group, and how many frames it has."""
    return f"Equal damage: {stratum.stratum} ({plural(stratum.frames, 'frame')})"


def _table(entries: Sequence[EqualDamageEntry]) -> Table:
    """A group of rows per measure, a row per codec."""
    rows: list[Row] = []
    for name in dict.fromkeys(map(_measure, entries)):
        rows.append(Row((name,), group=True))
        rows += [_row(item) for item in entries if _measure(item) == name]
    return Table(_COLUMNS, tuple(rows))


def _measure(item: EqualDamageEntry) -> str:
    """The measure, where it is taken, and the limits that name it."""
    role = f" ({item.region_role})" if item.region_role else ""
    where = f", window {item.window}" if item.window else f" {item.region}{role}" if item.region else ""
    limits = f"; in the declared limit {joined(item.limits)}" if item.limits else ""
    return f"{label_of(item.measure)}{where}{limits}"


def _row(item: EqualDamageEntry) -> Row:
    """One codec beside the reference."""
    return Row(
        (
            _sentence(item),
            count(item.frames),
            count(item.frames_below),
            count(item.frames_above),
            _two(item.reference_bits_per_pixel),
            _bits(item.bits_per_pixel_median),
        )
    )


def _sentence(item: EqualDamageEntry) -> str:
    """At which ratio the codec does the same, with its spread, or why none is known."""
    if not item.frames:
        return f"{item.codec}: no frame to compare{_left_out(item)}"
    value = f"{figure(item.reference_value)}{unit_after(item.unit)}"
    codec, comma, settings = item.codec.partition(", ")
    named = f"{codec} ({settings})" if comma else codec
    middle = "" if item.frames == 1 else "median "
    what = f"{item.reference} ({middle}{value} at {_to_one(item.reference_ratio)}:1) is reached by {named}"
    beyond = item.frames_below + item.frames_above
    if item.frames == 1:
        return f"{what} {'beyond what was run,' if beyond else 'at'} {_ratio(item.ratio_median)}{_left_out(item)}"
    if beyond == item.frames:
        return f"{what} beyond what was run on every frame, {_beyond(item)}{_left_out(item)}"
    spread = f"5th to 95th percentile {_ratio(item.ratio_p05)} to {_ratio(item.ratio_p95)}"
    if beyond:
        spread += f"; {plural(beyond, 'frame')} beyond what was run"
    return f"{what} {_middle(item.ratio_median)} ({spread}){_left_out(item)}"


def _middle(median: Between) -> str:
    """The median, or that it lies beyond what was run."""
    if median.least is None and median.most is None:
        return "at no known median: most frames lie beyond what was run, on both sides"
    if median.least is None or median.most is None:
        return f"at a median beyond what was run, {_ratio(median)}"
    return f"at a median {'of ' if median.least == median.most else ''}{_ratio(median)}"


def _beyond(item: EqualDamageEntry) -> str:
    """Where every frame lies beyond: the median as far as it is known."""
    if item.frames_below and item.frames_above:
        return "below on some and above on others"
    return f"at a median {_ratio(item.ratio_median)}"


def _left_out(item: EqualDamageEntry) -> str:
    """Frames that take no part, by why."""
    parts = []
    if item.frames_unchanged:
        parts.append(f"on {plural(item.frames_unchanged, 'frame')} the reference changed nothing")
    if item.frames_without:
        parts.append(f"{plural(item.frames_without, 'frame')} without a value of both")
    return f"; not counted: {joined(parts)}" if parts else ""


def _ratio(found: Between) -> str:
    """A ratio, or its bounds in words."""
    least, most = _to_one(found.least), _to_one(found.most)
    if found.least is None:
        return "beyond" if found.most is None else f"below {most}:1"
    if found.most is None:
        return f"above {least}:1"
    return f"{least}:1" if found.least == found.most else f"between {least} and {most}:1"


def _to_one(ratio: float | None) -> str:
    """A ratio with as many decimals as its neighbours in the sentence."""
    return aligned([ratio], 2 if ratio is not None and ratio < _TWO_DECIMALS else 1)[0]


def _two(bits: float | None) -> str:
    """Bits per pixel with two decimals, as everywhere in the column."""
    return aligned([bits], 2)[0]


def _bits(found: Between) -> str:
    """Bits per pixel as a cell, or their bounds in signs."""
    least, most = _two(found.least), _two(found.most)
    if found.least is None:
        return NONE if found.most is None else f"< {most}"
    if found.most is None:
        return f"> {least}"
    return least if found.least == found.most else f"{least}–{most}"
