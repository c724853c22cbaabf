"""A section through an invented upper abdomen, in HU without noise.

Values are typical of a portal venous phase (common practice, no source); shapes are drawn, not traced from anybody.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from synthetic_studies.drawing import Blob, Canvas, Ribbon, smooth_line
from synthetic_studies.fields import low_passed
from synthetic_studies.trunk import FAT_HU, close_wall, draw_recesses, draw_spine, draw_table, draw_wall
from synthetic_studies.truth import Grid

__all__ = ["LIVER_HU", "Tissue", "draw_body", "weave_tissue"]

Image = npt.NDArray[np.float64]

AIR_HU, LIVER_HU, FLUID_HU, BLOOD_HU = -1000.0, 110.0, 12.0, 155.0


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
    """Share by which it grows along 100 mm of z, about."""


SPLEEN = Organ(107, 20, 25, 43, 122, turned_deg=16, wave=0.07, drift=0.25)
KIDNEYS = (
    Organ(-63, 50, 22, 25, 188, turned_deg=-24, drift=-0.35),
    Organ(62, 47, 23, 26, 188, turned_deg=22, drift=-0.25),
)
LIVER = (
    Organ(-80, -22, 70, 62, LIVER_HU, turned_deg=-8, wave=0.03, drift=0.1),
    Organ(-16, -53, 46, 21, LIVER_HU, turned_deg=9, wave=0.05, drift=0.1),
)
STOMACH = Organ(66, -45, 40, 33, 62, turned_deg=-12, wave=0.05, drift=0.1)
GREAT_VESSELS = (
    Organ(9, 12, 11.5, 11.5, 165, 1.5, wave=0.01),
    Organ(-22, 10, 13, 9, 140, 1.5, wave=0.03, turned_deg=12),
    Organ(-8, -16, 8, 6.5, 150, 1.5, wave=0.03),
    Organ(4, -9, 4, 4, 165, 1.0, wave=0.02),
)
PANCREAS = tuple(
    Organ(8.0 * i - 2, 5.5 * math.sin(i * 0.9 + 0.5) - 17, 7.4 - 0.3 * i, 6.6 - 0.25 * i, 92, 6.0, wave=0.14)
    for i in range(10)
)
COLON = (
    Organ(14, -77, 18, 8, 55, 6.0, turned_deg=4, wave=0.12),
    Organ(-22, -79, 15, 7, 55, 6.0, turned_deg=-8, wave=0.12),
    Organ(113, -40, 13, 16, 55, 6.0, wave=0.12),
    Organ(98, -6, 9, 9, 60, 5.0, wave=0.10),
)
JEJUNUM = tuple(Organ(28 + 13 * i, 14 - 7 * (i % 2), 7.5, 7, 85, 8.0, wave=0.14) for i in range(4))
LIVER_VESSELS = (
    ((-20, -10, -32, -6, -44, -8, -58, -3), 5.0, 2.0),
    ((-44, -8, -43, -22, -39, -36, -36, -50), 3.2, 2.0),
    ((-37, -46, -30, -56, -18, -61, -4, -60), 2.0, 1.0),
    ((-37, -46, -42, -62, -54, -72, -64, -74), 1.8, 0.9),
    ((-52, -4, -56, 6, -54, 16, -57, 24), 2.0, 0.9),
    ((-108, 34, -118, 22, -123, 6, -127, 0), 1.0, 1.8),
)


@dataclass(frozen=True, slots=True, eq=False)
class Tissue:
    """Smooth random fields that one body is woven of, (rows, columns) each, of unit variance."""

    fine: tuple[Image, Image]
    broad: Image
    folds: tuple[Image, Image]
    mask: Image


def weave_tissue(grid: Grid, seed: int) -> Tissue:
    """Draw the fields of one body; every slice turns between the two of a pair."""
    shape = (grid.rows, grid.columns)
    rng = np.random.default_rng([seed, 12])
    cutoff = min(0.45, 0.16 * grid.spacing_mm)
    fine = (low_passed(rng, shape, cutoff), low_passed(rng, shape, cutoff))
    folds = (low_passed(rng, shape, cutoff / 2.2), low_passed(rng, shape, cutoff / 2.2))
    return Tissue(fine, low_passed(rng, shape, cutoff / 5), folds, low_passed(rng, shape, cutoff / 2.2))


def draw_body(grid: Grid, seed: int, z_mm: float, tissue: Tissue, calm: Image) -> Image:
    """Section at z in HU, (rows, columns); texture is laid over it where `calm` is below 1.

    The texture turns slowly with z, so that neighbouring slices are alike as in a body.
    """
    canvas = _draw_shapes(grid, seed, z_mm)
    fine = _turned(tissue.fine, z_mm / 9)
    strands = (np.abs(canvas.values - FAT_HU) < 15) * _strands(_turned(tissue.folds, z_mm / 25), tissue.mask)
    textured: Image = canvas.values + (1 - calm) * (canvas.texture * (0.8 * fine + 0.6 * tissue.broad) + strands)
    return textured


def _turned(pair: tuple[Image, Image], angle: float) -> Image:
    """Mixture of two fields that keeps their variance."""
    return math.cos(angle) * pair[0] + math.sin(angle) * pair[1]


def _strands(fold: Image, mask: Image) -> Image:
    """Fine vessels and septa in fat: the zero lines of a smooth field, and the common zeros of two."""
    lines: Image = 26 * np.exp(-((fold / 0.09) ** 2)) * (mask > 0)
    dots: Image = 120 * np.exp(-(fold**2 + mask**2) / 0.05)
    return lines + dots


def _draw_shapes(grid: Grid, seed: int, z_mm: float) -> Canvas:
    """Table and body without texture: values in HU and the strength of texture."""
    rng = np.random.default_rng([seed, 11])
    canvas = Canvas(grid, AIR_HU)
    draw_table(canvas)
    draw_wall(canvas)
    wall, texture = canvas.values.copy(), canvas.texture.copy()
    _draw_gut(canvas, rng, z_mm)
    _draw_liver(canvas, rng, z_mm)
    _draw_spleen_and_kidneys(canvas, rng, z_mm)
    _draw_vessels(canvas, rng, z_mm)
    draw_recesses(canvas, z_mm)
    close_wall(canvas, wall, texture, rng, z_mm)
    draw_spine(canvas)
    return canvas


def _blob(organ: Organ, rng: np.random.Generator, z_mm: float) -> Blob:
    """Outline of an organ in this body at this height."""
    grow = 1 + organ.drift * math.tanh(z_mm / 60) * 0.6
    phases = rng.uniform(0, 2 * math.pi, 3)
    waves = tuple(
        (count, organ.wave * share, float(phase + z_mm / 70))
        for count, share, phase in zip((3, 5, 8), (0.6, 0.35, 0.15), phases, strict=True)
    )
    width_mm, height_mm = organ.half_width_mm * grow, organ.half_height_mm * grow
    return Blob(organ.x_mm, organ.y_mm, width_mm, height_mm, organ.turned_deg, waves)


def _draw_spleen_and_kidneys(canvas: Canvas, rng: np.random.Generator, z_mm: float) -> None:
    """Paint spleen, then kidneys in their fat, then the adrenals above them."""
    canvas.paint(_blob(SPLEEN, rng, z_mm), SPLEEN.value_hu, 3, soft_mm=1.2)
    for organ in KIDNEYS:
        outline = _blob(organ, rng, z_mm)
        canvas.paint(outline.grown(3.2), FAT_HU, 8, soft_mm=1.5)
        _draw_kidney(canvas, outline, rng)
    canvas.paint(Ribbon(smooth_line((30, 20, 37, 27, 42, 36)), 1.7, 1.2), 75, 3, soft_mm=1.0)
    canvas.paint(Ribbon(smooth_line((-36, 18, -38, 28, -42, 36)), 1.6, 1.0), 75, 3, soft_mm=1.0)


def _draw_kidney(canvas: Canvas, outline: Blob, rng: np.random.Generator) -> None:
    """Paint cortex, a ring of pyramids, fat and vessels of the sinus."""
    canvas.paint(outline, 188, 3, soft_mm=1.2)
    for angle in np.linspace(0, 2 * math.pi, 9, endpoint=False) + rng.uniform(0, 0.6):
        x_mm = outline.x_mm + 0.60 * outline.half_width_mm * math.cos(float(angle))
        y_mm = outline.y_mm + 0.60 * outline.half_height_mm * math.sin(float(angle))
        pyramid = Blob(x_mm, y_mm, 4.4, 3.2, math.degrees(float(angle)), ((3, 0.15, 3.14),))
        canvas.paint(pyramid, 148, 3, soft_mm=2.6, strength=0.85)
    inward = -math.copysign(0.34, outline.x_mm)
    hilum = outline.x_mm + inward * outline.half_width_mm
    sinus = Blob(hilum, outline.y_mm - 2, 9, 8, outline.turned_deg, ((4, 0.22, 1.0), (3, 0.1, 0.3)))
    canvas.paint(sinus, -80, 8, soft_mm=2.2)
    canvas.paint(Blob(hilum, outline.y_mm - 3, 3.6, 3.0, 30), 20, 2, soft_mm=1.5)
    exit_x = hilum + 2.0 * inward * outline.half_width_mm
    vein = (hilum, outline.y_mm, hilum + inward * 12, outline.y_mm - 8, exit_x, outline.y_mm - 17)
    canvas.paint(Ribbon(smooth_line(vein), 1.6, 2.8), 165, 1.5, soft_mm=1.2)


def _draw_vessels(canvas: Canvas, rng: np.random.Generator, z_mm: float) -> None:
    """Paint pancreas and great vessels, a plaque in the wall of the aorta, the splenic vein."""
    splenic = (-6, -12, 14, -6, 34, -10, 56, -4, 74, 4, 86, 12)
    for organ in PANCREAS:
        canvas.paint(_blob(organ, rng, z_mm), organ.value_hu, organ.texture_hu, soft_mm=1.5)
    canvas.paint(Ribbon(smooth_line(splenic, 1.5 * math.sin(z_mm / 15)), 3.8, 2.6), BLOOD_HU, 1.5, soft_mm=1.2)
    for organ in GREAT_VESSELS:
        canvas.paint(_blob(organ, rng, z_mm), organ.value_hu, organ.texture_hu, soft_mm=1.2)
    canvas.paint(Ribbon(smooth_line((14, 20.5, 18, 18, 19.7, 13.5)), 0.7, 1.1), 640, 10, soft_mm=0.8)


def _draw_gut(canvas: Canvas, rng: np.random.Generator, z_mm: float) -> None:
    """Paint stomach, loops and colon with stool and gas. The fluid level is drawn later, as the edge."""
    for organ in JEJUNUM:
        outline = _blob(organ, rng, z_mm)
        canvas.paint(outline, organ.value_hu, organ.texture_hu, soft_mm=1.5)
        canvas.paint(outline.grown(-3.0), 30, 8, soft_mm=2.0)
    stomach = _blob(STOMACH, rng, z_mm)
    canvas.paint(stomach, STOMACH.value_hu, 6, soft_mm=1.2)
    canvas.paint(stomach.grown(-4.2), FLUID_HU, 2, soft_mm=1.2)
    for organ in COLON:
        outline = _blob(organ, rng, z_mm)
        canvas.paint(outline, organ.value_hu, organ.texture_hu, soft_mm=1.2)
        canvas.paint(outline.grown(-2.2), 20, 70, soft_mm=1.5)
        for _ in range(9):
            x_mm = outline.x_mm + float(rng.normal(0, 0.3)) * outline.half_width_mm
            y_mm = outline.y_mm - 1.5 + float(rng.normal(0, 0.2)) * outline.half_height_mm
            bubble = Blob(x_mm, y_mm, float(rng.uniform(1.0, 4.5)), float(rng.uniform(0.8, 2.6)))
            canvas.paint(bubble, -850, 0, soft_mm=1.5)


def _draw_liver(canvas: Canvas, rng: np.random.Generator, z_mm: float) -> None:
    """Paint two lobes, the fissure between, and vessels that keep clear of the places of the discs."""
    for organ in LIVER:
        canvas.paint(_blob(organ, rng, z_mm), organ.value_hu, organ.texture_hu, soft_mm=1.2)
    canvas.paint(Ribbon(smooth_line((-28, -78, -26, -66, -27, -58)), 2.4, 0.6), FAT_HU, 4, soft_mm=2.0)
    wander = 2.0 * math.sin(z_mm / 20)
    for numbers, radius_mm, end_mm in LIVER_VESSELS:
        canvas.paint(Ribbon(smooth_line(numbers, wander), radius_mm, end_mm), BLOOD_HU - 3, 2, soft_mm=2.0)
