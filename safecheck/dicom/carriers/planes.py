"""Closed contours in millimetres -> rings on parallel planes, each plane with the slab that it stands for."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from safecheck.errors import RegionError

__all__ = [
    "FARTHEST_MM",
    "FLAT_MM",
    "INTERRUPTED",
    "PLANE_MM",
    "SINGLE_MM",
    "TIE_MM",
    "Contour",
    "ContourPlane",
    "Stack",
    "slabs_mm",
    "stack",
]

Contour: TypeAlias = npt.NDArray[np.float64]
"""(n, 3) points in patient millimetres; the last is joined to the first."""
_Flat: TypeAlias = npt.NDArray[np.float64]
_Direction: TypeAlias = npt.NDArray[np.float64]

FLAT_MM = 0.1
"""A point of a contour lies within this distance of the contour's plane."""
PLANE_MM = 0.05
"""Contours within this distance along the normal are on one plane."""
SINGLE_MM = 0.5
"""Depth of the slab of a region that has one plane."""
FARTHEST_MM = 5.0
"""No slab reaches farther from its plane; common practice (slices are hardly ever thicker than 10 mm), no source."""
INTERRUPTED = 3.0
"""A gap over this many times the median gap is an interruption: the region was not drawn there."""
TIE_MM = 1e-3
"""Bounds of slabs lie this far above the middle between planes.

A slice lies exactly in the middle when every second one was drawn on. At the middle itself rounding would decide
whether it falls to the one plane, to both or to none.
"""
_CROSSED_MM = 0.01
"""Crossings less deep than this change no area that counts."""
_NO_AREA_MM2 = 1e-6
_PART = 256
_CROSSED = "contours cross themselves or each other"


@dataclass(frozen=True, slots=True, eq=False)
class ContourPlane:
    """What was drawn on one plane."""

    rings: tuple[_Flat, ...]
    """Each (n, 2) millimetres (along rows, along columns) from the stack's origin."""
    low_mm: float
    """Bounds of the slab along the normal, from the stack's origin; the plane itself lies between them."""
    high_mm: float


@dataclass(frozen=True, slots=True, eq=False)
class Stack:
    """Parallel planes of one region."""

    origin_mm: _Direction
    along_rows: _Direction
    along_columns: _Direction
    normal: _Direction
    """along_columns x along_rows."""
    planes: tuple[ContourPlane, ...]
    """In the order of the normal."""
    without_area: int
    """Contours that enclose nothing and were left aside."""


def stack(contours: Sequence[Contour]) -> Stack:
    """Sort the contours of one region by plane.

    Parameters
    ----------
    contours
        At least one; flat, and parallel to each other.

    Returns
    -------
    Stack
        The even-odd rule holds among the rings of a plane. A contour is cut in two at a point that it visits twice:
        a keyhole becomes its outline, its hole and a channel without area, which is the same set of points.

    Raises
    ------
    RegionError
        Nothing has an area, contours are not flat or not parallel, or they cross themselves or each other.
    """
    loops = [loop for contour in contours for loop in _loops(contour)]
    areas = [_vector_area(loop) for loop in loops]
    sizes = np.array([float(np.linalg.norm(area)) for area in areas])
    if any(_lobes_cancel(loop) for loop in itertools.compress(loops, sizes < _NO_AREA_MM2)):
        raise RegionError(_CROSSED)
    if not loops or sizes.max() < _NO_AREA_MM2:
        raise RegionError("no contour encloses an area")
    normal = _common_normal(areas, sizes)
    along_rows, along_columns = _axes(normal)
    origin = loops[int(sizes.argmax())][0]
    found: list[tuple[float, _Flat]] = []
    for loop in itertools.compress(loops, sizes >= _NO_AREA_MM2):
        heights = _along(loop - origin, normal)
        if np.abs(heights - heights.mean()).max() > FLAT_MM:
            raise RegionError("contours are not flat, or not parallel to each other")
        flat = np.column_stack([_along(loop - origin, along_rows), _along(loop - origin, along_columns)])
        found.append((float(heights.mean()), flat))
    found.sort(key=lambda item: item[0])
    planes = _by_plane(found)
    if any(_cross(rings) for _, rings in planes):
        raise RegionError(_CROSSED)
    bounds = slabs_mm([position for position, _ in planes])
    drawn = tuple(ContourPlane(tuple(rings), *each) for (_, rings), each in zip(planes, bounds, strict=True))
    empty = sum(float(np.linalg.norm(_vector_area(contour))) < _NO_AREA_MM2 for contour in contours)
    return Stack(origin, along_rows, along_columns, normal, drawn, empty)


def slabs_mm(positions: Sequence[float]) -> list[tuple[float, float]]:
    """Bounds of the slab that each plane stands for.

    Parameters
    ----------
    positions
        Of the planes along their normal, mm, rising.

    Returns
    -------
    list of (float, float)
        Half open: the lower bound belongs to the slab. Neighbours meet half way (`TIE_MM` above it), the outer ones
        reach as far outwards as inwards. At an interruption (a gap over `INTERRUPTED` times the median) each side
        reaches half the median gap; no slab reaches beyond `FARTHEST_MM`; a single plane has `SINGLE_MM`.
    """
    if len(positions) == 1:
        return [(positions[0] - SINGLE_MM / 2, positions[0] + SINGLE_MM / 2)]
    gaps = np.diff(np.asarray(positions, dtype=np.float64))
    usual = float(np.median(gaps))
    reach = np.minimum(np.where(gaps > INTERRUPTED * usual, usual, gaps) / 2, FARTHEST_MM)
    below, above = np.insert(reach, 0, reach[0]), np.append(reach, reach[-1])
    return [
        (position - float(down) + TIE_MM, position + float(up) + TIE_MM)
        for position, down, up in zip(positions, below, above, strict=True)
    ]


