"""Vector drawings: error against achieved ratio, and bytes as bars. Curves differ by marker and dash, not by colour."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

from reportlab.graphics.shapes import Circle, Drawing, Group, Line, Polygon, PolyLine, Rect, String

from safecheck.report.blocks import Bars, Chart, Point, Series
from safecheck.report.theme import (
    ACCENT,
    HAIR,
    INK,
    LIGHT,
    MEDIUM,
    MID,
    REGULAR,
    RULE,
    WHITE,
    fit_text,
    load_fonts,
    printable,
    text_width,
)

__all__ = ["bars_drawing", "chart_drawing", "log_ticks", "nice_ticks", "ratio_ticks"]

_SMALL = 7.0
_KEY_LINE = 11.0
_STEP, _SPREAD = 2.5, 5.0
"""Points between neighbouring curves, and between the outermost at most."""
_WIDE = 8.0
"""Largest over smallest median from which an axis from zero would press curves flat."""
_DASHES: tuple[tuple[float, ...] | None, ...] = (
    *(None, (4, 2), (1.4, 1.6), (7, 2, 1.5, 2), (2.5, 1.2), (9, 3)),
    *((1, 3), (6, 1.5), (3, 3, 1, 3)),
)
_GREYS = (INK, ACCENT, MID) * 3
_RATIOS = (1, 1.5, 2, 3, 4, 5, 6, 8, 10, 15, 20, 30, 40, 60, 80, 100, 150, 200, 300, 400, 600, 800, 1000)


@dataclass(frozen=True, slots=True)
class _Scale:
    """Maps values to points, evenly or by logarithm."""

    low: float
    high: float
    start: float
    end: float
    logarithmic: bool = False

    def at(self, value: float) -> float:
        """Position of a value; by logarithm what lies below the lowest stands there."""
        low, high = self.low, self.high
        if self.logarithmic:
            low, high, value = math.log(low), math.log(high), math.log(max(value, low))
        return self.start + (value - low) / (high - low) * (self.end - self.start)


def nice_ticks(high: float, about: int = 5) -> list[float]:
    """Return ticks from 0 to at least `high` in steps of 1, 2, 2.5 or 5 times a power of ten."""
    if not high > 0:
        return [0.0, 1.0]
    raw = high / about
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(factor * power for factor in (1, 2, 2.5, 5, 10) if factor * power >= raw * (1 - 1e-9))
    return [step * index for index in range(math.ceil(high / step - 1e-9) + 1)]


def ratio_ticks(low: float, high: float, width: float, apart: float = 17.0) -> list[float]:
    """Return the round ratios between two, none closer on the logarithmic axis than `apart` points."""
    scale = _Scale(low, high, 0, width, logarithmic=True)
    kept: list[float] = []
    for ratio in _RATIOS:
        if low <= ratio <= high and (not kept or scale.at(ratio) - scale.at(kept[-1]) >= apart):
            kept.append(float(ratio))
    return kept or [low]


def chart_drawing(chart: Chart, width: float, height: float) -> Drawing:
    """Draw one chart: title and key above, axes, declared limits, curves with their spread.

    `height` is that of a chart whose key takes one line; further lines are added, so that they press no curve flat.
    """
    load_fonts()
    keys = _key(chart.series, width)
    height += _KEY_LINE * (len(keys) - 1)
    drawing = Drawing(width, height, initialFontName=REGULAR)
    top = height - 14 - _KEY_LINE * len(keys) - 4
    y, ticks = _error_axis(chart, 27, top - 10)
    left = max(text_width(label, REGULAR, _SMALL) for _, label in ticks) + 8
    ratios = [point.x for item in chart.series for point in item.points]
    x = _Scale(min(ratios) / 1.12, max(ratios) * 1.12, left, width - 6, logarithmic=True)
    drawing.add(String(0, height - 9, printable(chart.title), fontName=MEDIUM, fontSize=8.4, fillColor=INK))
    _draw_keys(drawing, chart.series, keys, height - 22)
    y_title = f"{chart.y_title}, logarithmic axis" if y.logarithmic else chart.y_title
    drawing.add(String(0, top - 3, printable(y_title), fontName=REGULAR, fontSize=_SMALL, fillColor=MID))
    _axes(drawing, chart, x, y, ticks, width)
    for bound in chart.near_bounds:
        at = y.at(bound.value)
        drawing.add(Line(x.start, at, x.end, at, strokeColor=INK, strokeWidth=0.7, strokeDashArray=[1, 2]))
    shifts = _shifts(len(chart.series)) if chart.apart else [0.0] * len(chart.series)
    for index, (item, shift) in enumerate(zip(chart.series, shifts, strict=True)):
        _curve(drawing, item.points, x, y, _look(item, index), shift)
    _name_bounds(drawing, chart, x, y)
    return drawing


def _look(item: Series, place: int) -> int:
    """Number of a curve's mark and dash."""
    return place if item.look is None else item.look


