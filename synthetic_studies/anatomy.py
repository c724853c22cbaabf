"""A section through an invented upper abdomen, in HU without noise.

Values are typical of a portal venous phase (common practice, no source); shapes are drawn, not traced
from anybody.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from synthetic_studies.drawing import Blob, Canvas, Stroke
from synthetic_studies.fields import low_passed
from synthetic_studies.truth import Grid

__all__ = ["LIVER_HU", "Body", "draw_body", "draw_body_of"]

Image = npt.NDArray[np.float64]

AIR_HU, FAT_HU, MUSCLE_HU, LIVER_HU, FLUID_HU = -1000.0, -105.0, 58.0, 110.0, 12.0


@dataclass(frozen=True, slots=True)
class Organ:
    """A row of the table of organs."""

    x_mm: float
    y_mm: float
    half_width_mm: float
    half_height_mm: float
    value_hu: float
    texture_hu: float = 3.0
    turned_deg: float = 0.0
    wave: float = 0.04
    drift: float = 0.0
    """Share by which it grows along 100 mm of z."""


@dataclass(frozen=True, slots=True)
class Body:
    """What differs from one invented body to the next."""

    seed: int
    size: float = 1.0
    """Scale of everything in the section."""


SPLEEN = Organ(104, 22, 27, 47, 122, turned_deg=14, drift=0.25)
RIGHT_KIDNEY = Organ(-66, 56, 25, 30, 185, turned_deg=-24, drift=-0.3)
LEFT_KIDNEY = Organ(60, 54, 25, 31, 185, turned_deg=22, drift=-0.25)
LIVER = (
    Organ(-78, -24, 68, 64, LIVER_HU, turned_deg=-8, wave=0.03, drift=0.1),
    Organ(-14, -56, 48, 23, LIVER_HU, turned_deg=8, wave=0.05, drift=0.1),
)
STOMACH = Organ(66, -46, 41, 33, 62, turned_deg=-12, wave=0.05, drift=0.1)
VESSELS = (
    Organ(9, 12, 11.5, 11.5, 165, 1.5, wave=0.01),
    Organ(-22, 10, 13, 9, 140, 1.5, wave=0.03, turned_deg=12),
    Organ(-8, -16, 8, 6.5, 150, 1.5, wave=0.03),
    Organ(4, -9, 4, 4, 165, 1.0, wave=0.02),
)
PANCREAS = tuple(
    Organ(-2 + 8.2 * i, -20 + 5.5 * math.sin(i * 0.9 + 0.5), 7.2 - 0.35 * i, 6.4 - 0.3 * i, 92, 5.0, wave=0.12)
    for i in range(9)
)
COLON = (
    Organ(22, -90, 19, 10, 55, 6.0, turned_deg=6, wave=0.10),
    Organ(-18, -93, 15, 9, 55, 6.0, turned_deg=-10, wave=0.10),
    Organ(116, -38, 13, 17, 55, 6.0, wave=0.10),
)
_WALL = Blob(0, 0, 164, 113, squareness=2.35)


def draw_body_of(grid: Grid, body: Body, z_mm: float) -> Canvas:
    """Table and body without texture: values in HU and the strength of texture."""
    rng = np.random.default_rng([body.seed, 11])
    canvas = Canvas(grid, AIR_HU)
    _draw_table(canvas, body)
    _draw_wall(canvas, body, rng, z_mm)
    _draw_spine(canvas, body)
    _draw_retroperitoneum(canvas, body, rng, z_mm)
    _draw_gut(canvas, body, rng, z_mm)
    _draw_liver(canvas, body, rng, z_mm)
    return canvas


def draw_body(grid: Grid, body: Body, z_mm: float, calm: Image) -> Image:
    """Section at z in HU, (rows, columns); texture is laid over it where `calm` is below 1.

    The texture turns slowly with z, so that neighbouring slices are alike as in a body.
    """
    canvas = draw_body_of(grid, body, z_mm)
    shape = (grid.rows, grid.columns)
    rng = np.random.default_rng([body.seed, 12])
    cutoff = min(0.45, 0.16 * grid.spacing_mm)
    turn = z_mm / 9
    fine = math.cos(turn) * low_passed(rng, shape, cutoff) + math.sin(turn) * low_passed(rng, shape, cutoff)
    broad = low_passed(rng, shape, cutoff / 5)
    textured: Image = canvas.values + (1 - calm) * canvas.texture * (0.8 * fine + 0.6 * broad)
    strands = (1 - calm) * (np.abs(canvas.values - FAT_HU) < 15) * _strands(rng, shape, cutoff / 2.2, z_mm)
    return textured + strands


def _strands(rng: np.random.Generator, shape: tuple[int, int], cutoff: float, z_mm: float) -> Image:
    """Fine vessels and septa in fat: the zero lines of two smooth fields, and their crossings."""
    turn = z_mm / 25
    first = math.cos(turn) * low_passed(rng, shape, cutoff) + math.sin(turn) * low_passed(rng, shape, cutoff)
    second = low_passed(rng, shape, cutoff)
    lines: Image = 26 * np.exp(-((first / 0.09) ** 2)) * (second > 0)
    dots: Image = 120 * np.exp(-(first**2 + second**2) / 0.05)
    return lines + dots


def _blob(organ: Organ, body: Body, rng: np.random.Generator, z_mm: float) -> Blob:
    """Outline of an organ in this body at this height."""
    grow = body.size * (1 + organ.drift * math.tanh(z_mm / 60) * 0.6)
    phases = rng.uniform(0, 2 * math.pi, 3)
    waves = tuple(
        (count, organ.wave * share, float(phase + z_mm / 70))
        for count, share, phase in zip((3, 5, 8), (0.6, 0.35, 0.15), phases, strict=True)
    )
    return Blob(
        organ.x_mm * body.size,
        organ.y_mm * body.size,
        organ.half_width_mm * grow,
        organ.half_height_mm * grow,
        organ.turned_deg,
        waves if organ.wave else (),
    )


def _draw_table(canvas: Canvas, body: Body) -> None:
    """Paint a hollow carbon-fibre table top, curved as they are."""
    top = 114.5 * body.size
    below = canvas.y_mm - top + (canvas.x_mm / 62) ** 2 * 2.2
    ends = np.clip((222 - np.abs(canvas.x_mm)) / 4, 0, 1)
    step = canvas.grid.spacing_mm
    for start, end, value in ((0.0, 2.5, -180.0), (2.5, 24.0, -930.0), (24.0, 26.5, -180.0)):
        slab = np.clip((below - start) / step + 0.5, 0, 1) * np.clip((end - below) / step + 0.5, 0, 1)
        canvas.paint_where(slab * ends, value)


def _draw_wall(canvas: Canvas, body: Body, rng: np.random.Generator, z_mm: float) -> None:
    """Skin, fat under it, layered muscle, ribs, and the fat within."""
    size = body.size
    wall = replace(
        _WALL,
        half_width_mm=_WALL.half_width_mm * size,
        half_height_mm=_WALL.half_height_mm * size,
        waves=((4, 0.012, 0.4), (3, 0.01, -1.57)),
    )
    canvas.paint(wall, 15, 4, soft_mm=1.0)
    canvas.paint(wall.grown(-2.2), FAT_HU, 7, soft_mm=1.0)
    canvas.paint(wall.grown(-19), MUSCLE_HU, 7, soft_mm=1.2)
    canvas.paint(wall.grown(-23.5), FAT_HU, 6, soft_mm=1.0, strength=0.75)
    canvas.paint(wall.grown(-24.5), MUSCLE_HU, 7, soft_mm=1.0)
    canvas.paint(wall.grown(-31), FAT_HU, 8, soft_mm=1.2)
    for side in (-1, 1):
        canvas.paint(Blob(side * 30 * size, -93 * size, 27 * size, 5.5 * size, side * 9), MUSCLE_HU, 6, soft_mm=1.0)
        _draw_back_muscles(canvas, body, side)
    _draw_ribs(canvas, wall, rng, z_mm)


def _draw_back_muscles(canvas: Canvas, body: Body, side: int) -> None:
    size = body.size
    canvas.paint(Blob(side * 40 * size, 82 * size, 33 * size, 20 * size, side * 8), MUSCLE_HU, 9, soft_mm=1.2)
    for offset in (-9, 3, 14):
        x_mm = side * (38 + offset) * size
        cleft = Stroke(x_mm, (72 + offset / 4) * size, x_mm + side * 6 * size, 96 * size, 0.7 * size)
        canvas.paint(cleft, -40, 6, soft_mm=1.5, strength=0.7)
    canvas.paint(Blob(side * 33 * size, 42 * size, 13 * size, 17 * size, side * -20), MUSCLE_HU, 6, soft_mm=1.0)
    crus = Stroke(side * 20 * size, 12 * size, side * 24 * size, 32 * size, 3.4 * size)
    canvas.paint(crus, MUSCLE_HU, 5, soft_mm=1.0)


def _draw_ribs(canvas: Canvas, wall: Blob, rng: np.random.Generator, z_mm: float) -> None:
    """Ribs cut obliquely: a shell of compact bone around marrow, along the wall."""
    slide = z_mm / 180
    for side in (-1, 1):
        for place in (0.26, 0.66, 1.04, 1.44, 1.86):
            angle = math.pi / 2 - place - slide + float(rng.uniform(-0.04, 0.04))
            across, down = wall.half_width_mm - 26, wall.half_height_mm - 24
            x_mm = side * across * abs(math.cos(angle)) ** 0.85
            y_mm = down * math.copysign(abs(math.sin(angle)) ** 0.85, math.sin(angle))
            turn = math.degrees(math.atan2(down * math.cos(angle), -side * across * math.sin(angle)))
            shell = Blob(x_mm, y_mm, float(rng.uniform(9, 14)), 4.6, turn, ((3, 0.05, place),))
            canvas.paint(shell.grown(1.5), MUSCLE_HU, 6, soft_mm=1.0)
            canvas.paint(shell, 620, 20, soft_mm=1.2)
            canvas.paint(shell.grown(-1.7), 190, 45, soft_mm=1.5)


def _draw_spine(canvas: Canvas, body: Body) -> None:
    """Paint a lumbar vertebra with its processes and the canal."""
    s = body.size
    bone, marrow = 560.0, 200.0
    for side in (-1, 1):
        canvas.paint(Stroke(side * 13 * s, 52 * s, side * 15 * s, 66 * s, 5.0 * s), bone, 40, soft_mm=1.5)
        canvas.paint(Stroke(side * 13 * s, 54 * s, side * 15 * s, 64 * s, 3.0 * s), marrow + 60, 50, soft_mm=1.5)
        canvas.paint(Stroke(side * 15 * s, 65 * s, side * 40 * s, 60 * s, 3.2 * s), bone - 120, 40, soft_mm=1.5)
        canvas.paint(Stroke(side * 16 * s, 65 * s, side * 38 * s, 60.5 * s, 1.6 * s), marrow, 50, soft_mm=1.5)
        canvas.paint(Blob(side * 17 * s, 71 * s, 7.5 * s, 7 * s, side * 30), bone + 60, 40, soft_mm=1.5)
        canvas.paint(Stroke(side * 15 * s, 72 * s, 0, 82 * s, 3.4 * s), bone, 40, soft_mm=1.5)
    canvas.paint(Stroke(0, 82 * s, 0, 101 * s, 3.6 * s), bone, 40, soft_mm=1.5)
    canvas.paint(Stroke(0, 84 * s, 0, 99 * s, 1.8 * s), marrow + 40, 50, soft_mm=1.5)
    vertebra = Blob(0, 38 * s, 25 * s, 18.5 * s, 0, ((2, -0.03, 0.0), (3, 0.03, 1.57)), 2.3)
    canvas.paint(vertebra, bone + 60, 30, soft_mm=1.5)
    canvas.paint(vertebra.grown(-2.0), marrow, 42, soft_mm=2.0)
    canvas.paint(Blob(0, 50 * s, 4 * s, 5 * s), marrow - 90, 20, soft_mm=4.0)
    canvas.paint(Blob(0, 65.5 * s, 11 * s, 8.5 * s, 0, ((3, 0.06, -1.57),)), -60, 5, soft_mm=1.2)
    canvas.paint(Blob(0, 65 * s, 8.5 * s, 7 * s), 22, 3, soft_mm=1.0)
    canvas.paint(Blob(0, 65 * s, 4.5 * s, 3.8 * s), 42, 2, soft_mm=1.5)


def _draw_retroperitoneum(canvas: Canvas, body: Body, rng: np.random.Generator, z_mm: float) -> None:
    """Kidneys, spleen, great vessels and pancreas."""
    for organ in (RIGHT_KIDNEY, LEFT_KIDNEY):
        _draw_kidney(canvas, _blob(organ, body, rng, z_mm), rng)
    canvas.paint(_blob(SPLEEN, body, rng, z_mm), SPLEEN.value_hu, 3, soft_mm=1.2)
    for organ in (*PANCREAS, *VESSELS):
        canvas.paint(_blob(organ, body, rng, z_mm), organ.value_hu, organ.texture_hu, soft_mm=1.2)
    plaque = Stroke(16 * body.size, 19 * body.size, 19.5 * body.size, 14 * body.size, 1.1)
    canvas.paint(plaque, 640, 10, soft_mm=0.8)
    splenic = Stroke(50 * body.size, -2 * body.size, 82 * body.size, 12 * body.size, 3.2)
    canvas.paint(splenic, 150, 1.5, soft_mm=1.0)


def _draw_kidney(canvas: Canvas, outline: Blob, rng: np.random.Generator) -> None:
    """Cortex, a ring of pyramids, fat and vessels of the sinus."""
    canvas.paint(outline, 188, 3, soft_mm=1.2)
    for angle in np.linspace(0, 2 * math.pi, 8, endpoint=False) + rng.uniform(0, 0.6):
        x_mm = outline.x_mm + 0.62 * outline.half_width_mm * math.cos(float(angle))
        y_mm = outline.y_mm + 0.62 * outline.half_height_mm * math.sin(float(angle))
        canvas.paint(Blob(x_mm, y_mm, 4.6, 4.6), 132, 3, soft_mm=2.0, strength=0.9)
    inward = -math.copysign(0.3, outline.x_mm)
    hilum = outline.x_mm + inward * outline.half_width_mm
    sinus = Blob(hilum, outline.y_mm - 2, 10, 9, outline.turned_deg, ((4, 0.2, 1.0),))
    canvas.paint(sinus, -80, 8, soft_mm=2.0)
    canvas.paint(Blob(hilum, outline.y_mm - 3, 4, 3.4), 20, 2, soft_mm=1.5)
    exit_x = hilum + 2.2 * inward * outline.half_width_mm
    canvas.paint(Stroke(hilum, outline.y_mm, exit_x, outline.y_mm - 14, 2.4), 165, 1.5, soft_mm=1.2)


def _draw_gut(canvas: Canvas, body: Body, rng: np.random.Generator, z_mm: float) -> None:
    """Stomach, and colon with stool and gas. The fluid level in the stomach is drawn later, as the edge."""
    stomach = _blob(STOMACH, body, rng, z_mm)
    canvas.paint(stomach, STOMACH.value_hu, 5, soft_mm=1.2)
    canvas.paint(stomach.grown(-4.5), FLUID_HU, 2, soft_mm=1.2)
    for organ in COLON:
        outline = _blob(organ, body, rng, z_mm)
        canvas.paint(outline, organ.value_hu, organ.texture_hu, soft_mm=1.2)
        canvas.paint(outline.grown(-2.5), 20, 70, soft_mm=1.5)
        for _ in range(7):
            x_mm = outline.x_mm + float(rng.normal(0, 0.3)) * outline.half_width_mm
            y_mm = outline.y_mm - 1.5 + float(rng.normal(0, 0.2)) * outline.half_height_mm
            canvas.paint(Blob(x_mm, y_mm, float(rng.uniform(1.5, 5)), float(rng.uniform(1, 3))), -850, 0, soft_mm=1.5)


def _draw_liver(canvas: Canvas, body: Body, rng: np.random.Generator, z_mm: float) -> None:
    """Two lobes, with branching vessels that keep clear of the places of the discs."""
    for organ in LIVER:
        canvas.paint(_blob(organ, body, rng, z_mm), organ.value_hu, organ.texture_hu, soft_mm=1.2)
    wander = 2.5 * math.sin(z_mm / 20)
    s = body.size
    for x0, y0, x1, y1, radius in (
        (-24, -12, -44, -8, 5.0),
        (-44, -8, -66, -1, 3.6),
        (-66, -1, -78, -9, 2.2),
        (-44, -8, -40, -34, 3.2),
        (-40, -34, -36, -58, 2.2),
        (-36, -58, -14, -62, 1.6),
        (-66, -1, -62, 20, 1.8),
        (-121, 5, -134, -4, 1.6),
        (-36, -58, -60, -76, 1.4),
    ):
        canvas.paint(Stroke(x0 * s, y0 * s + wander, x1 * s, y1 * s + wander, radius * s), 152, 2, soft_mm=2.0)
