"""Rows of grey pictures, enlarged by whole copies of each pixel, with one bar of greys for all."""

from __future__ import annotations

import io

import numpy as np
from reportlab.lib.utils import ImageReader
from reportlab.platypus import Paragraph
from reportlab.platypus.flowables import Flowable

from safecheck.record.png import png_bytes
from safecheck.report.blocks import Gallery, GreyScale, Picture
from safecheck.report.numbers import figure
from safecheck.report.theme import HAIR, INK, MEDIUM, REGULAR, RULE, TEXT_WIDTH, fit_text, markup, style

__all__ = ["gallery_flowables"]

_GAP, _BELOW = 5.0, 13.0
"""Room between pictures, and below them for their words; in points."""
_BAR_WIDTH, _BAR_HEIGHT = 150.0, 7.0
_GREYS = 64
_LEAST_PIXELS = 240
"""A side of fewer pixels is enlarged, so that no reader smooths it away."""


def gallery_flowables(gallery: Gallery) -> list[Flowable]:
    """Lay out pictures row by row, the bar of greys and the note below."""
    made: list[Flowable] = [_Row(row, gallery.side) for row in gallery.rows]
    if gallery.scale is not None:
        made.append(_Bar(gallery.scale))
    return [*made, Paragraph(markup(gallery.note), style("note"))] if gallery.note else made


class _Row(Flowable):  # type: ignore[misc] # reportlab is untyped
    """Pictures side by side, each over its words."""

    def __init__(self, pictures: tuple[Picture, ...], side: float) -> None:
        super().__init__()
        self._pictures, self._side = pictures, side
        longest = max(max(picture.pixels.shape[:2]) for picture in pictures)
        self._zoom = side / longest
        tallest = max(picture.pixels.shape[0] for picture in pictures) * self._zoom
        self.width, self.height = TEXT_WIDTH, tallest + _BELOW

    def wrap(self, *_available: float) -> tuple[float, float]:
        """Size in points."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw each picture within a thin line."""
        canvas = self.canv
        for index, picture in enumerate(self._pictures):
            left = index * (self._side + _GAP)
            rows, columns = picture.pixels.shape[:2]
            high, wide = rows * self._zoom, columns * self._zoom
            base = self.height - high
            canvas.drawImage(_image(picture), left, base, wide, high)
            canvas.setStrokeColor(RULE)
            canvas.setLineWidth(0.3)
            canvas.rect(left, base, wide, high)
            canvas.setFillColor(INK)
            canvas.setFont(REGULAR, 6.6)
            canvas.drawString(left, base - 7.5, fit_text(picture.caption, REGULAR, 6.6, self._side + _GAP - 2))


def _image(picture: Picture) -> ImageReader:
    """Pixels as the library draws them."""
    copies = max(1, _LEAST_PIXELS // max(picture.pixels.shape[:2]))
    enlarged = np.repeat(np.repeat(picture.pixels, copies, axis=0), copies, axis=1)
    return ImageReader(io.BytesIO(png_bytes(enlarged)))


class _Bar(Flowable):  # type: ignore[misc] # reportlab is untyped
    """Greys from minus to plus the scale, with figures and unit."""

    def __init__(self, scale: GreyScale) -> None:
        super().__init__()
        self._scale = scale
        self.width, self.height = TEXT_WIDTH, _BAR_HEIGHT + 14

    def wrap(self, *_available: float) -> tuple[float, float]:
        """Size in points."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw the bar and name its ends."""
        canvas, base = self.canv, self.height - _BAR_HEIGHT
        for step in range(_GREYS):
            canvas.setFillGray(step / (_GREYS - 1))
            canvas.rect(_BAR_WIDTH * step / _GREYS, base, _BAR_WIDTH / _GREYS + 0.3, _BAR_HEIGHT, stroke=0, fill=1)
        canvas.setStrokeColor(HAIR)
        canvas.rect(0, base, _BAR_WIDTH, _BAR_HEIGHT)
        canvas.setFillColor(INK)
        canvas.setFont(MEDIUM, 7.4)
        value = figure(self._scale.value)
        canvas.drawString(0, base - 8, f"\u2212{value}")
        canvas.drawCentredString(_BAR_WIDTH / 2, base - 8, "0")
        canvas.drawRightString(_BAR_WIDTH, base - 8, f"+{value}")
        canvas.setFont(REGULAR, 6.6)
        canvas.drawString(_BAR_WIDTH + 8, base, fit_text(f"{self._scale.unit}, after minus before", REGULAR, 6.6, 200))
