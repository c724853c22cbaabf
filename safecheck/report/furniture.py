"""Head and foot of every page, and what stands across it."""

from __future__ import annotations

import math
from typing import Any

from reportlab.lib.units import mm
from reportlab.platypus import Paragraph

from safecheck.report.blocks import Report
from safecheck.report.folio import place_folio
from safecheck.report.theme import (
    FIRST_TOP,
    FOOT,
    INK,
    LEFT,
    MEDIUM,
    MID,
    PAGE_HEIGHT,
    PAGE_WIDTH,
    REGULAR,
    RULE,
    TEXT_WIDTH,
    TOP,
    WHITE,
    fit_text,
    markup,
    style,
    text_width,
)
from safecheck.wording import SHORT_CAUTION

__all__ = ["MARKS_HEIGHT", "draw_page"]

MARKS_HEIGHT = 9 * mm
"""Height that the strip of marks takes from the text of each page."""
_RIGHT = LEFT + TEXT_WIDTH


def draw_page(canvas: Any, report: Report, page: int) -> None:  # noqa: ANN401 - reportlab's canvas
    """Draw what every page carries, over its content."""
    canvas.saveState()
    if page > 1:
        _head(canvas, report)
    if report.marks:
        _marks(canvas, report.marks, FIRST_TOP if page == 1 else TOP)
    _foot(canvas, report, page)
    if report.across:
        _across(canvas, report.across)
    canvas.restoreState()


def _head(canvas: Any, report: Report) -> None:  # noqa: ANN401 - reportlab's canvas
    """Title and subject on the left, change reference on the right."""
    y = PAGE_HEIGHT - 15 * mm
    canvas.setFillColor(MID)
    reference = fit_text(report.reference, REGULAR, 7.6, TEXT_WIDTH / 3)
    canvas.setFont(REGULAR, 7.6)
    canvas.drawRightString(_RIGHT, y, reference)
    canvas.setFont(MEDIUM, 7.6)
    canvas.drawString(LEFT, y, report.title)
    start = LEFT + text_width(report.title, MEDIUM, 7.6) + 8
    room = _RIGHT - text_width(reference, REGULAR, 7.6) - 14 - start
    canvas.setFont(REGULAR, 7.6)
    canvas.drawString(start, y, fit_text(report.subject, REGULAR, 7.6, room))
    canvas.setStrokeColor(RULE)
    canvas.setLineWidth(0.4)
    canvas.line(LEFT, y - 5, _RIGHT, y - 5)


def _marks(canvas: Any, marks: tuple[str, ...], top: float) -> None:  # noqa: ANN401 - reportlab's canvas
    """A dark strip with what holds for the whole record."""
    text = "   ·   ".join(marks)
    # Never cut: several marks at once stand smaller.
    size = min(8.4, (TEXT_WIDTH - 12) / text_width(text, MEDIUM, 1))
    y = PAGE_HEIGHT - top - 5 * mm
    canvas.setFillColor(INK)
    canvas.rect(LEFT, y, TEXT_WIDTH, 5.6 * mm, stroke=0, fill=1)
    canvas.setFillColor(WHITE)
    canvas.setFont(MEDIUM, size)
    canvas.drawString(LEFT + 6, y + 1.9 * mm, text)


def _foot(canvas: Any, report: Report, page: int) -> None:  # noqa: ANN401 - reportlab's canvas
    """Short caution on the left, page number on the right, the whole hash of the record below."""
    canvas.setStrokeColor(RULE)
    canvas.setLineWidth(0.4)
    canvas.line(LEFT, FOOT, _RIGHT, FOOT)
    caution = Paragraph(markup(SHORT_CAUTION), style("small-label"))
    _, height = caution.wrap(TEXT_WIDTH - 48 * mm, 30)
    caution.drawOn(canvas, LEFT, FOOT - 4 - height)
    place_folio(canvas, page)
    canvas.setFillColor(MID)
    canvas.setFont(REGULAR, 6.6)
    canvas.drawString(LEFT, FOOT - 33, f"SHA-256 of {report.hashed} {report.record_sha256}")


def _across(canvas: Any, text: str) -> None:  # noqa: ANN401 - reportlab's canvas
    """Large grey words from corner to corner, which leave the page readable."""
    angle = math.atan2(PAGE_HEIGHT, PAGE_WIDTH)
    size = 0.82 * math.hypot(PAGE_WIDTH, PAGE_HEIGHT) / text_width(text, MEDIUM, 1)
    canvas.saveState()
    canvas.translate(PAGE_WIDTH / 2, PAGE_HEIGHT / 2)
    canvas.rotate(math.degrees(angle))
    canvas.setFillColor(INK, alpha=0.17)
    canvas.setFont(MEDIUM, size)
    canvas.drawCentredString(0, -size / 3, text)
    canvas.restoreState()
