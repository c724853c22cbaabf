"""Fonts, sizes, greys and paragraph styles: one place for how the record looks.

Everything is legible in black and white: greys and weights carry emphasis, markers and dashes tell curves apart.
"""

from __future__ import annotations

import functools
import re
from pathlib import Path
from xml.sax.saxutils import escape

from reportlab.lib.colors import Color
from reportlab.lib.enums import TA_CENTER, TA_RIGHT
from reportlab.lib.pagesizes import A4
from reportlab.lib.styles import ParagraphStyle
from reportlab.lib.units import mm
from reportlab.pdfbase import pdfmetrics
from reportlab.pdfbase.ttfonts import TTFont

__all__ = [
    "ACCENT",
    "BOTTOM",
    "FAINT",
    "FIRST_TOP",
    "FOOT",
    "HAIR",
    "INK",
    "ITALIC",
    "LEFT",
    "LIGHT",
    "MEDIUM",
    "MID",
    "PAGE_HEIGHT",
    "PAGE_WIDTH",
    "REGULAR",
    "RULE",
    "TABLE_FONT",
    "TEXT_WIDTH",
    "TOP",
    "WHITE",
    "fit_text",
    "load_fonts",
    "markup",
    "printable",
    "style",
    "text_width",
]

PAGE_WIDTH, PAGE_HEIGHT = A4
LEFT = 21 * mm
TEXT_WIDTH = PAGE_WIDTH - 2 * LEFT
TOP = 25 * mm
FIRST_TOP = 17 * mm
"""The first page has no running head."""
BOTTOM = 25 * mm
FOOT = 20 * mm
"""Height of the rule above the foot of each page."""

REGULAR, MEDIUM, ITALIC, LIGHT = "Roboto", "Roboto-Medium", "Roboto-Italic", "Roboto-Light"
"""Pages, tables and drawings are each told to begin with the first: the library would begin with a font that is not
embedded, and names it even where no text uses it."""
TABLE_FONT = ("FONTNAME", (0, 0), (-1, -1), REGULAR)
"""First command of every table's style."""
_FILES = {
    REGULAR: "Roboto-Regular.ttf",
    MEDIUM: "Roboto-Medium.ttf",
    ITALIC: "Roboto-Italic.ttf",
    LIGHT: "Roboto-Light.ttf",
}

INK = Color(0.09, 0.10, 0.11)
MID = Color(0.37, 0.39, 0.41)
RULE = Color(0.72, 0.74, 0.76)
HAIR = Color(0.86, 0.87, 0.88)
FAINT = Color(0.952, 0.957, 0.96)
WHITE = Color(1, 1, 1)
ACCENT = Color(0.07, 0.27, 0.35)
"""A dark petrol, which prints as a dark grey."""


@functools.cache
def load_fonts() -> None:
    """Register the fonts that lie beside this file; nothing is ever fetched."""
    folder = Path(__file__).parent / "fonts"
    for name, file in _FILES.items():
        pdfmetrics.registerFont(TTFont(name, folder / file))
    pdfmetrics.registerFontFamily(REGULAR, normal=REGULAR, bold=MEDIUM, italic=ITALIC, boldItalic=MEDIUM)


@functools.cache
def _glyphs() -> frozenset[int]:
    """Code points that the fonts can show."""
    load_fonts()
    faces = [pdfmetrics.getFont(name).face for name in _FILES]
    return frozenset.intersection(*(frozenset(face.charToGlyph) for face in faces))


def printable(text: str) -> str:
    """Replace characters that the fonts lack, and control characters, by U+FFFD, so that a gap is seen as one."""
    known = _glyphs()
    return "".join(char if ord(char) in known and ord(char) >= 32 else "\ufffd" for char in text)


def markup(text: str) -> str:
    """Return text for a paragraph: printable, with nothing read as markup."""
    return escape(printable(re.sub(r"[ \t\r\n]+", " ", text)))


def text_width(text: str, font: str, size: float) -> float:
    """Width in points."""
    load_fonts()
    return float(pdfmetrics.stringWidth(text, font, size))


def fit_text(text: str, font: str, size: float, width: float) -> str:
    """Return the text, cut with an ellipsis where it is wider than `width` points."""
    text = printable(text)
    if text_width(text, font, size) <= width:
        return text
    while text and text_width(text + "…", font, size) > width:
        text = text[:-1]
    return text.rstrip() + "…"


def _style(font: str, size: float, leading: float, colour: Color = INK, **more: object) -> ParagraphStyle:
    """A paragraph style."""
    return ParagraphStyle("", fontName=font, fontSize=size, leading=leading, textColor=colour, splitLongWords=1, **more)


@functools.cache
def style(name: str) -> ParagraphStyle:
    """Return a paragraph style by its name."""
    load_fonts()
    styles = {
        "title": lambda: _style(LIGHT, 24, 28, ACCENT),
        "subject": lambda: _style(MEDIUM, 12, 16),
        "section": lambda: _style(MEDIUM, 15, 19, ACCENT, spaceBefore=15, spaceAfter=5),
        "heading": lambda: _style(MEDIUM, 10.5, 13, INK, spaceBefore=8, spaceAfter=3),
        "body": lambda: _style(REGULAR, 9, 13, spaceAfter=5),
        "fact": lambda: _style(REGULAR, 8.6, 11.4, spaceAfter=1),
        "note": lambda: _style(REGULAR, 7.8, 11, MID, spaceAfter=4),
        "strong": lambda: _style(MEDIUM, 9, 13, spaceAfter=3),
        "caution": lambda: _style(ITALIC, 8, 11, INK, leftIndent=8, spaceBefore=2, spaceAfter=6, borderPadding=0),
        "outcome": lambda: _style(
            MEDIUM,
            9.6,
            13.5,
            INK,
            backColor=FAINT,
            borderPadding=(5, 7, 6, 7),
            leftIndent=7,
            rightIndent=7,
            spaceBefore=11,
            spaceAfter=9,
        ),
        "numbered": lambda: _style(
            REGULAR,
            8,
            10.3,
            spaceAfter=2.2,
            leftIndent=15,
            bulletIndent=0,
            bulletFontName=REGULAR,
            bulletFontSize=8,
        ),
        "label": lambda: _style(MEDIUM, 9, 13, ACCENT),
        "small-label": lambda: _style(REGULAR, 7.4, 10, MID),
        "value": lambda: _style(MEDIUM, 9, 12),
        "hash": lambda: _style(REGULAR, 8.4, 12),
        "caption": lambda: _style(MEDIUM, 8.6, 11.5, INK, spaceBefore=7, spaceAfter=3),
        "cell": lambda: _style(REGULAR, 7.6, 10),
        "cell-strong": lambda: _style(MEDIUM, 7.6, 10),
        "cell-group": lambda: _style(MEDIUM, 7.8, 10.4),
        "head": lambda: _style(MEDIUM, 7.3, 9),
        "head-over": lambda: _style(MEDIUM, 7.3, 9, alignment=TA_CENTER),
        "head-number": lambda: _style(MEDIUM, 7.3, 9, alignment=TA_RIGHT),
        "contents": lambda: _style(REGULAR, 8.6, 12),
        "card-head": lambda: _style(MEDIUM, 8.4, 11),
        "card-value": lambda: _style(REGULAR, 8, 15.5),
        "picture": lambda: _style(REGULAR, 6.6, 8.2),
        "card": lambda: _style(REGULAR, 7.6, 10.2),
    }
    return styles[name]()
