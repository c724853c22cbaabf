"""Line integrals of attenuation through an invented chest, seen from the back."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from synthetic_studies.drawing import Blob, Canvas, Ribbon, Stroke
from synthetic_studies.fields import low_passed
from synthetic_studies.truth import Grid

__all__ = ["chest_attenuation"]

Image = npt.NDArray[np.float64]
Points = list[tuple[float, float]]
_HEART = Blob(26, 50, 74, 52, 36, ((3, 0.05, 0.8),))


def chest_attenuation(grid: Grid, seed: int) -> Image:
    """Attenuation, (rows, columns), dimensionless: 0.1 beside the body to about 5 behind the heart."""
    rng = np.random.default_rng([seed, 32])
    canvas = Canvas(grid, 0.1)
    _add_trunk(canvas)
    for side in (-1, 1):
        _add_lung(canvas, rng, side)
    _add_mediastinum(canvas)
    _add_spine(canvas)
    for rib in range(11):
        _add_ribs(canvas, rib)
    for side in (-1, 1):
        _add_shoulder(canvas, side)
    texture = low_passed(rng, (grid.rows, grid.columns), 0.05 * grid.spacing_mm)
    fine = low_passed(rng, (grid.rows, grid.columns), min(0.4, 0.3 * grid.spacing_mm))
    return canvas.values + 0.03 * texture + 0.010 * fine


def _add_trunk(canvas: Canvas) -> None:
    """Add the soft tissue of trunk, neck, shoulders and breast."""
    canvas.add_dome(Blob(0, 130, 176, 330, 0, (), 2.6), 2.3, 0.6)
    canvas.add_dome(Blob(0, -190, 70, 120, 0, (), 2.6), 1.7, 0.9)
    canvas.add_dome(Blob(0, 205, 150, 112, 0, (), 2.4), 0.75, 0.9)
    for side in (-1, 1):
        canvas.add_dome(Blob(side * 112, -112, 108, 74, side * 22), 1.7, 1.0)
        canvas.add_dome(Blob(side * 70, 78, 64, 50), 0.22, 0.8)
        canvas.add_dome(Blob(side * 165, 0, 40, 170, side * 3), 0.5, 1.1)


def _add_lung(canvas: Canvas, rng: np.random.Generator, side: int) -> None:
    """Take away what air replaces, down to the dome of the diaphragm, and add the vessels within."""
    half_width = 64 if side < 0 else 60
    lung = Blob(side * 75, -22, half_width, 142, side * -6, ((3, 0.05, side * -1.2), (2, 0.05, 0.5)), 2.25)
    box, inside = canvas.cover(lung, 5.0)
    x_mm, y_mm = canvas.x_mm[:, box[1]], canvas.y_mm[box[0], :]
    depth = np.clip(-lung.distance_mm(x_mm, y_mm) / 46, 0, 1)
    lowest = 118 if side < 0 else 127
    dome = np.sqrt(np.clip(1 - ((x_mm - side * 62) / 70) ** 2, 0, 1))
    above = np.clip((lowest - 46 * dome - y_mm) / 3.0, 0, 1)
    heart = np.clip(-_HEART.distance_mm(x_mm, y_mm) / 12, 0, 1)
    open_air = inside * above * (1 - 0.55 * heart)
    canvas.values[box] -= open_air * (0.30 + 1.15 * np.sqrt(depth * (2 - depth)))
    vessels = Canvas(canvas.grid, 0.0)
    _add_vessels(vessels, rng, side)
    canvas.values[box] += open_air * vessels.values[box]


def _add_vessels(canvas: Canvas, rng: np.random.Generator, side: int) -> None:
    """Add a tree of vessels from one hilum, thinner and fainter with each branching."""
    for angle in np.linspace(-1.45, 1.5, 10) + rng.normal(0, 0.09, 10):
        start = (side * (36 + 7 * math.cos(float(angle))), -4 + 20 * math.sin(float(angle)))
        _grow(canvas, rng, start, float(angle), side, 3.3, 0)
    for _ in range(9):
        x_mm, y_mm = side * (40 + float(rng.normal(0, 6))), float(rng.normal(0, 15))
        knot = Blob(x_mm, y_mm, float(rng.uniform(6, 11)), float(rng.uniform(8, 15)), 20.0 * side)
        canvas.add_dome(knot, 0.20, 0.9)


def _grow(
    canvas: Canvas,
    rng: np.random.Generator,
    start: tuple[float, float],
    angle: float,
    side: int,
    radius_mm: float,
    depth: int,
) -> None:
    """Add one vessel from `start` (x, y) and its two branches; angle 0 points outwards."""
    points = [start]
    for _ in range(4):
        angle += float(rng.normal(0, 0.11))
        step = float(rng.uniform(0.75, 1.1)) * 2.0 * (radius_mm + 1.8)
        x_mm, y_mm = points[-1]
        points.append((x_mm + side * step * math.cos(angle), y_mm + step * math.sin(angle)))
    canvas.add(Ribbon(tuple(points), radius_mm, radius_mm * 0.7), 0.03 + 0.035 * radius_mm, 2.0)
    if depth < 3:
        for turn in (-0.40, 0.36):
            branch = angle + turn + float(rng.normal(0, 0.14))
            _grow(canvas, rng, points[-1], branch, side, radius_mm * 0.68, depth + 1)


def _add_mediastinum(canvas: Canvas) -> None:
    """Add heart and great vessels; take away trachea and its two branches."""
    canvas.add_dome(_HEART, 0.6, 0.75)
    canvas.add_dome(Blob(-18, 48, 38, 56, -6), 0.40, 0.9)
    canvas.add(Ribbon(((0, -215), (-2, -60), (4, 60), (4, 150)), 21, 24), 0.34, 12.0)
    canvas.add_dome(Blob(24, -50, 19, 19), 0.45, 0.8)
    canvas.add(Ribbon(((24, -45), (21, 30), (13, 150)), 11), 0.16, 4.0)
    canvas.add(Ribbon(((-2, -215), (-3, -120), (-4, -52)), 8.5), -0.34, 5.0)
    for side, reach in ((-1, 30), (1, 36)):
        canvas.add(Ribbon(((-4, -52), (side * 14, -34), (side * reach, -18)), 6.0, 4.0), -0.20, 4.0)


def _add_spine(canvas: Canvas) -> None:
    """Add vertebrae with discs between, pedicles, spinous and transverse processes."""
    for index in range(19):
        y_mm = 24.0 * index - 212
        canvas.add(Blob(0, y_mm, 18.5, 10.4, 0, (), 4), 0.22, 2.5)
        canvas.add(Blob(0, y_mm, 16.5, 8.4, 0, (), 4), -0.06, 2.5)
        canvas.add(Blob(0, y_mm + 6, 3.5, 6.5), 0.12, 2.5)
        for side in (-1, 1):
            canvas.add(Blob(side * 10.5, y_mm - 3, 3.6, 4.8), 0.10, 2.0)
            canvas.add(Stroke(side * 17, y_mm - 4, side * 30, y_mm - 7, 3.6), 0.08, 3.0)


def _add_shoulder(canvas: Canvas, side: int) -> None:
    """Add clavicle, shoulder blade and the head of the upper arm."""
    clavicle = ((side * 17, -122), (side * 34, -130), (side * 60, -137), (side * 92, -142), (side * 140, -158))
    _add_tube(canvas, Ribbon(clavicle, 6.6, 5.2), 0.26)
    blade = ((side * 112, -140), (side * 128, -90), (side * 137, -45), (side * 139, -10))
    canvas.add(Ribbon(blade, 2.4, 1.4), 0.12, 3.0)
    canvas.add(Blob(side * 152, -88, 26, 70, side * 8), 0.10, 8.0)
    canvas.add_dome(Blob(side * 172, -150, 26, 27), 0.5, 0.6)


def _add_tube(canvas: Canvas, shape: Ribbon, amount: float) -> None:
    """Add a bone of which more is crossed at its rim than in its middle."""
    canvas.add(shape, amount, 1.6)
    canvas.add(shape.grown(-1.8), -0.34 * amount, 2.2)


def _add_ribs(canvas: Canvas, rib: int) -> None:
    """Add a pair of ribs: hollow tubes, of which more is crossed at the rim than in the middle."""
    rim, core = Canvas(canvas.grid, 0.0), Canvas(canvas.grid, 0.0)
    for side in (-1, 1):
        back, front = _rib_lines(side, rib)
        pieces = [(stroke, 0.27) for stroke in Ribbon(tuple(back), 5.2, 4.8).strokes()]
        if rib < 8:
            pieces += [(stroke, _fade(stroke, rib)) for stroke in Ribbon(tuple(front), 4.8, 6.0).strokes()]
        for stroke, amount in pieces:
            rim.raise_to(stroke, amount, 1.6)
            core.raise_to(stroke.grown(-1.8), 0.36 * amount, 2.4)
    canvas.values += rim.values - core.values


def _fade(stroke: Stroke, rib: int) -> float:
    """Strength of a piece of the front part, which turns into cartilage towards the middle."""
    return 0.19 * min(1.0, max(0.0, (abs(stroke.x_mm) - 42 - 4 * rib) / 34))


def _rib_lines(side: int, rib: int) -> tuple[Points, Points]:
    """Middle lines of the back and the front part; the second starts where the first ends."""
    top = 22.5 * rib - 150
    out = 92 + 36 * math.sin(min(1.0, (rib + 1.0) / 6) * math.pi / 2)
    fall = 30 + 2.5 * rib
    back = [
        (
            side * (20 + (out - 20) * math.sin(share * math.pi / 2)),
            top - 11 * math.sin(math.pi * share) + fall * share**2,
        )
        for share in (index / 13 for index in range(14))
    ]
    low = back[-1][1]
    front = [
        (side * (out - (out - 34 - 4 * rib) * (1 - math.cos(share * math.pi / 2))), low + (46 + 3 * rib) * share**1.1)
        for share in (index / 11 for index in range(12))
    ]
    return back, front
