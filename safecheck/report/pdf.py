"""Blocks -> pages: layout, heads and feet of every page, bookmarks."""

from __future__ import annotations

import io
from typing import Any

from reportlab.lib.units import mm
from reportlab.platypus import (
    BaseDocTemplate,
    CondPageBreak,
    Frame,
    PageTemplate,
    Paragraph,
)
from reportlab.platypus.flowables import Flowable

from safecheck.report.blocks import Report
from safecheck.report.folio import Anchor, Closing, Folio
from safecheck.report.furniture import MARKS_HEIGHT, draw_page
from safecheck.report.layout import flow
from safecheck.report.theme import (
    BOTTOM,
    FIRST_TOP,
    LEFT,
    PAGE_HEIGHT,
    PAGE_WIDTH,
    REGULAR,
    TEXT_WIDTH,
    TOP,
    load_fonts,
    markup,
    style,
)

__all__ = ["draw_pdf"]


def draw_pdf(report: Report) -> bytes:
    """Draw a report: the same report gives the same bytes."""
    load_fonts()
    buffer = io.BytesIO()

    def furnish(canvas: Any, _document: Any) -> None:  # noqa: ANN401 - reportlab's own objects
        page = canvas.getPageNumber()
        if page == 1:
            canvas.setViewerPreference("DisplayDocTitle", "true")
            canvas.showOutline()
        draw_page(canvas, report, page)

    document = BaseDocTemplate(
        buffer,
        pagesize=(PAGE_WIDTH, PAGE_HEIGHT),
        title=report.title,
        author="",
        subject=report.subject,
        keywords=f"SHA-256 of {report.hashed}: {report.record_sha256}",
        lang="en",
        initialFontName=REGULAR,
        invariant=1,
        pageCompression=1,
    )
    strip = MARKS_HEIGHT if report.marks else 0.0
    templates = [
        PageTemplate(id=name, frames=[_frame(top + strip)], onPageEnd=furnish, autoNextPageTemplate="next")
        for name, top in (("first", FIRST_TOP), ("next", TOP))
    ]
    document.addPageTemplates(templates)
    document.build(_story(report))
    return buffer.getvalue()


def _frame(top: float) -> Frame:
    """Where the text stands, below `top` points."""
    return Frame(LEFT, BOTTOM, TEXT_WIDTH, PAGE_HEIGHT - top - BOTTOM, 0, 0, 0, 0, id="text")


def _story(report: Report) -> list[Flowable]:
    """All flowables in order."""
    folio = Folio()
    contents = [(f"section-{index}", section.title) for index, section in enumerate(report.sections)]
    story = flow([Anchor("front", report.title, folio)], report.front, contents)
    for (key, title), section in zip(contents, report.sections, strict=True):
        story += [CondPageBreak(section.room_mm * mm)]
        head = [Anchor(key, title, folio), Paragraph(markup(title), style("section"))]
        story += flow(head, section.blocks, contents, together=section.together)
    return [*story, Closing(folio)]