def _along(points: Contour, direction: _Direction) -> npt.NDArray[np.float64]:
    """Coordinates along a direction, element by element: equal points give equal numbers, which a product may not."""
    x, y, z = points.T
    coordinates: npt.NDArray[np.float64] = x * direction[0] + y * direction[1] + z * direction[2]
    return coordinates


def _loops(contour: Contour) -> list[Contour]:
    """Cut a contour at the points that it visits twice, each loop beginning at a point that is its alone."""
    trail: list[tuple[float, float, float]] = []
    places: dict[tuple[float, float, float], int] = {}
    cut: list[list[tuple[float, float, float]]] = []
    for x, y, z in contour.tolist():
        point = (x, y, z)
        start = places.get(point)
        if start is not None:
            cut.append(trail[start:])
            for gone in trail[start:]:
                del places[gone]
            del trail[start:]
        places[point] = len(trail)
        trail.append(point)
    cut.append(trail)
    return [np.array([*loop[1:], loop[0]]) for loop in cut if len(loop) >= 3]


def _vector_area(loop: Contour) -> _Direction:
    """Area of a loop along its normal (Newell's method)."""
    points = loop - loop.mean(axis=0)
    total: _Direction = np.cross(points, np.roll(points, -1, axis=0)).sum(axis=0) / 2
    return total


def _lobes_cancel(loop: Contour) -> bool:
    """Whether a loop without area is no line: its lobes then run in opposite senses."""
    points = loop - loop[0]
    reach = np.linalg.norm(points, axis=1)
    along = points[int(reach.argmax())] / reach.max()
    return bool(np.linalg.norm(np.cross(points, along), axis=1).max() > _CROSSED_MM)


def _common_normal(areas: Sequence[_Direction], sizes: npt.NDArray[np.float64]) -> _Direction:
    """Mean normal weighted by area, in the sense in which its largest component is positive."""
    largest = areas[int(sizes.argmax())]
    total = np.sum([area if float(area @ largest) >= 0 else -area for area in areas], axis=0)
    normal: _Direction = total / np.linalg.norm(total)
    return -normal if normal[int(np.abs(normal).argmax())] < 0 else normal


def _axes(normal: _Direction) -> tuple[_Direction, _Direction]:
    """(along rows, along columns) of a plane: columns towards patient left, or back where left is nearly normal."""
    towards = np.array([1.0, 0.0, 0.0]) if abs(normal[0]) < 0.9 else np.array([0.0, 1.0, 0.0])
    flat = towards - normal * float(normal @ towards)
    along_columns: _Direction = flat / np.linalg.norm(flat)
    return np.cross(normal, along_columns), along_columns


def _by_plane(found: Sequence[tuple[float, _Flat]]) -> list[tuple[float, list[_Flat]]]:
    """Group rings, sorted by position, that lie on one plane."""
    planes: list[tuple[float, list[_Flat]]] = []
    for position, ring in found:
        if planes and position - planes[-1][0] <= PLANE_MM:
            planes[-1][1].append(ring)
        else:
            planes.append((position, [ring]))
    return planes


def _cross(rings: Sequence[_Flat]) -> bool:
    """Whether any two edges of a plane cross by more than a touch."""
    starts = np.concatenate(rings)
    ends = np.concatenate([np.roll(ring, -1, axis=0) for ring in rings])
    low, high = np.minimum(starts, ends).T, np.maximum(starts, ends).T
    # By parts, so that memory stays bounded for contours of many points.
    for at in range(0, len(starts), _PART):
        part = slice(at, at + _PART)
        near = (low[0, part, None] <= high[0]) & (low[0] <= high[0, part, None])
        near &= (low[1, part, None] <= high[1]) & (low[1] <= high[1, part, None])
        one, other = np.nonzero(near)
        if _pairs_cross(starts[at + one], ends[at + one], starts[other], ends[other]):
            return True
    return False


def _pairs_cross(starts: _Flat, ends: _Flat, other_starts: _Flat, other_ends: _Flat) -> bool:
    """Whether edges of equal place cross: each separates the ends of the other."""
    one, two = _distances(starts, ends, other_starts), _distances(starts, ends, other_ends)
    three, four = _distances(other_starts, other_ends, starts), _distances(other_starts, other_ends, ends)
    deep = np.minimum.reduce([np.abs(one), np.abs(two), np.abs(three), np.abs(four)]) > _CROSSED_MM
    return bool(np.any(deep & (one * two < 0) & (three * four < 0)))


def _distances(starts: _Flat, ends: _Flat, points: _Flat) -> npt.NDArray[np.float64]:
    """Signed distances of points from the lines through edges."""
    edges, offsets = ends - starts, points - starts
    lengths = np.hypot(edges[..., 0], edges[..., 1])
    crossed = edges[..., 0] * offsets[..., 1] - edges[..., 1] * offsets[..., 0]
    distances: npt.NDArray[np.float64] = crossed / np.where(lengths == 0, 1.0, lengths)
    return distances
