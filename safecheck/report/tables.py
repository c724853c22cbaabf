"""Tables with thin rules: column widths from what stands in the cells, heads with their units, rows that split."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

from reportlab.platypus import Paragraph, TableStyle
from reportlab.platypus import Table as PlatypusTable

from safecheck.report.blocks import Column, Row, Table
from safecheck.report.theme import (
    FAINT,
    HAIR,
    INK,
    MEDIUM,
    MID,
    PAGE_HEIGHT,
    REGULAR,
    RULE,
    TABLE_FONT,
    TEXT_WIDTH,
    WHITE,
    markup,
    printable,
    style,
    text_width,
)

__all__ = ["column_widths", "least_room", "table_flowable"]

_SIZE, _HEAD_SIZE = 7.6, 7.3
_PAD = 3.2
_LONGEST_WORD = 120.0
"""Points: a longer word is broken rather than given more."""
_SHORT = 62.0
"""Points: cells up to this width never wrap."""
_STRONG = 2
"""Cells at the beginning of a strong row that stand in a heavier face."""
_BLANK = 96.0
_FEWEST = 3


def table_flowable(table: Table) -> PlatypusTable:
    """Lay out a table over the whole width of the text: its caption repeats, its note stays with the last row."""
    over = any(column.over for column in table.columns)
    above = (
        [[Paragraph(markup(table.caption), style("caption"))] + [""] * (len(table.columns) - 1)]
        if table.caption
        else []
    )
    top = len(above)
    heads = [*above, *_head_rows(table.columns, over=over)]
    numbers = [column.number for column in table.columns]
    body = [_body_row(row, numbers) for row in table.rows]
    if table.note:
        body.append([Paragraph(markup(table.note), style("note"))] + [""] * (len(numbers) - 1))
    flowable = PlatypusTable(
        heads + body, colWidths=column_widths(table), repeatRows=len(heads), hAlign="LEFT", spaceAfter=6
    )
    commands = [
        TABLE_FONT,
        *_over_style(table.columns, top, over=over),
        *_base_style(top, len(heads), len(table.rows), numbers),
        *_together(len(heads), len(heads) + len(body)),
        *([("SPAN", (0, 0), (-1, 0)), ("BOTTOMPADDING", (0, 0), (-1, 0), 0)] if above else []),
        *_row_style(table.rows, len(heads)),
        *_note_style(len(heads) + len(table.rows), note=bool(table.note)),
    ]
    flowable.setStyle(TableStyle(commands))
    return flowable


def _together(first: int, end: int) -> list[tuple[Any, ...]]:
    """No page holds fewer than three rows of a table that parts."""
    # In the last column: in one column a later range would undo an earlier one that it touches.
    if end - first < 2 * _FEWEST:
        return [("NOSPLIT", (-1, first), (-1, end - 1))]
    return [("NOSPLIT", (-1, first), (-1, first + _FEWEST - 1)), ("NOSPLIT", (-1, end - _FEWEST), (-1, end - 1))]


def least_room(flowable: PlatypusTable, width: float = TEXT_WIDTH) -> float:
    """Height in points that the heads and the first rows of a table need."""
    flowable.wrap(width, PAGE_HEIGHT)
    return float(sum(flowable._rowHeights[: flowable.repeatRows + _FEWEST]))


def _note_style(row: int, *, note: bool) -> list[tuple[Any, ...]]:
    """The note spans the table, without a rule."""
    if not note:
        return []
    return [("SPAN", (0, row), (-1, row)), ("TOPPADDING", (0, row), (-1, row), 4)]


def _head_rows(columns: Sequence[Column], *, over: bool) -> list[list[Any]]:
    """One row of heads, or two where some share a head."""
    if not over:
        return [[_head(column, column.head) for column in columns]]
    first = [
        _head(column, column.head) if not column.over else _over_cell(columns, i) for i, column in enumerate(columns)
    ]
    second = [_head(column, column.head) if column.over else "" for column in columns]
    return [first, second]


def _over_cell(columns: Sequence[Column], index: int) -> Any:  # noqa: ANN401 - a paragraph or an empty cell
    """The shared head at the first of its columns."""
    if index and columns[index - 1].over == columns[index].over:
        return ""
    return Paragraph(markup(columns[index].over), style("head-over"))


def _head(column: Column, text: str) -> Paragraph:
    """A head with its unit below."""
    unit = f'<br/><font name="{REGULAR}" color="#5e6368">{markup(column.unit)}</font>' if column.unit else ""
    return Paragraph(markup(text) + unit, style("head-number" if column.number else "head"))


def _body_row(row: Row, numbers: Sequence[bool]) -> list[Any]:
    """Cells: figures as they are, words as paragraphs that wrap."""
    if row.group:
        return [Paragraph(markup(row.cells[0]), style("cell-group"))] + [""] * (len(numbers) - 1)
    first = style("cell-strong" if row.strong else "cell")
    return [
        printable(cell) if number else Paragraph(markup(cell), first if index < _STRONG else style("cell"))
        for index, (cell, number) in enumerate(zip(row.cells, numbers, strict=True))
    ]


def column_widths(table: Table, total: float = TEXT_WIDTH) -> list[float]:
    """Share out the width: figures get what they need, words what is left, the longest giving way first.

    Returns
    -------
    list of float
        Points, which sum to `total`.
    """
    natural = [_natural(table, index) for index in range(len(table.columns))]
    least = [_least(table, index, width) for index, width in enumerate(natural)]
    spare = total - sum(natural)
    if spare >= 0:
        weights = [1.0 if column.number else 2.5 for column in table.columns]
        share = spare / sum(weights)
        return [width + share * weight for width, weight in zip(natural, weights, strict=True)]
    if sum(least) >= total:
        return [width * total / sum(least) for width in least]
    return _filled(natural, least, total)


def _filled(natural: Sequence[float], least: Sequence[float], total: float) -> list[float]:
    """Cut the widest columns to one width, so that narrow ones keep theirs and do not wrap."""
    low, high = 0.0, max(natural)
    for _ in range(50):
        cap = (low + high) / 2
        if _used(natural, least, cap) > total:
            high = cap
        else:
            low = cap
    widths = [max(small, min(width, low)) for width, small in zip(natural, least, strict=True)]
    widths[widths.index(max(widths))] += total - sum(widths)
    return widths


def _used(natural: Sequence[float], least: Sequence[float], cap: float) -> float:
    """Width of all columns if none is wider than `cap`, short of what it needs at least."""
    return sum(max(small, min(width, cap)) for width, small in zip(natural, least, strict=True))


def _cells(table: Table, index: int) -> Iterator[str]:
    """Cells of one column."""
    return (printable(row.cells[index]) for row in table.rows if not row.group)


def _natural(table: Table, index: int) -> float:
    """Width at which nothing in the column wraps, heads aside."""
    column = table.columns[index]
    if column.blank:
        return _BLANK
    cells = max((text_width(cell, MEDIUM, _SIZE) for cell in _cells(table, index)), default=0.0)
    return max(cells, _head_width(column)) + 2 * _PAD + 1


def _head_width(column: Column) -> float:
    """Width at which a head needs at most about three lines and breaks no word."""
    words = [text_width(word, MEDIUM, _HEAD_SIZE) for word in printable(column.head).split(" ")]
    unit = max((text_width(word, REGULAR, _HEAD_SIZE) for word in printable(column.unit).split(" ")), default=0.0)
    whole = text_width(printable(column.head), MEDIUM, _HEAD_SIZE)
    return max([*words, unit, whole / 2.6 if column.number else 0.0])


def _least(table: Table, index: int, natural: float) -> float:
    """Width below which a word would break; figures never wrap."""
    column = table.columns[index]
    if column.number or column.blank:
        return natural
    words = (text_width(word, MEDIUM, _SIZE) for cell in _cells(table, index) for word in cell.split())
    longest = min(max(words, default=0.0), _LONGEST_WORD)
    return min(natural, max(longest, _head_width(column), _SHORT) + 2 * _PAD + 1)


def _base_style(top: int, heads: int, rows: int, numbers: Sequence[bool]) -> list[tuple[Any, ...]]:
    """Rules, fonts and paddings of every table."""
    commands: list[tuple[Any, ...]] = [
        ("FONT", (0, heads), (-1, -1), REGULAR, _SIZE, 10),
        ("TEXTCOLOR", (0, 0), (-1, -1), INK),
        ("VALIGN", (0, 0), (-1, heads - 1), "BOTTOM"),
        ("VALIGN", (0, heads), (-1, -1), "TOP"),
        ("LEFTPADDING", (0, 0), (-1, -1), _PAD),
        ("RIGHTPADDING", (0, 0), (-1, -1), _PAD),
        ("TOPPADDING", (0, 0), (-1, -1), 2.0),
        ("BOTTOMPADDING", (0, 0), (-1, -1), 2.4),
        ("LINEABOVE", (0, top), (-1, top), 0.9, INK),
        ("LINEBELOW", (0, heads - 1), (-1, heads - 1), 0.5, INK),
        ("LINEBELOW", (0, heads), (-1, heads + rows - 1), 0.25, HAIR),
        ("LINEBELOW", (0, heads + rows - 1), (-1, heads + rows - 1), 0.5, RULE),
    ]
    commands += [("ALIGN", (i, heads), (i, -1), "RIGHT") for i, number in enumerate(numbers) if number]
    return commands


def _over_style(columns: Sequence[Column], top: int, *, over: bool) -> list[tuple[Any, ...]]:
    """Join cells below a shared head, and join the two head rows elsewhere."""
    if not over:
        return []
    commands: list[tuple[Any, ...]] = []
    start = 0
    while start < len(columns):
        end = start
        if not columns[start].over:
            commands.append(("SPAN", (start, top), (start, top + 1)))
        else:
            while end + 1 < len(columns) and columns[end + 1].over == columns[start].over:
                end += 1
            commands += [("SPAN", (start, top), (end, top)), ("LINEBELOW", (start, top), (end, top), 0.35, MID)]
            # White over the ends of the rule: neighbours that share a head stand apart.
            commands += [
                ("LINEAFTER", (edge, top), (edge, top + 1), 6, WHITE) for edge in (start - 1, end) if edge >= 0
            ]
        start = end + 1
    return commands


def _row_style(rows: Sequence[Row], heads: int) -> Iterator[tuple[Any, ...]]:
    """Yield what single rows need: spans of group rows, weight of strong ones."""
    for index, row in enumerate(rows, start=heads):
        if row.group:
            yield "SPAN", (0, index), (-1, index)
            yield "BACKGROUND", (0, index), (-1, index), FAINT
            if index + 1 < len(rows) + heads:
                yield "NOSPLIT", (0, index), (0, index + 1)
        elif row.strong:
            yield "FONT", (0, index), (_STRONG - 1, index), MEDIUM, _SIZE, 10
