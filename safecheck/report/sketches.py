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
    MID,
    REGULAR,
    RULE,
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
_SMALL_BOX = 58.0
"""The same beside pictures."""
_MARGIN = 15.0
_PICTURE = 112.0


def sketch_drawing(card: PlaceCard, box: float = _BOX) -> Drawing:
    """Draw the frame's outline to scale with the patch on it; its row and column stand at the edges."""
    load_fonts()
    scale = box / max(card.rows, card.columns)
    wide, high = card.columns * scale, card.rows * scale
    drawing = Drawing(box + _MARGIN + 8, high + _MARGIN)
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
    """Lay out cards two by two; a card with pictures takes the whole width."""
    flowables: list[Flowable] = []
    waiting: list[PlaceCard] = []
    for card in cards:
        if card.pictures is not None:
            flowables += [*_pairs(waiting), _wide(card, card.pictures)]
            waiting = []
        else:
            waiting.append(card)
    return flowables + _pairs(waiting)


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
    ("VALIGN", (0, 0), (-1, -1), "TOP"),
    ("LEFTPADDING", (0, 0), (-1, -1), 0),
    ("RIGHTPADDING", (0, 0), (-1, -1), 6),
    ("TOPPADDING", (0, 0), (-1, -1), 7),
    ("BOTTOMPADDING", (0, 0), (-1, -1), 9),
    ("LINEABOVE", (0, 0), (-1, 0), 0.35, RULE),
]


def _words(card: PlaceCard) -> list[Paragraph]:
    """What, how much and where, in words."""
    lines = [
        Paragraph(markup(card.head), style("card-head")),
        Paragraph(markup(card.value), style("card-value")),
        Paragraph(markup(card.measure), style("card")),
    ]
    for label, value in card.lines:
        text = f'<font color="#5e6368">{markup(label)}</font> {markup(value)}'
        lines.append(Paragraph(text, style("card")))
    if card.without_pictures:
        lines.append(Paragraph(markup(card.without_pictures), style("card")))
    return lines


def _wide(card: PlaceCard, pictures: Pictures) -> Flowable:
    """Words and sketch on the left, three pictures on the right."""
    first = TEXT_WIDTH - 3 * (_PICTURE + 8)
    shown = [
        _Picture(pictures.original, pictures.mark, "original", pictures.window),
        _Picture(pictures.recompressed, pictures.mark, "recompressed", pictures.window),
        _Picture(pictures.difference, pictures.mark, "after minus before", "", (pictures.scale, pictures.unit)),
    ]
    cells = [[[*_words(card), sketch_drawing(card, _SMALL_BOX)], *shown]]
    table = Table(cells, colWidths=[first, *[_PICTURE + 8] * 3], hAlign="LEFT")
    table.setStyle(_CARD_STYLE)
    return table


class _Picture(Flowable):  # type: ignore[misc] # reportlab is untyped
    """A crop, its patch outlined, with what it shows and its window or scale below."""

    def __init__(
        self,
        pixels: Grey,
        mark: tuple[int, int, int, int],
        name: str,
        window: str,
        scale: tuple[float, str] | None = None,
    ) -> None:
        super().__init__()
        self._pixels, self._mark, self._name, self._window, self._scale = pixels, mark, name, window, scale
        rows, columns = pixels.shape[:2]
        self._zoom = _PICTURE / max(rows, columns)
        self.width, self.height = columns * self._zoom, rows * self._zoom + 30

    def wrap(self, *_available: float) -> tuple[float, float]:
        """Size in points."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw the crop from the bottom up: scale or window, name, pixels, outline of the patch."""
        canvas = self.canv
        rows, columns = self._pixels.shape[:2]
        high = rows * self._zoom
        # Whole copies of each pixel, so that no reader smooths the crop.
        copies = max(1, 320 // max(rows, columns))
        enlarged = np.repeat(np.repeat(self._pixels, copies, axis=0), copies, axis=1)
        reader = ImageReader(io.BytesIO(png_bytes(enlarged)))
        canvas.drawImage(reader, 0, 30, self.width, high)
        canvas.setStrokeColor(INK)
        canvas.setLineWidth(0.4)
        canvas.rect(0, 30, self.width, high)
        self._outline(30 + high)
        canvas.setFillColor(INK)
        canvas.setFont(REGULAR, 7.2)
        canvas.drawString(0, 21, self._name)
        if self._scale is None:
            canvas.setFont(REGULAR, 6.2)
            canvas.setFillColor(MID)
            canvas.drawString(0, 13, fit_text(self._window, REGULAR, 6.2, _PICTURE))
        else:
            self._bar(*self._scale)

    def _outline(self, top: float) -> None:
        """The patch, in white on black, so that it shows on any grey."""
        row, column, rows, columns = self._mark
        zoom = self._zoom
        for colour, width in ((INK, 1.6), (WHITE, 0.7)):
            self.canv.setStrokeColor(colour)
            self.canv.setLineWidth(width)
            self.canv.rect(column * zoom, top - (row + rows) * zoom, columns * zoom, rows * zoom)

    def _bar(self, scale: float, unit: str) -> None:
        """Greys from minus to plus the scale, with their figures."""
        canvas, steps = self.canv, 32
        for step in range(steps):
            canvas.setFillGray(step / (steps - 1))
            canvas.rect(self.width * step / steps, 11, self.width / steps + 0.3, 6, stroke=0, fill=1)
        canvas.setStrokeColor(HAIR)
        canvas.rect(0, 11, self.width, 6)
        canvas.setFillColor(MID)
        canvas.setFont(REGULAR, 6.2)
        text = figure(scale)
        canvas.drawString(0, 4, f"\u2212{text}")
        canvas.drawCentredString(self.width / 2, 4, "0")
        canvas.drawRightString(self.width, 4, fit_text(f"+{text} {unit}", REGULAR, 6.2, self.width / 2))
