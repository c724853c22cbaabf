"""Cards of the worst places: where on the frame, and, in a dossier with images, what it looks like there."""

from __future__ import annotations

import io
from typing import Any

import numpy as np
from reportlab.graphics.shapes import Drawing, Line, Rect, String
from reportlab.lib.utils import ImageReader
from reportlab.platypus import Paragraph, Table
from reportlab.platypus.flowables import Flowable

from safecheck.record.png import png_bytes
from safecheck.report.blocks import Grey, Pictures, PlaceCard
from safecheck.report.numbers import figure
from safecheck.report.theme import (
    FAINT,
    HAIR,
    INK,
    MEDIUM,
    MID,
    REGULAR,
    RULE,
    TABLE_FONT,
    TEXT_WIDTH,
    WHITE,
    fit_text,
    load_fonts,
    markup,
    style,
)

__all__ = ["cards_flowables", "sketch_drawing"]

_BOX = 72.0
"""Largest side of a sketch, in points."""
_SMALL_BOX = 46.0
"""The same beside pictures."""
_MARGIN = 15.0
_PICTURE, _GAP, _BELOW = 82.0, 5.0, 36.0
"""Side of a picture, room between pictures, and room below them for names, window and scale; in points."""
_STRIP_WIDTH, _STRIP_HEIGHT = 3 * _PICTURE + 2 * _GAP, _PICTURE + _BELOW
_SHORT_UNIT = 8


def sketch_drawing(card: PlaceCard, box: float = _BOX) -> Drawing:
    """Draw the frame's outline to scale with the patch on it; its row and column stand at the edges."""
    load_fonts()
    scale = box / max(card.rows, card.columns)
    wide, high = card.columns * scale, card.rows * scale
    drawing = Drawing(box + _MARGIN + 8, high + _MARGIN, initialFontName=REGULAR)
    left, bottom = _MARGIN + 8, 0.6
    drawing.add(Rect(left, bottom, wide, high, fillColor=FAINT, strokeColor=INK, strokeWidth=0.6))
    if card.row is None or card.column is None:
        return drawing
    side_x, side_y = max(card.size_columns * scale, 3.2), max(card.size_rows * scale, 3.2)
    x = left + (card.column + card.size_columns / 2) * scale
    y = bottom + high - (card.row + card.size_rows / 2) * scale
    for ends in ((left, y, x - side_x / 2, y), (x, y + side_y / 2, x, bottom + high)):
        drawing.add(Line(*ends, strokeColor=MID, strokeWidth=0.4, strokeDashArray=[1.5, 1.5]))
    drawing.add(Rect(x - side_x / 2, y - side_y / 2, side_x, side_y, fillColor=INK, strokeColor=None))
    label_y = min(max(y - 2.3, bottom), bottom + high - 5)
    drawing.add(_text(left - 3, label_y, f"{card.row}", "end"))
    label_x = min(max(x, left + 6), left + wide - 6)
    drawing.add(_text(label_x, bottom + high + 3, f"{card.column}", "middle"))
    return drawing


def _text(x: float, y: float, text: str, anchor: str) -> String:
    """A small figure."""
    return String(x, y, text, fontName=REGULAR, fontSize=6.6, textAnchor=anchor, fillColor=INK)


def cards_flowables(cards: tuple[PlaceCard, ...]) -> list[Flowable]:
    """Lay out cards two by two; where any has pictures, all take the whole width and one height."""
    if any(card.pictures is not None for card in cards):
        return [_wide(card) for card in cards]
    return _pairs(list(cards))


def _pairs(cards: list[PlaceCard]) -> list[Flowable]:
    """Two cards per line."""
    half = TEXT_WIDTH / 2
    sketch = _BOX + _MARGIN + 16
    lines: list[Flowable] = []
    for start in range(0, len(cards), 2):
        cells: list[Any] = []
        for card in cards[start : start + 2]:
            cells += [sketch_drawing(card), _words(card)]
        cells += [""] * (4 - len(cells))
        table = Table([cells], colWidths=[sketch, half - sketch] * 2, hAlign="LEFT")
        table.setStyle(_CARD_STYLE)
        lines.append(table)
    return lines


_CARD_STYLE = [
    TABLE_FONT,
    ("VALIGN", (0, 0), (-1, -1), "TOP"),
    ("LEFTPADDING", (0, 0), (-1, -1), 0),
    ("RIGHTPADDING", (0, 0), (-1, -1), 6),
    ("TOPPADDING", (0, 0), (-1, -1), 7),
    ("BOTTOMPADDING", (0, 0), (-1, -1), 9),
    ("LINEABOVE", (0, 0), (-1, 0), 0.35, RULE),
]


def _words(card: PlaceCard) -> list[Paragraph]:
    """What, how much and where, in words."""
    return [Paragraph(markup(card.head), style("card-head")), *_figures(card)]


def _figures(card: PlaceCard) -> list[Paragraph]:
    """The value, a long unit on a line of its own, and the place."""
    short = len(card.unit) <= _SHORT_UNIT
    beside = f" {markup(card.unit)}" if short else ""
    lines = [Paragraph(f'<font size="12.5">{markup(card.value)}</font>{beside}', style("card-value"))]
    lines += [] if short else [Paragraph(markup(card.unit), style("card"))]
    lines.append(Paragraph(markup(card.measure), style("card")))
    for label, value in card.lines:
        text = f'<font color="#5e6368">{markup(label)}</font> {markup(value)}'
        lines.append(Paragraph(text, style("card")))
    return lines


