"""Regions over real files of pydicom-data, told apart by the size of their frames."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

__all__ = ["write_regions"]


def write_regions(path: Path) -> Path:
    """Write the region file."""
    regions = [*_ct(), *_mr(), *_colour(), *_spacing()]
    path.write_text(json.dumps({"version": 1, "regions": regions}), encoding="utf-8")
    return path


def _part(frame: tuple[int, int], kind: str, **shape: Any) -> dict[str, Any]:
    placement = {"kind": "frames", "rows": frame[0], "columns": frame[1]}
    return {"placement": placement, "shape": {"kind": kind, **shape}}


def _region(name: str, role: str, *parts: dict[str, Any], background: str | None = None) -> dict[str, Any]:
    region: dict[str, Any] = {"name": name, "label": f"label of {name}", "role": role, "parts": list(parts)}
    return region | ({"background": background} if background else {})


def _ct() -> list[dict[str, Any]]:
    """693: a disc and two boxes in the brain, a corner that is mostly padding and reaches beyond the frame, and a box
    smaller than a patch where the delivered copy changed most.
    """
    frame = (512, 512)
    disc = _part(frame, "ellipse", centre=[250.3, 260.65], height=41.2, width=26.6, angle_degrees=33)
    box = _part(frame, "rectangle", centre=[320.25, 240.5], height=50.5, width=31.3, angle_degrees=-20)
    small = _part(frame, "rectangle", centre=[300.0, 300.0], height=9.0, width=7.5, angle_degrees=45)
    changed = _part(frame, "rectangle", centre=[484.3, 139.6], height=3.0, width=3.0)
    outline = [[[-6.3, -4.2], [-9.4, 100.7], [90.1, 110.3], [80.6, 40.2], [110.2, -7.4]]]
    return [
        _region("ct-ellipse", "target", disc, background="ct-box"),
        _region("ct-box", "background", box),
        _region("ct-small", "target", small, background="ct-box"),
        _region("ct-changed", "other", changed),
        _region("ct-corner", "edge", _part(frame, "polygon", outline=outline)),
    ]


def _mr() -> list[dict[str, Any]]:
    """MR2: a hollow polygon with the background of two parts that overlap, and another of one part."""
    frame = (1024, 1024)
    outline = [
        [[400.5, 300.2], [415.1, 410.7], [510.3, 390.4], [480.6, 355.2], [520.9, 295.3]],
        [[425.2, 325.1], [427.5, 360.7], [460.3, 350.2]],
    ]
    first = _part(frame, "rectangle", centre=[500.0, 650.0], height=60.0, width=41.0)
    second = _part(frame, "ellipse", centre=[520.2, 672.4], height=50.3, width=70.7)
    triangle = _part(frame, "polygon", outline=[[[700.4, 500.5], [760.2, 560.3], [720.9, 610.1]]])
    return [
        _region("mr-hollow", "target", _part(frame, "polygon", outline=outline), background="mr-triangle"),
        _region("mr-triangle", "background", triangle),
        _region("mr-two-with-ellipse", "other", first, second, background="mr-triangle"),
    ]


def _colour() -> list[dict[str, Any]]:
    """US1: two boxes and an oval in the image."""
    frame = (480, 640)
    box = _part(frame, "rectangle", centre=[200.0, 300.0], height=40.0, width=50.0, angle_degrees=12.5)
    other = _part(frame, "rectangle", centre=[260.2, 330.4], height=20.5, width=30.25)
    oval = _part(frame, "ellipse", centre=[330.7, 280.2], height=44.4, width=60.1, angle_degrees=-70)
    return [
        _region("us-box", "target", box, background="us-other"),
        _region("us-other", "background", other),
        _region("us-ellipse", "uniform", oval),
    ]


def _spacing() -> list[dict[str, Any]]:
    """RG1, whose spacing is zero, inverted; JPEG-LL, whose larger patch would hold fewer pixels than the smaller."""
    chest = _part((1955, 1841), "rectangle", centre=[900.5, 800.25], height=80.0, width=61.5, angle_degrees=5)
    bones = _part((1024, 256), "polygon", outline=[[[300.5, 100.5], [300.5, 140.5], [360.5, 140.5], [360.5, 100.5]]])
    return [_region("cr-box", "other", chest), _region("nm-box", "other", bones)]
