"""Page numbers that are known only at the end: each is a form of its own, placed early and drawn last."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from reportlab.lib.units import mm
from reportlab.platypus.flowables import Flowable

from safecheck.report.theme import FOOT, INK, LEFT, REGULAR, TEXT_WIDTH

__all__ = ["Anchor", "Closing", "Folio", "PageNumber", "place_folio"]

_FOLIO_BASE = FOOT - 11
_SIZE = 8.6


@dataclass(slots=True)
class Folio:
    """What drawing tells: on which pages the bookmarks lie."""

    pages: dict[str, int] = field(default_factory=dict)


class Anchor(Flowable):  # type: ignore[misc] # reportlab is untyped
    """A bookmark of no height that notes its page."""

    def __init__(self, key: str, text: str, folio: Folio) -> None:
        super().__init__()
        self._key, self._text, self._folio = key, text, folio
        self.keepWithNext = True

    def wrap(self, *_available: float) -> tuple[float, float]:
        """No size."""
        return 0, 0

    def draw(self) -> None:
        """Set the bookmark."""
        canvas = self.canv
        canvas.bookmarkHorizontal(self._key, 0, 14 * mm)
        canvas.addOutlineEntry(self._text, self._key, 0)
        self._folio.pages[self._key] = canvas.getPageNumber()


class PageNumber(Flowable):  # type: ignore[misc] # reportlab is untyped
    """The page of a bookmark, right-aligned."""

    def __init__(self, key: str, width: float) -> None:
        super().__init__()
        self._key, self.width = key, width

    def wrap(self, *_available: float) -> tuple[float, float]:
        """One line."""
        return self.width, 12

    def draw(self) -> None:
        """Place the form that `Closing` draws."""
        self.canv.translate(self.width, 3)
        self.canv.doForm(f"number-{self._key}")


class Closing(Flowable):  # type: ignore[misc] # reportlab is untyped
    """The last of all: draws every number that was placed."""

    def __init__(self, folio: Folio) -> None:
        super().__init__()
        self._folio = folio

    def wrap(self, *_available: float) -> tuple[float, float]:
        """No size."""
        return 0, 0

    def draw(self) -> None:
        """Draw the numbers of the contents and of the pages."""
        total = self.canv.getPageNumber()
        for key, page in self._folio.pages.items():
            _form(self.canv, f"number-{key}", f"{page}", 0, 0, _SIZE)
        for page in range(1, total + 1):
            text = f"Page {page} of {total}"
            _form(self.canv, f"folio-{page}", text, LEFT + TEXT_WIDTH, _FOLIO_BASE, 8)


def _form(canvas: Any, name: str, text: str, x: float, y: float, size: float) -> None:  # noqa: ANN401 - reportlab's canvas
    """Define a form that ends at (x, y)."""
    canvas.beginForm(name, x - 100, y - 4, x + 1, y + 12)
    canvas.setFillColor(INK)
    canvas.setFont(REGULAR, size)
    canvas.drawRightString(x, y, text)
    canvas.endForm()


def place_folio(canvas: Any, page: int) -> None:  # noqa: ANN401 - reportlab's canvas
    """Place "Page n of m" at the foot."""
    canvas.doForm(f"folio-{page}")
