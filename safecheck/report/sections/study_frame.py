"""The pages of one studied frame: curves, the parts of the loss, kept shares, gains, regions, pictures."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Literal

import numpy as np
import numpy.typing as npt

from safecheck.record.transforms import StudyBasis, StudyPicture, StudyPictures
from safecheck.report.blocks import (
    Block,
    Chart,
    Charts,
    Column,
    Gallery,
    GreyScale,
    Picture,
    Point,
    Prose,
    Row,
    Section,
    Series,
    Table,
)
from safecheck.report.numbers import aligned, count, figure
from safecheck.report.sections.study_words import (
    AT_RATIO,
    RATIO,
    SHARE_PERCENT,
    SHORT_NAMES,
    USUAL_SIZE,
    FrameFigures,
    fine,
    frame_name,
    place_line,
)

__all__ = ["basis_section", "frame_section"]

_WHOLE_PAGE_MM = 240.0
"""Each frame begins on a page of its own."""
_SPAN = 3.0
"""Greys span so many times the root mean square of the cosine transform's error at the usual size."""
_COPIES = 6
"""Copies of each pixel of a basis function."""
_SMALL, _LARGE = 74.0, 150.0
"""Sides of pictures in points."""


def frame_section(item: FrameFigures, *, with_images: bool) -> Section:
    """Pages of one frame."""
    blocks: list[Block] = [Prose(line, "note") for line in _lines(item)]
    blocks += [_by_size(item), _by_transform(item), _kept(item)]
    if item.coded_sizes:
        blocks.append(_parts(item))
    blocks.append(_gains(item))
    if item.regions:
        blocks.append(_regions(item))
    if with_images:
        blocks += _pictures(item)
    return Section(frame_name(item), tuple(blocks), room_mm=_WHOLE_PAGE_MM)


def _lines(item: FrameFigures) -> tuple[str, ...]:
    """Where the frame lies and what it is like."""
    frame = item.frame
    down, across = (item.at(f"correlation_{way}", area="content") for way in ("down", "across"))
    size = f"{count(frame.rows)} rows, {count(frame.columns)} columns, {frame.bits_stored} bits stored"
    content = f"{count(frame.content_pixels)} content pixels by the rule {frame.content_rule}"
    alike = (
        "" if down is None or across is None else f"; correlation of neighbours {down:.4f} down, {across:.4f} across"
    )
    return (f"{place_line(frame)}.", f"{size}; {content}{alike}. Errors in {frame.unit}.", *frame.notes)


def _by_size(item: FrameFigures) -> Charts:
    """Curves of the cosine transform, one for each tile size."""
    curves = {f"{size} by {size}": ("cosine", size) for size in item.sizes}
    return _charts(item, "Cosine, by tile size", curves, caption="")


def _by_transform(item: FrameFigures) -> Charts:
    """Curves of the transforms at one tile size."""
    title = f"Tiles of {USUAL_SIZE} by {USUAL_SIZE}, by transform"
    curves = {name: (transform, USUAL_SIZE) for transform, name in SHORT_NAMES.items()}
    return _charts(item, title, curves, caption="Left: the largest coefficients kept, no quantiser. Right: codes.")


def _charts(item: FrameFigures, title: str, curves: dict[str, tuple[str, int]], *, caption: str) -> Charts:
    """Error against kept share, and against achieved ratio where there are codes."""
    axis = f"RMS error over content, {item.frame.unit}"
    kept = _series(item, curves, "kept share", "kept_share")
    coded = _series(item, curves, "ratio", "ratio_bits_stored")
    charts = [Chart(title, "kept share, % of coefficients", axis, kept, apart=False)]
    if coded:
        charts.append(Chart(title, "achieved ratio, bits-stored basis", axis, coded, apart=False))
    return Charts(tuple(charts), caption=caption)


def _series(
    item: FrameFigures, curves: dict[str, tuple[str, int]], fixed: Literal["kept share", "ratio"], along: str
) -> tuple[Series, ...]:
    """Points of each curve that has any, in order of x."""
    made = []
    for look, (name, (transform, size)) in enumerate(curves.items()):
        points = []
        for at in item.fixed_at(fixed):
            x = item.at(along, transform, size, (fixed, at))
            y = item.at("rmse", transform, size, (fixed, at), "content")
            if x is not None and y is not None:
                points.append(Point(x, y))
        if points:
            made.append(Series(name, tuple(sorted(points, key=lambda point: point.x)), look))
    return tuple(made)


def _grouped(
    groups: Sequence[str], lines: Sequence[str], value: Callable[[str, str, int], float | None], columns: int
) -> tuple[Row, ...]:
    """Rows under the name of each transform, all figures of the table with equal decimals."""
    places = [(group, line, column) for group in groups for line in lines for column in range(columns)]
    cells = dict(zip(places, fine([value(*place) for place in places]), strict=True))
    rows: list[Row] = []
    for group in groups:
        rows.append(Row((SHORT_NAMES[group],), group=True))
        rows += [Row((line, *(cells[group, line, column] for column in range(columns)))) for line in lines]
    return tuple(rows)