def _wide(card: PlaceCard) -> Flowable:
    """A head over words, sketch and three pictures side by side."""
    sketch = _SMALL_BOX + _MARGIN + 14
    first = TEXT_WIDTH - sketch - _STRIP_WIDTH
    shown = _Strip(card.pictures) if card.pictures is not None else _empty(card.without_pictures)
    head = Paragraph(fit_text(card.head, MEDIUM, 8.4, TEXT_WIDTH - 4).replace("&", "&amp;"), style("card-head"))
    cells = [[head, "", ""], [_figures(card), sketch_drawing(card, _SMALL_BOX), shown]]
    table = Table(cells, colWidths=[first, sketch, _STRIP_WIDTH], rowHeights=[17, _STRIP_HEIGHT + 4], hAlign="LEFT")
    table.setStyle(
        [
            TABLE_FONT,
            ("VALIGN", (0, 0), (-1, -1), "TOP"),
            ("LEFTPADDING", (0, 0), (-1, -1), 0),
            ("RIGHTPADDING", (0, 0), (-1, -1), 4),
            ("RIGHTPADDING", (2, 1), (2, 1), 0),
            ("TOPPADDING", (0, 0), (-1, 0), 4),
            ("TOPPADDING", (0, 1), (-1, 1), 0),
            ("BOTTOMPADDING", (0, 0), (-1, -1), 0),
            ("LINEABOVE", (0, 0), (-1, 0), 0.35, RULE),
            ("SPAN", (0, 0), (-1, 0)),
            ("NOSPLIT", (0, 0), (-1, -1)),
        ]
    )
    return table


def _empty(text: str) -> Drawing:
    """An empty frame in place of pictures, with the reason."""
    drawing = Drawing(_STRIP_WIDTH, _STRIP_HEIGHT, initialFontName=REGULAR)
    drawing.add(Rect(0.4, _BELOW, _STRIP_WIDTH - 0.8, _PICTURE, fillColor=None, strokeColor=HAIR, strokeWidth=0.6))
    drawing.add(_text(_STRIP_WIDTH / 2, _BELOW + _PICTURE / 2, text, "middle"))
    return drawing


class _Strip(Flowable):  # type: ignore[misc] # reportlab is untyped
    """Original, recompressed and difference, the patch outlined, with window and scale below."""

    def __init__(self, pictures: Pictures) -> None:
        super().__init__()
        self._pictures = pictures
        self.width, self.height = _STRIP_WIDTH, _STRIP_HEIGHT

    def wrap(self, *_available: float) -> tuple[float, float]:
        """Size in points."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw the pictures with their names, the window below the first two and the scale below the third."""
        shown = self._pictures
        named = (
            (shown.original, "original"),
            (shown.recompressed, "recompressed"),
            (shown.difference, "after minus before"),
        )
        for index, (pixels, name) in enumerate(named):
            left = index * (_PICTURE + _GAP)
            self._picture(pixels, left)
            self.canv.setFillColor(INK)
            self.canv.setFont(REGULAR, 6.6)
            self.canv.drawString(left, _BELOW - 8, name)
        window = Paragraph(f"window: {markup(shown.window)}", style("picture"))
        _, height = window.wrap(2 * _PICTURE + _GAP, 40)
        window.drawOn(self.canv, 0, _BELOW - 9.5 - height)
        self._bar(2 * (_PICTURE + _GAP), _BELOW - 18)

    def _picture(self, pixels: Grey, left: float) -> None:
        """A crop, enlarged by whole copies of each pixel, so that no reader smooths it."""
        canvas = self.canv
        rows, columns = pixels.shape[:2]
        zoom = _PICTURE / max(rows, columns)
        copies = max(1, 320 // max(rows, columns))
        enlarged = np.repeat(np.repeat(pixels, copies, axis=0), copies, axis=1)
        reader = ImageReader(io.BytesIO(png_bytes(enlarged)))
        top = _BELOW + _PICTURE
        canvas.drawImage(reader, left, top - rows * zoom, columns * zoom, rows * zoom)
        canvas.setStrokeColor(INK)
        canvas.setLineWidth(0.4)
        canvas.rect(left, top - rows * zoom, columns * zoom, rows * zoom)
        self._outline(left, top, zoom)

    def _outline(self, left: float, top: float, zoom: float) -> None:
        """The patch, in white on black, so that it shows on any grey."""
        row, column, rows, columns = self._pictures.mark
        for colour, width in ((INK, 1.6), (WHITE, 0.7)):
            self.canv.setStrokeColor(colour)
            self.canv.setLineWidth(width)
            self.canv.rect(left + column * zoom, top - (row + rows) * zoom, columns * zoom, rows * zoom)

    def _bar(self, left: float, base: float) -> None:
        """Greys from minus to plus the scale, with their figures and the unit."""
        canvas, steps, shown = self.canv, 32, self._pictures
        for step in range(steps):
            canvas.setFillGray(step / (steps - 1))
            canvas.rect(left + _PICTURE * step / steps, base, _PICTURE / steps + 0.3, 7, stroke=0, fill=1)
        canvas.setStrokeColor(HAIR)
        canvas.rect(left, base, _PICTURE, 7)
        canvas.setFillColor(INK)
        canvas.setFont(MEDIUM, 7.4)
        canvas.drawString(left, base - 8, f"\u2212{figure(shown.scale)}")
        canvas.drawCentredString(left + _PICTURE / 2, base - 8, "0")
        canvas.drawRightString(left + _PICTURE, base - 8, f"+{figure(shown.scale)}")
        canvas.setFont(REGULAR, 6.6)
        canvas.drawString(left, base - 16, fit_text(f"in {shown.unit}", REGULAR, 6.6, _PICTURE))
