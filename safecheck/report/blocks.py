"""What a page is made of, before anything is drawn: plain frozen objects, without fonts, points or colours."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal, TypeAlias

import numpy as np
import numpy.typing as npt

__all__ = [
    "NEAR",
    "Bar",
    "Bars",
    "Block",
    "Bound",
    "Chart",
    "Charts",
    "Column",
    "Contents",
    "Facts",
    "Gallery",
    "GreyScale",
    "Heading",
    "Numbered",
    "Picture",
    "Pictures",
    "PlaceCard",
    "Places",
    "Point",
    "Prose",
    "Report",
    "Row",
    "Section",
    "Series",
    "Signatures",
    "Table",
    "Title",
]

NEAR = 2.5
"""Limits up to this many times the largest value are drawn on a chart."""

Grey: TypeAlias = npt.NDArray[np.uint8]
"""(rows, columns) or (rows, columns, 3), 0 black to 255 white."""


@dataclass(frozen=True, slots=True)
class Title:
    """The head of the first page."""

    title: str
    subject: str
    facts: tuple[tuple[str, str], ...]
    """Label and value, shown side by side."""
    record_sha256: str
    hashed: str = "the record"
    """What the hash is of."""


@dataclass(frozen=True, slots=True)
class Heading:
    """A heading inside a section, which also becomes a bookmark."""

    text: str


@dataclass(frozen=True, slots=True)
class Prose:
    """A paragraph."""

    text: str
    style: Literal["body", "note", "strong", "caution", "outcome"] = "body"


@dataclass(frozen=True, slots=True)
class Numbered:
    """A list of sentences, numbered from `first`."""

    items: tuple[str, ...]
    first: int = 1


@dataclass(frozen=True, slots=True)
class Facts:
    """Labels on the left, sentences on the right."""

    pairs: tuple[tuple[str, tuple[str, ...]], ...]


@dataclass(frozen=True, slots=True)
class Column:
    """The head of a column, with its unit."""

    head: str
    unit: str = ""
    number: bool = False
    """Numbers stand right-aligned with equal decimals, so that points stand below each other."""
    over: str = ""
    """A head shared with neighbours of the same text."""
    blank: bool = False
    """Left to be filled in by hand."""


@dataclass(frozen=True, slots=True)
class Row:
    """Cells, one per column; a group row has one cell that spans them all."""

    cells: tuple[str, ...]
    group: bool = False
    strong: bool = False


@dataclass(frozen=True, slots=True)
class Table:
    """A table with thin rules."""

    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    caption: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True)
class Point:
    """One candidate on a chart: the middle, the spread and the worst."""

    x: float
    y: float
    low: float | None = None
    high: float | None = None
    worst: float | None = None


@dataclass(frozen=True, slots=True)
class Series:
    """Points of one codec, in order of x."""

    name: str
    points: tuple[Point, ...]
    look: int | None = None
    """Number of its mark and dash, for curves that stand on several charts; by default its place."""


@dataclass(frozen=True, slots=True)
class Bound:
    """A declared limit, drawn as a line across the chart."""

    value: float
    text: str


@dataclass(frozen=True, slots=True)
class Chart:
    """A measure against the achieved ratio."""

    title: str
    x_title: str
    y_title: str
    series: tuple[Series, ...]
    bounds: tuple[Bound, ...] = ()
    apart: bool = True
    """Whether curves are moved sideways by a little, so that their spreads do not cover each other."""

    @property
    def highest(self) -> float:
        """Largest value on the chart."""
        points = [point for item in self.series for point in item.points]
        return max(max(point.y, point.high or 0, point.worst or 0) for point in points)

    @property
    def near_bounds(self) -> tuple[Bound, ...]:
        """Limits near enough to the values that drawing them leaves the curves readable."""
        return tuple(bound for bound in self.bounds if 0 < bound.value <= NEAR * self.highest)

    @property
    def far_bounds(self) -> tuple[Bound, ...]:
        """Limits that the chart leaves out, to be named below it."""
        return tuple(bound for bound in self.bounds if bound not in self.near_bounds)

    @property
    def single(self) -> bool:
        """Whether no curve joins points."""
        return all(len(item.points) == 1 for item in self.series)


@dataclass(frozen=True, slots=True)
class Charts:
    """Charts side by side, at most two."""

    charts: tuple[Chart, ...]
    caption: str = ""
    size: Literal["usual", "lower", "low"] = "usual"
    """Their height."""


@dataclass(frozen=True, slots=True)
class Bar:
    """One bar: bytes before (open) or after (filled)."""

    label: str
    value: float
    text: str
    before: bool = False


@dataclass(frozen=True, slots=True)
class Bars:
    """Horizontal bars on one scale from zero."""

    bars: tuple[Bar, ...]
    caption: str = ""


@dataclass(frozen=True, slots=True)
class Pictures:
    """Crops of a worst place: only in dossiers with images."""

    original: Grey
    recompressed: Grey
    difference: Grey
    """128 is no change; 1 and 255 are the ends of the scale."""
    scale: float
    """What white stands for, in `unit`; black is its negative."""
    unit: str
    window: str
    """The window named, as shown below the pictures."""
    mark: tuple[int, int, int, int]
    """First row, first column, rows and columns of the patch inside the crop."""


@dataclass(frozen=True, slots=True)
class PlaceCard:
    """Where a candidate moved values most."""

    head: str
    value: str
    unit: str
    measure: str
    lines: tuple[tuple[str, str], ...]
    """Label and value."""
    rows: int
    columns: int
    row: int | None
    column: int | None
    size_rows: int
    size_columns: int
    pictures: Pictures | None = None
    without_pictures: str = ""
    """Why a dossier with images shows none here."""


@dataclass(frozen=True, slots=True)
class Places:
    """Cards in a grid."""

    cards: tuple[PlaceCard, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Picture:
    """Grey pixels with a line of words below."""

    pixels: Grey
    caption: str


@dataclass(frozen=True, slots=True)
class GreyScale:
    """What the greys of pictures stand for: from minus to plus a value."""

    value: float
    unit: str


@dataclass(frozen=True, slots=True)
class Gallery:
    """Rows of pictures of one size on one scale."""

    rows: tuple[tuple[Picture, ...], ...]
    side: float
    """Of the longer side of a picture, in points."""
    scale: GreyScale | None = None
    note: str = ""


@dataclass(frozen=True, slots=True)
class Signatures:
    """Blank blocks for named roles."""

    head: str
    roles: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Contents:
    """Where the list of sections with their pages stands."""


Block: TypeAlias = (
    Title | Heading | Prose | Numbered | Facts | Table | Charts | Bars | Places | Gallery | Signatures | Contents
)


@dataclass(frozen=True, slots=True)
class Section:
    """A part of the record with a bookmark of its own."""

    title: str
    blocks: tuple[Block, ...]
    room_mm: float = 62.0
    """Height that must be left on the page for the section to begin on it."""
    together: bool = False
    """Whether its blocks share a page where one can hold them."""


@dataclass(frozen=True, slots=True)
class Report:
    """The whole document."""

    title: str
    subject: str
    reference: str
    record_sha256: str
    front: tuple[Block, ...]
    """First pages: what was asked, run and found, and the cautions."""
    sections: tuple[Section, ...]
    marks: tuple[str, ...] = field(default=())
    """What stands at the head of every page, e.g. that sources were already lossy."""
    across: str = ""
    """What stands across every page, or ''."""
    hashed: str = "the record"
    """What the hash at the foot of every page is of."""