def _kept(item: FrameFigures) -> Table:
    """Errors at kept shares: shares down, tile sizes across."""
    shares = {f"{share:g} %": share for share in reversed(item.fixed_at("kept share"))}
    sizes = item.sizes

    def value(transform: str, line: str, column: int) -> float | None:
        return item.at("rmse", transform, sizes[column], ("kept share", shares[line]), "content")

    heads = [Column(f"{size} by {size}", number=True, over=f"RMS error, {item.frame.unit}") for size in sizes]
    return Table(
        (Column("Kept share"), *heads),
        _grouped(tuple(SHORT_NAMES), tuple(shares), value, len(sizes)),
        caption="The transform and the tile size alone: the largest coefficients of each tile kept",
        note="A dash: the share is less than one coefficient a tile.",
    )


_PARTS = (
    ("rmse", "content", None),
    ("ratio_bits_stored", "", 2),
    ("kept_share", "inner tiles", 1),
    ("dropped_part", "inner tiles", 0),
    ("rounding_part", "inner tiles", 0),
    ("rounding_over_law", "inner tiles", 2),
    ("rmse_over_cosine", "content", 2),
    ("rmse_over_best_size", "content", 2),
)
"""Measure, area and decimals of each column."""


def _parts(item: FrameFigures) -> Table:
    """Whose part of the loss is what, at one ratio."""
    sizes = item.coded_sizes
    lines = [(transform, size) for transform in SHORT_NAMES for size in sizes]
    columns = [
        aligned([item.at(measure, *line, AT_RATIO, area) for line in lines], places) for measure, area, places in _PARTS
    ]
    splits = [item.at("dropped_part", *line, AT_RATIO, "inner tiles") for line in lines]
    cells = dict(zip(lines, zip(*columns, strict=True), strict=True))
    rows: list[Row] = []
    for transform, name in SHORT_NAMES.items():
        rows.append(Row((name,), group=True))
        rows += [Row((f"{size} by {size}", *cells[transform, size])) for size in sizes]
    heads = (
        Column("Tile"),
        Column("RMS error", item.frame.unit, number=True),
        Column("achieved ratio", number=True),
        Column("came back", "% of coefficients", number=True),
        Column("dropped", "%", number=True, over="Squared error"),
        Column("rounding", "%", number=True, over="Squared error"),
        Column("rounding over law", number=True),
        Column("cosine, same size", number=True, over="RMS error over"),
        Column("best size", number=True, over="RMS error over"),
    )
    return Table(
        heads,
        tuple(rows),
        caption=f"Transform, tile size and quantiser in codes at {RATIO:g}:1",
        note="" if all(known is not None for known in splits) else "Dashes: no inner tile of that size.",
    )


_GAINS = (
    ("Cosine", "cosine", ""),
    ("Walsh-Hadamard", "walsh-hadamard", ""),
    ("Fourier, real", "fourier", ""),
    ("Fourier, complex", "fourier", "_complex"),
)


def _gains(item: FrameFigures) -> Table:
    """Coding gains, measured and of Markov fields."""
    columns = [Column("Tile"), Column("inner tiles", number=True)]
    columns += [Column(head, number=True, over=name) for name, _, _ in _GAINS for head in ("here", "own corr.", "0.95")]
    rows = []
    for size in item.sizes:
        values = [
            item.at(f"{measure}{ending}", transform, size, area=area)
            for _, transform, ending in _GAINS
            for measure, area in (("gain", "inner tiles"), ("gain_model_own", ""), ("gain_model_0.95", ""))
        ]
        tiles = item.at("inner_tiles", size=size, area="inner tiles")
        rows.append(Row((f"{size} by {size}", count(int(tiles or 0)), *aligned(values, 2))))
    return Table(
        tuple(columns),
        tuple(rows),
        caption="Coding gain, dB",
        note="Here: measured; a dash where there are fewer than 16 inner tiles or a coefficient does not vary. Own "
        "corr. and 0.95: first-order Markov fields with the frame's own correlations of neighbours, and with 0.95.",
    )


def _regions(item: FrameFigures) -> Table:
    """Errors over drawn regions."""
    shown = [("kept share", SHARE_PERCENT, "cosine", USUAL_SIZE)]
    shown += [("ratio", RATIO, transform, USUAL_SIZE) for transform in SHORT_NAMES]
    shown += [("ratio", RATIO, "cosine", size) for size in (16, 32)]
    areas = ("content", *item.regions)
    columns = [
        fine([item.at("rmse", transform, size, (_fixed(fixed), at), area) for area in areas])
        for fixed, at, transform, size in shown
    ]
    heads = [
        Column(
            f"{SHORT_NAMES[transform]} {size}",
            number=True,
            over=f"{at:g} % kept" if fixed == "kept share" else f"{at:g}:1",
        )
        for fixed, at, transform, size in shown
    ]
    rows = [
        Row((area.removeprefix("region "), *line)) for area, line in zip(areas, zip(*columns, strict=True), strict=True)
    ]
    return Table((Column("Area"), *heads), tuple(rows), caption=f"RMS error over drawn regions, {item.frame.unit}")