def _shifts(curves: int) -> list[float]:
    """Move each curve sideways by a little: by so little in all that a point still stands at its ratio."""
    step = min(_STEP, _SPREAD / max(curves - 1, 1))
    return [step * (index - (curves - 1) / 2) for index in range(curves)]


def _error_axis(chart: Chart, start: float, end: float) -> tuple[_Scale, list[tuple[float, str]]]:
    """The axis of errors with its ticks: from zero, or by logarithm where zero would press small medians flat."""
    points = [point for item in chart.series for point in item.points]
    bounds = [bound.value for bound in chart.near_bounds]
    medians, high = [point.y for point in points], max([chart.highest, *bounds])
    if min(medians) > 0 and max(medians) > _WIDE * min(medians):
        low = min(*medians, *bounds, *(point.low for point in points if point.low))
        scale = _Scale(low / 1.25, high * 1.1, start, end, logarithmic=True)
        return scale, [(tick, f"{tick:,.12g}") for tick in log_ticks(scale.low, scale.high)]
    ticks = nice_ticks(high)
    return _Scale(0, ticks[-1], start, end), list(zip(ticks, _tick_labels(ticks), strict=True))


def log_ticks(low: float, high: float, most: int = 7) -> list[float]:
    """Return ticks between two values above 0: 1, 2 and 5 times powers of ten, or fewer where these are many."""
    powers = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    for factors, step in (((1, 2, 5), 1), ((1, 3), 1), ((1,), 1), ((1,), 2), ((1,), 3)):
        kept = [float(f"{factor}e{power}") for power in powers if power % step == 0 for factor in factors]
        kept = [tick for tick in kept if low <= tick <= high]
        if len(kept) <= most:
            break
    return kept or [low]


def _tick_labels(ticks: Sequence[float]) -> list[str]:
    """Ticks with equal decimals."""
    step = ticks[1] - ticks[0]
    places = max(0, -math.floor(math.log10(step) + 1e-9) + (1 if f"{step:.1e}".startswith("2.5") else 0))
    return [f"{tick:,.{places}f}" for tick in ticks]


def _axes(
    drawing: Drawing, chart: Chart, x: _Scale, y: _Scale, ticks: Sequence[tuple[float, str]], width: float
) -> None:
    """Grid lines, ticks and the title of the axis of ratios."""
    for value, label in ticks:
        at = y.at(value)
        drawing.add(Line(x.start, at, x.end, at, strokeColor=HAIR, strokeWidth=0.35))
        drawing.add(_label(label, x.start - 4, at - 2.4, "end"))
    drawing.add(Line(x.start, y.start, x.end, y.start, strokeColor=INK, strokeWidth=0.6))
    for ratio in ratio_ticks(x.low, x.high, x.end - x.start):
        at = x.at(ratio)
        drawing.add(Line(at, y.start, at, y.start - 3, strokeColor=INK, strokeWidth=0.5))
        drawing.add(_label(f"{ratio:g}", at, y.start - 11, "middle"))
    title = fit_text(chart.x_title, REGULAR, _SMALL, width)
    drawing.add(_label(title, x.end, 4, "end", MID))


