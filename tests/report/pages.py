"""Drawn PDFs, read again by another library."""

from __future__ import annotations

import re
from pathlib import Path

import pypdfium2

from safecheck.record.canonical import document_bytes
from safecheck.record.document import RecordDocument
from safecheck.record.run import RunFacts
from safecheck.report.drawing import draw_report
from tests.report.made_records import make_run

__all__ = ["draw", "page_boxes", "page_texts", "squeezed"]

NOWHERE = Path("no-such-dossier")


def draw(record: RecordDocument, run: RunFacts | None = None, folder: Path = NOWHERE, **options: bool) -> bytes:
    """Draw a record as the program does."""
    return draw_report(record, document_bytes(record), run or make_run(), folder, **options)


def squeezed(text: str) -> str:
    """Line breaks and runs of spaces as one space: pages break lines where they must."""
    return re.sub(r"\s+", " ", text)


def page_texts(pdf: bytes) -> list[str]:
    """Text of each page."""
    with pypdfium2.PdfDocument(pdf) as document:
        return [squeezed(page.get_textpage().get_text_range()) for page in document]


def page_boxes(pdf: bytes) -> list[list[tuple[float, float, float, float]]]:
    """Left, bottom, right and top of each run of text, page by page, in points."""
    found = []
    with pypdfium2.PdfDocument(pdf) as document:
        for page in document:
            text = page.get_textpage()
            found.append([text.get_rect(index) for index in range(text.count_rects())])
    return found
