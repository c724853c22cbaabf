"""Each kind of block -> what the page layout flows."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any, TypeAlias

from reportlab.platypus import CondPageBreak, HRFlowable, KeepTogether, Paragraph, Spacer
from reportlab.platypus import Table as PlatypusTable
from reportlab.platypus.flowables import Flowable

from safecheck.report.blocks import (
    Bars,
    Block,
    Charts,
    Contents,
    Facts,
    Gallery,
    Heading,
    Numbered,
    Places,
    Prose,
    Signatures,
    Table,
    Title,
)
from safecheck.report.figures import bars_drawing, chart_drawing
from safecheck.report.folio import PageNumber
from safecheck.report.gallery import gallery_flowables
from safecheck.report.sketches import cards_flowables
from safecheck.report.tables import least_room, table_flowable
from safecheck.report.theme import ACCENT, BOTTOM, INK, PAGE_HEIGHT, RULE, TABLE_FONT, TEXT_WIDTH, TOP, markup, style

__all__ = ["ContentsEntry", "flow"]

ContentsEntry: TypeAlias = tuple[str, str]
"""Key of the bookmark, title."""

_PLAIN = [
    TABLE_FONT,
    ("VALIGN", (0, 0), (-1, -1), "TOP"),
    ("LEFTPADDING", (0, 0), (-1, -1), 0),
    ("RIGHTPADDING", (0, 0), (-1, -1), 6),
    ("TOPPADDING", (0, 0), (-1, -1), 0),
    ("BOTTOMPADDING", (0, 0), (-1, -1), 0),
]


def flow(
    head: Sequence[Flowable], blocks: Sequence[Block], contents: Sequence[ContentsEntry], *, together: bool = False
) -> list[Flowable]:
    """Lay out blocks after a head.

    Headings, sentences and bars wait for what they introduce, so that none of them stands alone at the foot of a page.
    With `together` all share a page where one can hold them.
    """
    if together:
        flat = [*head, *(made for block in blocks for made in _flowables_of(block, contents))]
        if _height(flat) <= _PAGE:
            return [KeepTogether(flat)]
    story: list[Flowable] = []
    waiting, kept = list(head), len(head)
    for block in blocks:
        made = _flowables_of(block, contents)
        if isinstance(block, Heading) and len(waiting) > kept:
            story += waiting
            waiting, kept = [], 0
        if isinstance(block, Heading | Prose | Bars):
            waiting += made
            continue
        if isinstance(made, _Whole):
            story.append(KeepTogether([*waiting, *made]))
        else:
            story += [CondPageBreak(_height(waiting) + _room(made)), *waiting, *made]
        waiting, kept = [], 0
    return story + waiting


def _height(flowables: Sequence[Flowable]) -> float:
    """Height of flowables below each other."""
    heights = [item.wrap(TEXT_WIDTH, PAGE_HEIGHT)[1] for item in flowables]
    apart = [max(item.getSpaceBefore(), item.getSpaceAfter()) for item in flowables]
    return float(sum(heights) + sum(apart))


def _room(flowables: Sequence[Flowable]) -> float:
    """Height that must be left for what can part over pages."""
    first = flowables[0] if flowables else None
    if isinstance(first, PlatypusTable) and first.repeatRows:
        return least_room(first)
    return _height(flowables[:1])


class _Whole(list[Flowable]):
    """Flowables that never part over pages."""


def _flowables_of(block: Block, contents: Sequence[ContentsEntry]) -> list[Flowable]:
    """Lay out one block; `contents` is what the list of contents shows."""
    match block:
        case Title():
            return _title(block)
        case Heading(text):
            return [_paragraph(text, "heading")]
        case Prose():
            return [_prose(block)]
        case Numbered():
            return _numbered(block)
        case Facts():
            return [_facts(block)]
        case Table():
            return _table(block)
        case Charts():
            return _charts(block)
        case Bars():
            return [_paragraph(block.caption, "caption"), bars_drawing(block, TEXT_WIDTH), Spacer(1, 6)]
        case Places():
            return cards_flowables(block.cards)
        case Gallery():
            return _Whole(gallery_flowables(block))
        case Signatures():
            return [_signatures(block)]
        case Contents():
            return _contents(contents)


def _paragraph(text: str, name: str, **more: Any) -> Paragraph:  # noqa: ANN401 - reportlab's own options
    """A paragraph of plain text."""
    return Paragraph(markup(text), style(name), **more)


def _plain_table(rows: list[list[Any]], widths: list[float], extra: Sequence[tuple[Any, ...]] = ()) -> PlatypusTable:
    """A table without rules, to set things side by side."""
    table = PlatypusTable(rows, colWidths=widths, hAlign="LEFT")
    table.setStyle([*_PLAIN, *extra])
    return table


def _title(block: Title) -> list[Flowable]:
    """Head of the first page."""
    count = len(block.facts)
    labels = [_paragraph(label, "small-label") for label, _ in block.facts]
    values = [_paragraph(value, "value") for _, value in block.facts]
    facts = _plain_table([labels, values], [TEXT_WIDTH / count] * count)
    hashed = [[_paragraph(f"SHA-256 of {block.hashed}", "small-label"), _paragraph(block.record_sha256, "hash")]]
    sealed = _plain_table(hashed, [TEXT_WIDTH / count, TEXT_WIDTH * (1 - 1 / count)])
    head: list[Flowable] = [_paragraph(block.title, "title")]
    if block.subject:
        head.append(_paragraph(block.subject, "subject"))
    return [
        *head,
        Spacer(1, 4),
        HRFlowable(width="100%", thickness=1.2, color=ACCENT, spaceBefore=0, spaceAfter=5),
        facts,
        Spacer(1, 5),
        sealed,
        HRFlowable(width="100%", thickness=0.4, color=RULE, spaceBefore=5, spaceAfter=6),
    ]


def _prose(block: Prose) -> Flowable:
    """A paragraph; a caution has a bar at its side."""
    paragraph = _paragraph(block.text, block.style)
    if block.style != "caution":
        return paragraph
    bar = _plain_table([[paragraph]], [TEXT_WIDTH], [("LINEBEFORE", (0, 0), (0, -1), 1.6, INK)])
    bar.spaceBefore, bar.spaceAfter = 3, 7
    return bar


def _numbered(block: Numbered) -> list[Flowable]:
    """Numbered sentences."""
    return [
        _paragraph(text, "numbered", bulletText=f"{number}") for number, text in enumerate(block.items, block.first)
    ]


def _facts(block: Facts) -> Flowable:
    """Labels on the left, sentences on the right."""
    rows = [[_paragraph(label, "label"), [_paragraph(line, "fact") for line in lines]] for label, lines in block.pairs]
    return _plain_table(rows, [58, TEXT_WIDTH - 58], [("BOTTOMPADDING", (0, 0), (-1, -1), 4)])


_PAGE = PAGE_HEIGHT - TOP - BOTTOM
"""Points of text on a page."""
_TOGETHER = 14
"""Rows up to which a table never breaks over pages."""


def _table(block: Table) -> list[Flowable]:
    """A table: short ones stay whole, of long ones at least the head and a few rows."""
    made = table_flowable(block)
    return _Whole([made]) if len(block.rows) <= _TOGETHER else [made]


_CHART = {"usual": 156.0, "lower": 136.0, "low": 120.0}
"""Heights of charts in points."""


def _charts(block: Charts) -> list[Flowable]:
    """Charts side by side above their caption."""
    gap = 18.0
    width = (TEXT_WIDTH - gap) / 2
    height = _CHART["low" if all(chart.single for chart in block.charts) else block.size]
    drawings = [chart_drawing(chart, width, height) for chart in block.charts]
    cells = [drawings[0], "", drawings[1]] if len(drawings) == 2 else [drawings[0], "", ""]
    side_by_side = _plain_table([cells], [width, gap, width], [("RIGHTPADDING", (0, 0), (-1, -1), 0)])
    parts: list[Flowable] = [Spacer(1, 4), side_by_side, Spacer(1, 3)]
    return _Whole([*parts, _paragraph(block.caption, "note")] if block.caption else parts)


def _signatures(block: Signatures) -> Flowable:
    """Blank blocks, two by two."""
    half = (TEXT_WIDTH - 18) / 2
    cells = [_signature(block.head, role, half) for role in block.roles]
    rows = [[cells[i], "", cells[i + 1] if i + 1 < len(cells) else ""] for i in range(0, len(cells), 2)]
    return _plain_table(
        rows, [half, 18, half], [("RIGHTPADDING", (0, 0), (-1, -1), 0), ("BOTTOMPADDING", (0, 0), (-1, -1), 20)]
    )


def _signature(head: str, role: str, width: float) -> PlatypusTable:
    """One block: room for an opinion, name, date and signature."""
    rows = [[_paragraph(head, "card-head"), ""], [_paragraph(role, "small-label"), ""]]
    heights: list[float | None] = [None, None]
    for label, height in (("", 20), ("", 18), ("", 18), ("Name", 20), ("Date", 20), ("Signature", 26)):
        rows.append([_paragraph(label, "small-label"), ""])
        heights.append(height)
    table = PlatypusTable(rows, colWidths=[44, width - 44], rowHeights=heights, hAlign="LEFT")
    lines: list[tuple[Any, ...]] = [("LINEBELOW", (0, row), (-1, row), 0.35, RULE) for row in range(2, 8)]
    lines += [("SPAN", (0, row), (-1, row)) for row in (0, 1)]
    table.setStyle(
        [
            *_PLAIN,
            ("LINEABOVE", (0, 0), (-1, 0), 0.9, INK),
            ("TOPPADDING", (0, 0), (-1, 0), 5),
            ("VALIGN", (0, 2), (-1, -1), "BOTTOM"),
            *lines,
        ]
    )
    return table


def _contents(entries: Sequence[ContentsEntry]) -> list[Flowable]:
    """Sections with their pages, in two columns."""
    cells: list[list[Any]] = [
        [Paragraph(f'<a href="#{key}">{markup(title)}</a>', style("contents")), PageNumber(key, 24)]
        for key, title in entries
    ]
    half = math.ceil(len(cells) / 2)
    right = [*cells[half:], *[["", ""]] * (2 * half - len(cells))]
    rows = [[*one, "", *other] for one, other in zip(cells[:half], right, strict=True)]
    gap = 18.0
    wide = (TEXT_WIDTH - gap) / 2 - 24
    rules = [
        ("LINEBELOW", (0, 0), (1, -1), 0.25, RULE),
        ("LINEBELOW", (3, 0), (4, -1), 0.25, RULE),
        ("TOPPADDING", (0, 0), (-1, -1), 1.6),
        ("BOTTOMPADDING", (0, 0), (-1, -1), 2.2),
    ]
    table = _plain_table(rows, [wide, 24, gap, wide, 24], [*rules, ("RIGHTPADDING", (0, 0), (-1, -1), 0)])
    return _Whole([_paragraph("In this record", "heading"), table])