def _label(text: str, x: float, y: float, anchor: str, colour: object = INK) -> String:
    """Small text."""
    return String(x, y, text, fontName=REGULAR, fontSize=_SMALL, textAnchor=anchor, fillColor=colour)


def _name_bounds(drawing: Drawing, chart: Chart, x: _Scale, y: _Scale) -> None:
    """Name each declared limit at its line, where it hides least of the curves, on white so that none strikes it."""
    taken = _traces(chart, x, y)
    for bound in sorted(chart.near_bounds, key=lambda item: item.value):
        text = fit_text(bound.text, LIGHT, _SMALL, x.end - x.start - 6)
        wide, at = text_width(text, LIGHT, _SMALL), y.at(bound.value)
        places = [(left, base) for base in (at + 2.5, at - 7.5) for left in (x.start + 3, x.end - wide - 3)]
        inside = [place for place in places if place[1] >= y.start] or places[:2]
        left, base = min(inside, key=lambda place: _hidden(taken, place, wide))
        drawing.add(Rect(left - 1, base - 1.6, wide + 2, _SMALL + 1, fillColor=WHITE, strokeColor=None))
        drawing.add(String(left, base, text, fontName=LIGHT, fontSize=_SMALL, fillColor=INK))
        # A name counts for more than any curve, so that the next does not stand upon it.
        taken += [(left + part, base + 2) for part in range(math.ceil(wide)) for _ in range(10)]


def _hidden(taken: Sequence[tuple[float, float]], place: tuple[float, float], wide: float) -> int:
    """How many of the points taken a name would stand upon."""
    left, base = place
    return sum(left - 3 <= at <= left + wide + 3 and base - 3 <= up <= base + _SMALL + 1 for at, up in taken)


def _traces(chart: Chart, x: _Scale, y: _Scale) -> list[tuple[float, float]]:
    """Points along the curves and at the ends of their spreads."""
    found = []
    for item in chart.series:
        places = [(x.at(point.x), y.at(point.y)) for point in item.points]
        for (a, b), (c, d) in itertools.pairwise(places):
            found += [(a + (c - a) * part / 40, b + (d - b) * part / 40) for part in range(41)]
        for point, (at, _) in zip(item.points, places, strict=True):
            found += [(at, y.at(value)) for value in (point.low, point.y, point.high, point.worst) if value is not None]
    return found


def _curve(drawing: Drawing, points: Sequence[Point], x: _Scale, y: _Scale, index: int, shift: float) -> None:
    """One codec: line through the medians, spread bars, the largest, markers."""
    colour = _GREYS[index % len(_GREYS)]
    places = [(x.at(point.x) + shift, y.at(point.y)) for point in points]
    if len(places) > 1:
        flat = [part for place in places for part in place]
        drawing.add(PolyLine(flat, strokeColor=colour, strokeWidth=0.9, strokeDashArray=_dash(index)))
    for point, (at, middle) in zip(points, places, strict=True):
        if point.low is not None and point.high is not None:
            low, high = y.at(point.low), y.at(point.high)
            drawing.add(Line(at, low, at, high, strokeColor=colour, strokeWidth=0.7))
            for end in (low, high):
                drawing.add(Line(at - 1.6, end, at + 1.6, end, strokeColor=colour, strokeWidth=0.7))
        if point.worst is not None:
            top = y.at(point.worst)
            drawing.add(Line(at - 3, top, at + 3, top, strokeColor=colour, strokeWidth=1.3))
        drawing.add(_marker(index, at, middle, colour))


