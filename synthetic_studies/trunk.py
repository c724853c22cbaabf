"""The wall of an invented trunk: table, skin, fat, muscle, ribs and spine, in HU."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from synthetic_studies.drawing import Blob, Canvas, Ribbon, Stroke

__all__ = ["FAT_HU", "MUSCLE_HU", "close_wall", "draw_recesses", "draw_spine", "draw_table", "draw_wall"]

Image = npt.NDArray[np.float64]

FAT_HU, MUSCLE_HU = -105.0, 58.0
_BONE_HU, _MARROW_HU, _LUNG_HU = 560.0, 200.0, -840.0
_WALL = Blob(0, 0, 164, 113, 0, ((4, 0.012, 0.4), (3, 0.01, -1.57)), 2.35)
_CAVITY = _WALL.grown(-26)
_LAYERS = (
    (0.0, 15.0, 4.0, 1.0),
    (2.2, FAT_HU, 7.0, 1.0),
    (17.0, MUSCLE_HU, 7.0, 1.0),
    (20.2, FAT_HU, 6.0, 0.7),
    (21.2, MUSCLE_HU, 7.0, 1.0),
    (24.5, FAT_HU, 8.0, 1.0),
)
"""Skin, fat, two layers of muscle with a thin one of fat between, inner fat: inset in mm, HU, texture, strength."""


def draw_table(canvas: Canvas) -> None:
    """Paint a hollow carbon-fibre table top, curved as they are."""
    below = canvas.y_mm - 114.5 + (canvas.x_mm / 62) ** 2 * 2.2
    ends = np.clip((222 - np.abs(canvas.x_mm)) / 4, 0, 1)
    step = canvas.grid.spacing_mm
    for start, end, value in ((0.0, 2.5, -180.0), (2.5, 24.0, -930.0), (24.0, 26.5, -180.0)):
        slab = np.clip((below - start) / step + 0.5, 0, 1) * np.clip((end - below) / step + 0.5, 0, 1)
        canvas.paint_where(slab * ends, value)


def draw_wall(canvas: Canvas) -> None:
    """Paint skin, fat under it, layered muscle, and the fat within."""
    box = canvas.box(_WALL, 1.0)
    distance = _WALL.distance_mm(canvas.x_mm[:, box[1]], canvas.y_mm[box[0], :])
    width = max(1.1, canvas.grid.spacing_mm)
    for inset_mm, value, texture, strength in _LAYERS:
        coverage = strength * np.clip(0.5 - (distance + inset_mm) / width, 0, 1)
        canvas.values[box] += coverage * (value - canvas.values[box])
        canvas.texture[box] += coverage * (texture - canvas.texture[box])
    for side in (-1, 1):
        rectus = Blob(side * 31, -96, 27, 5, side * 9, ((3, 0.06, side * 1.0),))
        canvas.paint(rectus, MUSCLE_HU, 6, soft_mm=1.0)


def close_wall(canvas: Canvas, wall: Image, texture: Image, rng: np.random.Generator, z_mm: float) -> None:
    """Put the wall back over what was drawn across it, then the muscles of the back and the ribs."""
    box, inside = canvas.cover(_CAVITY, 1.5)
    outside = np.ones_like(canvas.values)
    outside[box] -= inside
    canvas.values += outside * (wall - canvas.values)
    canvas.texture += outside * (texture - canvas.texture)
    for side in (-1, 1):
        _draw_back_muscles(canvas, side)
        for place in (0.46, 0.76, 1.08, 1.45, 1.85):
            _draw_rib(canvas, rng, side, place, z_mm)


def draw_recesses(canvas: Canvas, z_mm: float) -> None:
    """Paint the lowest parts of the lungs behind liver and spleen; they vanish towards the feet."""
    depth_mm = 7.0 + 0.22 * z_mm
    if depth_mm < 1.0:
        return
    box, inside = canvas.cover(_CAVITY.grown(-1.0), 1.0)
    inner = Blob(0, -depth_mm, _CAVITY.half_width_mm - 1.0, _CAVITY.half_height_mm, 0, (), 2.35)
    rest = np.clip(0.5 + inner.distance_mm(canvas.x_mm[:, box[1]], canvas.y_mm[box[0], :]) / 1.5, 0, 1)
    flank = np.clip((np.abs(canvas.x_mm[:, box[1]]) - 52) / 6, 0, 1) * np.clip((canvas.y_mm[box[0], :] - 4) / 12, 0, 1)
    lung = inside * rest * flank
    canvas.values[box] += lung * (_LUNG_HU - canvas.values[box])
    canvas.texture[box] += lung * (55 - canvas.texture[box])


def _draw_back_muscles(canvas: Canvas, side: int) -> None:
    """Paint the muscles along the spine with the fat between their bundles."""
    canvas.paint(Blob(side * 41, 82, 35, 19, side * 8, ((3, 0.05, 1.0),)), MUSCLE_HU, 9, soft_mm=1.2)
    for offset, lean in ((-10, 3), (2, 7), (13, 10)):
        x_mm = side * (38 + offset)
        cleft = Ribbon(((x_mm, 71.0), (x_mm + side * lean, 80.0), (x_mm + side * 1.2 * lean, 95.0)), 0.5, 1.0)
        canvas.paint(cleft, -60, 6, soft_mm=2.0, strength=0.7)
    canvas.paint(Blob(side * 33, 42, 12, 17, side * -20, ((3, 0.07, 0.5),)), MUSCLE_HU, 6, soft_mm=1.0)
    crus = Ribbon(((side * 15, 4.0), (side * 21, 16.0), (side * 24, 33.0)), 2.2, 3.6)
    canvas.paint(crus, MUSCLE_HU, 5, soft_mm=1.0)


def _draw_rib(canvas: Canvas, rng: np.random.Generator, side: int, place: float, z_mm: float) -> None:
    """Paint a rib cut obliquely: a shell of compact bone around marrow, along the wall."""
    angle = math.pi / 2 - place - z_mm / 180 + float(rng.uniform(-0.04, 0.04))
    across, down = _WALL.half_width_mm - 21, _WALL.half_height_mm - 19
    x_mm = side * across * abs(math.cos(angle)) ** 0.85
    y_mm = down * math.copysign(abs(math.sin(angle)) ** 0.85, math.sin(angle))
    turn = math.degrees(math.atan2(down * math.cos(angle), -side * across * math.sin(angle)))
    shell = Blob(x_mm, y_mm, float(rng.uniform(9, 14)), 4.4, turn, ((3, 0.05, place),))
    canvas.paint(shell.grown(1.3), MUSCLE_HU, 6, soft_mm=1.0)
    canvas.paint(shell, 640, 20, soft_mm=1.2)
    canvas.paint(shell.grown(-1.7), 190, 45, soft_mm=1.5)


def draw_spine(canvas: Canvas) -> None:
    """Paint a vertebra with its processes and the canal."""
    bone, marrow = _BONE_HU, _MARROW_HU
    for side in (-1, 1):
        canvas.paint(Stroke(side * 13, 52, side * 15, 66, 5.0), bone, 40, soft_mm=1.5)
        canvas.paint(Stroke(side * 13, 54, side * 15, 64, 3.0), marrow + 60, 50, soft_mm=1.5)
        wing = ((side * 15, 65.0), (side * 26, 64.0), (side * 40, 59.0))
        canvas.paint(Ribbon(wing, 4.0, 2.6), bone - 120, 40, soft_mm=1.5)
        canvas.paint(Ribbon(wing, 2.3, 1.0), marrow, 50, soft_mm=1.5)
        canvas.paint(Blob(side * 17, 71, 7.5, 7, side * 30, ((2, 0.1, 1.0),)), bone + 60, 40, soft_mm=1.5)
        canvas.paint(Blob(side * 17, 72, 5, 3.5, side * 30), marrow + 120, 50, soft_mm=1.5)
        canvas.paint(Stroke(side * 15, 72, 0, 82, 3.4), bone, 40, soft_mm=1.5)
    canvas.paint(Ribbon(((0, 81), (0, 92), (0, 101)), 2.9, 4.3), bone, 40, soft_mm=1.5)
    canvas.paint(Ribbon(((0, 84), (0, 92), (0, 99)), 1.2, 2.4), marrow + 40, 50, soft_mm=1.5)
    vertebra = Blob(0, 38, 25, 18.5, 0, ((2, -0.03, 0.0), (3, 0.03, 1.57)), 2.3)
    canvas.paint(vertebra, bone + 60, 30, soft_mm=1.5)
    canvas.paint(vertebra.grown(-2.0), marrow, 42, soft_mm=2.0)
    canvas.paint(Blob(0, 50, 4, 5), marrow - 90, 20, soft_mm=4.0)
    canvas.paint(Blob(0, 65.5, 11, 8.5, 0, ((3, 0.06, -1.57),)), -60, 5, soft_mm=1.2)
    canvas.paint(Blob(0, 65, 8.5, 7), 22, 3, soft_mm=1.0)
    canvas.paint(Blob(0, 65, 4.5, 3.8), 42, 2, soft_mm=1.5)