def _fixed(text: str) -> Literal["kept share", "ratio"]:
    return "kept share" if text == "kept share" else "ratio"


def _pictures(item: FrameFigures) -> tuple[Block, ...]:
    """Errors of one part of the frame, or why none is shown."""
    frame, pictures = item.frame, item.frame.pictures
    if pictures is None:
        reason = "it may show text" if frame.may_show_text else "none was taken"
        return (Prose(f"No picture of this frame is shown: {reason}.", "note"),)
    return (*_before(pictures), *_errors(item, pictures))


def _before(pictures: StudyPictures) -> tuple[Block, ...]:
    """The part of the frame that is shown, as it is."""
    rows, columns = pictures.original.shape
    levels = (pictures.original - pictures.low) / (pictures.high - pictures.low) * 255
    grey = np.clip(np.rint(levels), 0, 255).astype(np.uint8)
    note = (
        f"The part shown: {rows} rows from {pictures.first_row}, {columns} columns from {pictures.first_column}, where "
        f"cosine tiles of {USUAL_SIZE} by {USUAL_SIZE} lose most. Black {figure(pictures.low)}, white "
        f"{figure(pictures.high)}, in stored values. On all pictures a stronger error is as black or white as the ends."
    )
    return (Gallery(((Picture(grey, "before"),),), _SMALL, note=note),)


def _errors(item: FrameFigures, pictures: StudyPictures) -> tuple[Block, ...]:
    """Errors at the kept share, and of codes, each on one scale."""
    sets = (
        (pictures.kept, f"{pictures.kept_percent:g} % of coefficients kept, no quantiser"),
        (pictures.coded, f"codes at {pictures.ratio:g}:1"),
    )
    return tuple(_gallery(shown, words, item.frame.unit) for shown, words in sets if shown)


def _gallery(shown: Sequence[StudyPicture], words: str, unit: str) -> Gallery:
    """Errors, a transform a row, a tile size a column, in greys of one scale."""
    usual = next(item.error for item in shown if (item.transform, item.tile_size) == ("cosine", USUAL_SIZE))
    span = _SPAN * float(np.sqrt(np.mean(usual**2))) or 1.0
    rows = [
        tuple(
            Picture(_grey(item.error / span), f"{SHORT_NAMES[item.transform]} {item.tile_size}")
            for item in sorted(shown, key=lambda item: item.tile_size)
            if item.transform == transform
        )
        for transform in SHORT_NAMES
    ]
    note = f"Error, {words}. The ends are {_SPAN:g} times the RMS error shown for cosine {USUAL_SIZE}."
    return Gallery(tuple(rows), _SMALL, GreyScale(span, unit), note)


def _grey(relative: npt.NDArray[np.float64]) -> npt.NDArray[np.uint8]:
    """-1 to 1 as greys 1 to 255, 128 in the middle."""
    return np.clip(np.rint(128 + 127 * relative), 1, 255).astype(np.uint8)


def basis_section(bases: Sequence[StudyBasis]) -> Section:
    """Basis functions of tiles, each on its own scale."""
    rows: dict[int, list[Picture]] = {}
    for item in bases:
        size = len(item.functions)
        rows.setdefault(size, []).append(Picture(_mosaic(item.functions), f"{SHORT_NAMES[item.transform]} {size}"))
    note = (
        "Every function of a tile, low frequencies at the top left, row frequency downwards; middle grey is 0, and "
        "each function spans its own range. The first is the constant, in all transforms."
    )
    return Section("Basis functions", (Gallery(tuple(map(tuple, rows.values())), _LARGE, note=note),))


def _mosaic(functions: npt.NDArray[np.float64]) -> npt.NDArray[np.uint8]:
    """All products of two functions side by side, each within a thin line and apart from the next."""
    size = len(functions)
    every = np.einsum("ui,vj->uvij", functions, functions)
    greys = _grey(every / np.abs(every).max(axis=(2, 3), keepdims=True))
    enlarged = np.repeat(np.repeat(greys, _COPIES, axis=2), _COPIES, axis=3)
    lined = np.pad(enlarged, ((0, 0), (0, 0), (1, 1), (1, 1)), constant_values=0)
    apart = np.pad(lined, ((0, 0), (0, 0), (2, 2), (2, 2)), constant_values=255)
    side = size * apart.shape[2]
    return apart.transpose(0, 2, 1, 3).reshape(side, side)
