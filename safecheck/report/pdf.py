"""Blocks -> pages: layout, heads and feet of every page, bookmarks."""

from __future__ import annotations

import io
from dataclasses import dataclass, field
from typing import Any

from reportlab.lib.units import mm
from reportlab.platypus import (
    BaseDocTemplate,
    CondPageBreak,
    Frame,
    PageBreak,
    PageTemplate,
    Paragraph,
)
from reportlab.platypus.flowables import Flowable

from safecheck.report.blocks import Report
from safecheck.report.furniture import MARKS_HEIGHT, draw_page
from safecheck.report.layout import flowables_of
from safecheck.report.theme import (
    BOTTOM,
    FIRST_TOP,
    LEFT,
    PAGE_HEIGHT,
    PAGE_WIDTH,
    TEXT_WIDTH,
    TOP,
    load_fonts,
    markup,
    style,
)

__all__ = ["draw_pdf"]


@dataclass(slots=True)
class _Folio:
    """What the first drawing learns for the second: pages of the sections, and how many pages there are."""

    total: int = 0
    pages: dict[str, int] = field(default_factory=dict)


class _Anchor(Flowable):  # type: ignore[misc] # reportlab is untyped
    """A bookmark of no height that notes its page."""

    def __init__(self, key: str, text: str, level: int, folio: _Folio) -> None:
        super().__init__()
        self._key, self._text, self._level, self._folio = key, text, level, folio
        self.keepWithNext = True

    def wrap(self, *_available: float) -> tuple[float, float]:
        """No size."""
        return 0, 0

    def draw(self) -> None:
        """Set the bookmark."""
        canvas = self.canv
        canvas.bookmarkHorizontal(self._key, 0, 14 * mm)
        canvas.addOutlineEntry(self._text, self._key, self._level, closed=self._level > 0)
        self._folio.pages[self._key] = canvas.getPageNumber()


def draw_pdf(report: Report) -> bytes:
    """Draw a report: the same report gives the same bytes.

    It is drawn twice, since the list of contents and the foot of each page name numbers that only the first drawing
    tells.
    """
    load_fonts()
    known = _Folio()
    _draw(report, known, _Folio())
    return _draw(report, _Folio(), known)


def _draw(report: Report, learnt: _Folio, known: _Folio) -> bytes:
    """Draw once, with page numbers as `known`; what is learnt goes into `learnt`."""
    buffer = io.BytesIO()

    def furnish(canvas: Any, _document: Any) -> None:  # noqa: ANN401 - reportlab's own objects
        learnt.total = canvas.getPageNumber()
        draw_page(canvas, report, canvas.getPageNumber(), known.total)

    document = BaseDocTemplate(
        buffer,
        pagesize=(PAGE_WIDTH, PAGE_HEIGHT),
        title=report.title,
        author="",
        subject=report.subject,
        keywords=f"SHA-256 of the record: {report.record_sha256}",
        lang="en",
        invariant=1,
        pageCompression=1,
    )
    strip = MARKS_HEIGHT if report.marks else 0.0
    templates = [
        PageTemplate(id=name, frames=[_frame(top + strip)], onPageEnd=furnish, autoNextPageTemplate="next")
        for name, top in (("first", FIRST_TOP), ("next", TOP))
    ]
    document.addPageTemplates(templates)
    document.build(_story(report, learnt, known))
    return buffer.getvalue()


def _frame(top: float) -> Frame:
    """Where the text stands, below `top` points."""
    return Frame(LEFT, BOTTOM, TEXT_WIDTH, PAGE_HEIGHT - top - BOTTOM, 0, 0, 0, 0, id="text")


def _story(report: Report, learnt: _Folio, known: _Folio) -> list[Flowable]:
    """All flowables in order."""
    entries = [(f"section-{index}", section.title) for index, section in enumerate(report.sections)]
    contents = [(key, title, known.pages.get(key, 0)) for key, title in entries]
    story: list[Flowable] = [_Anchor("front", report.title, 0, learnt)]
    for block in report.front:
        story += flowables_of(block, contents)
    story.append(PageBreak())
    for (key, title), section in zip(entries, report.sections, strict=True):
        story += [PageBreak()] if section.new_page else [CondPageBreak(section.room_mm * mm)]
        story.append(_Anchor(key, title, 0, learnt))
        story.append(Paragraph(markup(title), style("section")))
        for block in section.blocks:
            story += flowables_of(block, contents)
    return story
