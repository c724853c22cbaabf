"""Frames made by hand for the tests of this room."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.frames import DisplayWindow, Frame, FrameKey, Geometry, LossHistory, Origin, PixelFormat, Raster, Rescale

CT = PixelFormat(16, 12, False, "MONOCHROME2")


def origin(**changes: Any) -> Origin:
    known: dict[str, Any] = {
        "modality": "CT",
        "body_part": "ABDOMEN",
        "slice_thickness_class": "over 3 to 5 mm",
        "kernel": "STANDARD",
        "manufacturer": "other",
        "source_syntax": "Explicit VR Little Endian",
        "source_bytes": 2 * 128 * 160,
        "history": LossHistory(lossy=False),
    }
    return Origin(**(known | changes))


def body(seed: int = 1, rows: int = 128, columns: int = 160) -> npt.NDArray[np.uint16]:
    """A noisy disc of soft tissue in air, as stored values of a CT with intercept -1024."""
    rng = np.random.default_rng(seed)
    down, right = np.mgrid[:rows, :columns]
    inside = (down - rows / 2) ** 2 + (right - columns / 2) ** 2 < (0.45 * rows) ** 2
    values = np.where(inside, 1064 + 40 * np.sin(down / 9) * np.cos(right / 7), 24)
    return np.clip(np.rint(values + rng.normal(0, 8, values.shape)), 0, 4095).astype(np.uint16)


def frame(samples: npt.NDArray[Any] | None = None, form: PixelFormat = CT, **changes: Any) -> Frame:
    """A CT frame in HU unless changed."""
    stored = body() if samples is None else samples
    known: dict[str, Any] = {
        "key": FrameKey("P-1", "S-1", "R-1", "I-1", 1, 2, 3),
        "origin": origin(),
        "raster": Raster(stored, form),
        "bits_used": 11,
        "unit": "HU",
        "modality_transform": Rescale(1.0, -1024.0),
        "spacing_mm": (0.8, 0.8),
        "geometry": Geometry((0.0, 0.0, 5.0), (1.0, 0.0, 0.0), (0.0, 1.0, 0.0), "G-1"),
        "displays": (DisplayWindow("file window 1", 40.0, 400.0),),
    }
    return Frame(**(known | changes))
