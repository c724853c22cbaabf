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
_PICTURE = 93.0
_BAR_HEIGHT = 15.0


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
        Paragraph(f'<font size="12.5">{markup(card.value)}</font> {markup(card.unit)}', style("card-value")),
        Paragraph(markup(card.measure), style("card")),
    ]
    for label, value in card.lines:
        text = f'<font color="#5e6368">{markup(label)}</font> {markup(value)}'
        lines.append(Paragraph(text, style("card")))
    if card.without_pictures:
        lines.append(Paragraph(markup(card.without_pictures), style("card")))
    return lines


def _wide(card: PlaceCard, pictures: Pictures) -> Flowable:
    """Words, sketch and three pictures side by side."""
    sketch = _SMALL_BOX + _MARGIN + 14
    first = TEXT_WIDTH - sketch - 3 * (_PICTURE + 6)
    shown = [
        _Picture(pictures.original, pictures.mark, "original", pictures.window),
        _Picture(pictures.recompressed, pictures.mark, "recompressed", pictures.window),
        _Picture(pictures.difference, pictures.mark, "after minus before", f"in {pictures.unit}", pictures.scale),
    ]
    cells = [[_words(card), sketch_drawing(card, _SMALL_BOX), *shown]]
    table = Table(cells, colWidths=[first, sketch, *[_PICTURE + 6] * 3], hAlign="LEFT")
    table.setStyle(_CARD_STYLE)
    return table


class _Picture(Flowable):  # type: ignore[misc] # reportlab is untyped
    """A crop, its patch outlined, with what it shows and its window or scale below."""

    def __init__(
        self, pixels: Grey, mark: tuple[int, int, int, int], name: str, about: str, scale: float | None = None
    ) -> None:
        super().__init__()
        self._pixels, self._mark, self._scale = pixels, mark, scale
        rows, columns = pixels.shape[:2]
        self._zoom = _PICTURE / max(rows, columns)
        self.width = columns * self._zoom
        self._caption = Paragraph(f"{markup(name)}<br/>{markup(about)}", style("picture"))
        self._below = self._caption.wrap(_PICTURE, 100)[1] + 2 + (_BAR_HEIGHT if scale is not None else 0)
        self.height = rows * self._zoom + self._below

    def wrap(self, *_available: float) -> tuple[float, float]:
        """Size in points."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw the crop, the outline of the patch, the scale and the caption."""
        canvas = self.canv
        rows, columns = self._pixels.shape[:2]
        # Whole copies of each pixel, so that no reader smooths the crop.
        copies = max(1, 320 // max(rows, columns))
        enlarged = np.repeat(np.repeat(self._pixels, copies, axis=0), copies, axis=1)
        reader = ImageReader(io.BytesIO(png_bytes(enlarged)))
        canvas.drawImage(reader, 0, self._below, self.width, rows * self._zoom)
        canvas.setStrokeColor(INK)
        canvas.setLineWidth(0.4)
        canvas.rect(0, self._below, self.width, rows * self._zoom)
        self._outline(self.height)
        self._caption.drawOn(canvas, 0, 0)
        if self._scale is not None:
            self._bar(self._scale, self._below - _BAR_HEIGHT)

    def _outline(self, top: float) -> None:
        """The patch, in white on black, so that it shows on any grey."""
        row, column, rows, columns = self._mark
        zoom = self._zoom
        for colour, width in ((INK, 1.6), (WHITE, 0.7)):
            self.canv.setStrokeColor(colour)
            self.canv.setLineWidth(width)
            self.canv.rect(column * zoom, top - (row + rows) * zoom, columns * zoom, rows * zoom)

    def _bar(self, scale: float, base: float) -> None:
        """Greys from minus to plus the scale, with their figures."""
        canvas, steps = self.canv, 32
        for step in range(steps):
            canvas.setFillGray(step / (steps - 1))
            canvas.rect(self.width * step / steps, base + 7, self.width / steps + 0.3, 5, stroke=0, fill=1)
        canvas.setStrokeColor(HAIR)
        canvas.rect(0, base + 7, self.width, 5)
        canvas.setFillColor(INK)
        canvas.setFont(REGULAR, 6.4)
        canvas.drawString(0, base + 1, f"\u2212{figure(scale)}")
        canvas.drawCentredString(self.width / 2, base + 1, "0")
        canvas.drawRightString(self.width, base + 1, f"+{figure(scale)}")
