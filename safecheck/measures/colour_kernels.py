"""sRGB to CIE L*a*b*, and the CIEDE2000 difference of two such colours, pixel by pixel."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from safecheck.measures.compiled import CUBE, CUBE_WORK, INTEGERS, MASK, VECTOR, WORK_ROW, compiled, types
from safecheck.measures.planes import Mask, Vector


@compiled(types.float64)
def _bend(value: float) -> float:
    """CIE 1976: cube root, straight near black."""
    if value > 0.008856:
        return math.pow(value, 1.0 / 3.0)
    return 7.787 * value + 16.0 / 116.0


@compiled(types.float64, types.float64, types.float64)
def _to_lab(red: float, green: float, blue: float) -> tuple[float, float, float]:
    """L*a*b* of linear light 0 to 1, white D65, observer of 2 degrees."""
    x = _bend((0.412453 * red + 0.357580 * green + 0.180423 * blue) / 0.95047)
    y = _bend(0.212671 * red + 0.715160 * green + 0.072169 * blue)
    z = _bend((0.019334 * red + 0.119193 * green + 0.950227 * blue) / 1.08883)
    return 116.0 * y - 16.0, 500.0 * (x - y), 200.0 * (y - z)


@compiled(INTEGERS, VECTOR, CUBE_WORK)
def fill_lab(samples: npt.NDArray[np.uint16], light: Vector, lab: npt.NDArray[np.float64]) -> None:
    """L*a*b* of every pixel; `light` gives the linear light of each stored level."""
    for row in range(samples.shape[0]):
        for column in range(samples.shape[1]):
            red, green, blue = samples[row, column, 0], samples[row, column, 1], samples[row, column, 2]
            lightness, a, b = _to_lab(light[red], light[green], light[blue])
            lab[row, column, 0] = lightness
            lab[row, column, 1] = a
            lab[row, column, 2] = b


@compiled(types.float64, types.float64)
def _hue(a: float, b: float) -> float:
    """Hue angle, 0 to 2 pi."""
    angle = math.atan2(b, a)
    return angle if angle >= 0.0 else angle + 2.0 * math.pi


@compiled(types.float64)
def _strength(chroma: float) -> float:
    """How far a chroma lies towards the saturated end: sqrt(C^7 / (C^7 + 25^7))."""
    cube = chroma * chroma * chroma
    seventh = cube * cube * chroma
    return math.sqrt(seventh / (seventh + 6103515625.0))


@compiled(types.float64, types.float64, types.float64)
def _hue_weight(hue: float, mean_chroma: float, mean_lightness: float) -> tuple[float, float, float]:
    """Divisors of the differences of lightness, chroma and hue."""
    t = (
        1.0
        - 0.17 * math.cos(hue - math.pi / 6.0)
        + 0.24 * math.cos(2.0 * hue)
        + 0.32 * math.cos(3.0 * hue + math.pi / 30.0)
        - 0.20 * math.cos(4.0 * hue - 63.0 * math.pi / 180.0)
    )
    square = (mean_lightness - 50.0) * (mean_lightness - 50.0)
    by_lightness = 1.0 + 0.015 * square / math.sqrt(20.0 + square)
    return by_lightness, 1.0 + 0.045 * mean_chroma, 1.0 + 0.015 * mean_chroma * t


@compiled(types.float64, types.float64, types.float64, types.float64, types.float64, types.float64)
def difference(l1: float, a1: float, b1: float, l2: float, a2: float, b2: float) -> float:
    """CIEDE2000 with kL = kC = kH = 1."""
    mean = 0.5 * (math.sqrt(a1 * a1 + b1 * b1) + math.sqrt(a2 * a2 + b2 * b2))
    stretch = 1.0 + 0.5 * (1.0 - _strength(mean))
    c1 = math.sqrt(a1 * stretch * a1 * stretch + b1 * b1)
    c2 = math.sqrt(a2 * stretch * a2 * stretch + b2 * b2)
    h1, h2 = _hue(a1 * stretch, b1), _hue(a2 * stretch, b2)
    turn, total = h2 - h1, h1 + h2
    hue = 0.5 * total
    if c1 * c2 == 0.0:
        turn, hue = 0.0, total
    elif abs(turn) > math.pi:
        turn = turn - 2.0 * math.pi if turn > 0.0 else turn + 2.0 * math.pi
        hue = hue + math.pi if total < 2.0 * math.pi else hue - math.pi
    mean = 0.5 * (c1 + c2)
    by_lightness, by_chroma, by_hue = _hue_weight(hue, mean, 0.5 * (l1 + l2))
    lightness, chroma = (l2 - l1) / by_lightness, (c2 - c1) / by_chroma
    hue_part = 2.0 * math.sqrt(c1 * c2) * math.sin(0.5 * turn) / by_hue
    away = (hue * 180.0 / math.pi - 275.0) / 25.0
    rotation = -math.sin(math.pi / 3.0 * math.exp(-away * away)) * 2.0 * _strength(mean)
    square = lightness * lightness + chroma * chroma + hue_part * hue_part + rotation * chroma * hue_part
    return math.sqrt(square) if square > 0.0 else 0.0


@compiled(INTEGERS, CUBE, INTEGERS, VECTOR, MASK, WORK_ROW)
def fill_differences(
    before: npt.NDArray[np.uint16],
    lab: npt.NDArray[np.float64],
    after: npt.NDArray[np.uint16],
    light: Vector,
    content: Mask,
    differences: Vector,
) -> None:
    """Differences at content pixels, row by row; pixels whose samples are equal differ by nothing."""
    found = 0
    for row in range(before.shape[0]):
        for column in range(before.shape[1]):
            if not content[row, column]:
                continue
            red, green, blue = after[row, column, 0], after[row, column, 1], after[row, column, 2]
            size = 0.0
            if red != before[row, column, 0] or green != before[row, column, 1] or blue != before[row, column, 2]:
                lightness, a, b = _to_lab(light[red], light[green], light[blue])
                size = difference(lab[row, column, 0], lab[row, column, 1], lab[row, column, 2], lightness, a, b)
            differences[found] = size
            found += 1