def _dash(index: int) -> list[float] | None:
    """Dash pattern of a curve."""
    dash = _DASHES[index % len(_DASHES)]
    return list(dash) if dash else None


def _marker(index: int, x: float, y: float, colour: object) -> Group:
    """Circle, square, triangle, diamond, triangle upside down, filled or open; nine in all."""
    r = 2.4
    kind = index % len(_GREYS)
    fill = colour if kind in (0, 2, 4, 7) else WHITE
    drawn = {"fillColor": fill, "strokeColor": colour, "strokeWidth": 0.9}
    if kind in (0, 6):
        return Group(Circle(x, y, r, **drawn))
    if kind in (1, 4):
        return Group(Rect(x - r, y - r, 2 * r, 2 * r, **drawn))
    if kind in (2, 8):
        return Group(Polygon([x - r * 1.2, y - r, x + r * 1.2, y - r, x, y + r * 1.3], **drawn))
    if kind == 5:
        return Group(Polygon([x - r * 1.2, y + r, x + r * 1.2, y + r, x, y - r * 1.3], **drawn))
    return Group(Polygon([x - r * 1.3, y, x, y + r * 1.3, x + r * 1.3, y, x, y - r * 1.3], **drawn))


def _key(series: Sequence[Series], width: float) -> list[list[int]]:
    """Which entries of the key stand on which line."""
    lines: list[list[int]] = [[]]
    used = 0.0
    for index, item in enumerate(series):
        need = _key_width(item)
        if lines[-1] and used + need > width:
            lines.append([])
            used = 0.0
        lines[-1].append(index)
        used += need
    return lines


def _key_width(item: Series) -> float:
    """Sample, gap and name."""
    return 36 + text_width(printable(item.name), REGULAR, _SMALL)


def _draw_keys(drawing: Drawing, series: Sequence[Series], lines: Sequence[Sequence[int]], top: float) -> None:
    """Samples of line and marker with the names."""
    for number, line in enumerate(lines):
        at, y = 0.0, top - _KEY_LINE * number
        for index in line:
            look = _look(series[index], index)
            colour, dash = _GREYS[look % len(_GREYS)], _dash(look)
            drawing.add(Line(at, y + 2.4, at + 20, y + 2.4, strokeColor=colour, strokeWidth=0.9, strokeDashArray=dash))
            drawing.add(_marker(look, at + 10, y + 2.4, colour))
            drawing.add(_label(printable(series[index].name), at + 24, y, "start"))
            at += _key_width(series[index])


def bars_drawing(bars: Bars, width: float) -> Drawing:
    """Draw bars on one scale from zero: open ones are before, filled ones after."""
    load_fonts()
    line, gap = 11.5, 8.0
    names = min(max(text_width(printable(bar.label), REGULAR, 7.4) for bar in bars.bars) + 8, width * 0.5)
    largest = max(bar.value for bar in bars.bars) or 1.0
    room = width - names - max(text_width(bar.text, REGULAR, 7.4) for bar in bars.bars) - 8
    height = line * len(bars.bars) + gap
    drawing = Drawing(width, height, initialFontName=REGULAR)
    for index, bar in enumerate(bars.bars):
        y = height - gap / 2 - line * (index + 1) + 2
        size = max(bar.value / largest * room, 0.8)
        label = fit_text(bar.label, REGULAR, 7.4, names - 6)
        drawing.add(String(0, y + 1.4, label, fontName=REGULAR, fontSize=7.4, fillColor=INK))
        fill = WHITE if bar.before else MID
        drawing.add(Rect(names, y, size, 7.4, fillColor=fill, strokeColor=INK, strokeWidth=0.5))
        drawing.add(String(names + size + 5, y + 1.4, bar.text, fontName=REGULAR, fontSize=7.4, fillColor=INK))
    drawing.add(Line(names, gap / 2 - 1, names, height - gap / 2 + 1, strokeColor=RULE, strokeWidth=0.5))
    return drawing
