"""A chest radiograph of an invented body: line integrals, their logarithm, quantum noise, collimation, a marker."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Literal

import numpy as np
import numpy.typing as npt
from pydicom import Dataset

from synthetic_studies.drawing import Blob, Canvas, Ribbon, Stroke
from synthetic_studies.fields import low_passed
from synthetic_studies.headers import declare_grey, declare_window, place_pixels, start_header, write_file
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.lettering import draw_text
from synthetic_studies.truth import Grid, Truth

__all__ = ["radiograph"]

Image = npt.NDArray[np.float64]
HEIGHT_MM = 430.0
_PER_UNIT = 620.0
"""Stored values per unit of attenuation."""


def radiograph(
    folder: Path,
    *,
    seed: int,
    rows: int = 1024,
    columns: int = 832,
    photometric: Literal["MONOCHROME1", "MONOCHROME2"] = "MONOCHROME2",
    noise_sd: float = 18.0,
    patient: Patient | None = None,
) -> Truth:
    """Write a postero-anterior chest radiograph, CR, 12 bits in 16.

    Parameters
    ----------
    folder
        Made when missing.
    seed
        Equal seeds and options give equal bytes.
    rows, columns
        430 mm high whatever the number of rows.
    photometric
        MONOCHROME1 stores the same picture upside down in value.
    noise_sd
        SD of the noise behind the mean attenuation, in stored values; it grows where less arrives.
    patient
        By default one that follows from the seed.
    """
    grid = Grid(rows, columns, HEIGHT_MM / rows)
    patient = patient or Patient(1 + seed % 99)
    scope = Scope("radiograph", seed, (rows, columns, photometric, noise_sd, patient.number))
    rng = np.random.default_rng([seed, 31])
    stored = _expose(grid, _chest(grid, seed), noise_sd, rng)
    if photometric == "MONOCHROME1":
        stored = (4095 - stored).astype(np.uint16)
    header = start_header("CR", scope, patient, 1)
    _describe(header, grid, photometric)
    place_pixels(header, stored)
    path = folder / "cr_0001.dcm"
    write_file(path, header)
    return Truth(
        kind="radiograph",
        seed=seed,
        files=(path,),
        patient_id=patient.identifier,
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=(str(header.SOPInstanceUID),),
        grid=grid,
        unit="stored value",
        noise_sd=noise_sd,
        properties={"photometric": photometric},
    )


def _describe(header: Dataset, grid: Grid, photometric: str) -> None:
    """CR series and image modules."""
    header.ImageType = ["ORIGINAL", "PRIMARY"]
    header.BodyPartExamined, header.ViewPosition = "CHEST", "PA"
    header.PatientOrientation = ["L", "F"]
    header.KVP, header.PlateID = "120", "SYN-PLATE"
    spacing = f"{grid.spacing_mm:.6f}"
    header.ImagerPixelSpacing = [spacing, spacing]
    header.PixelSpacing = [spacing, spacing]
    header.RescaleIntercept, header.RescaleSlope, header.RescaleType = "0", "1", "US"
    header.BurnedInAnnotation, header.LossyImageCompression = "NO", "00"
    declare_grey(header, grid, stored=12, photometric=photometric)
    centre = 1950 if photometric == "MONOCHROME2" else 4095 - 1950
    declare_window(header, centre, 2900)


def _expose(grid: Grid, attenuation: Image, noise_sd: float, rng: np.random.Generator) -> npt.NDArray[np.uint16]:
    """Attenuation to 12-bit values, bright where little arrives, brightest under the blades."""
    shape = (grid.rows, grid.columns)
    arrived = np.exp(-(attenuation - 2.6))
    noise = (0.8 * low_passed(rng, shape, 0.5) + 0.6 * low_passed(rng, shape, 0.2)) * noise_sd / np.sqrt(arrived)
    values = 500 + _PER_UNIT * attenuation + noise
    frame = _blades(grid)
    values = frame * values + (1 - frame) * (3890 + 5 * low_passed(rng, shape, 0.3))
    marker = draw_text("L", scale=max(1, grid.rows // 150))
    top, left = int(grid.rows * 0.06), int(grid.columns * 0.88)
    values[top : top + marker.shape[0], left : left + marker.shape[1]][marker] = 3850
    return np.clip(np.rint(values), 0, 4095).astype(np.uint16)


def _blades(grid: Grid) -> Image:
    """1 within the collimated field, 0 behind the blades, a soft border between."""
    rows, columns = np.arange(grid.rows)[:, None], np.arange(grid.columns)[None, :]
    inset, soft = 4.5 / grid.spacing_mm, 1.2 / grid.spacing_mm
    down = np.minimum(rows, grid.rows - 1 - rows)
    across = np.minimum(columns, grid.columns - 1 - columns)
    open_share: Image = np.clip((np.minimum(down, across) - inset) / soft, 0.0, 1.0)
    return open_share


def _chest(grid: Grid, seed: int) -> Image:
    """Line integrals of attenuation, (rows, columns), dimensionless."""
    rng = np.random.default_rng([seed, 32])
    canvas = Canvas(grid, 0.15)
    _add_trunk(canvas)
    _add_lungs(canvas, rng)
    _add_mediastinum(canvas)
    _add_bones(canvas)
    texture = low_passed(rng, (grid.rows, grid.columns), 0.05 * grid.spacing_mm)
    fine = low_passed(rng, (grid.rows, grid.columns), min(0.4, 0.3 * grid.spacing_mm))
    return canvas.values + 0.035 * texture + 0.012 * fine


def _add_trunk(canvas: Canvas) -> None:
    trunk = Blob(0, 120, 172, 300, 0, ((4, 0.02, 0.0),), 2.6)
    canvas.add_dome(trunk, 3.1)
    canvas.add_dome(Blob(0, -205, 62, 75, 0, (), 2.4), 1.7)
    for side in (-1, 1):
        canvas.add_dome(Blob(side * 118, -128, 82, 46, side * 24), 1.2)
        canvas.add_dome(Blob(side * 178, 10, 38, 190, side * 4), 1.1)
        canvas.add_dome(Blob(side * 78, 70, 62, 52, 0), 0.22)


def _add_lungs(canvas: Canvas, rng: np.random.Generator) -> None:
    """Two air-filled lungs, the domes of the diaphragm, and vessels that branch from the hila."""
    for side, half_width in ((-1, 62), (1, 58)):
        lung = Blob(side * 72, -22, half_width, 138, side * -5, ((3, 0.05, side * -1.2), (2, 0.04, 0.6)), 2.35)
        box, inside = canvas.cover(lung, 2.0)
        depth = np.clip(-lung.distance_mm(canvas.x_mm[:, box[1]], canvas.y_mm[box[0], :]) / 40, 0, 1)
        dome = 96 if side < 0 else 106
        above = np.clip(
            (
                dome
                - 34 * np.sqrt(np.clip(1 - ((canvas.x_mm[:, box[1]] - side * 66) / 78) ** 2, 0, 1))
                + 26
                - canvas.y_mm[box[0], :]
            )
            / 2.0,
            0,
            1,
        )
        canvas.values[box] -= inside * above * (0.75 + 0.85 * np.sqrt(depth * (2 - depth)))
        _add_vessels(canvas, rng, side)


def _add_vessels(canvas: Canvas, rng: np.random.Generator, side: int) -> None:
    """A tree of vessels from one hilum, thinner and fainter with each branching."""
    for angle in np.linspace(-1.45, 1.5, 9) + rng.normal(0, 0.07, 9):
        _grow(canvas, rng, (side * 34.0, 0.0), float(angle), side, 3.6, 0)
    for _ in range(6):
        x_mm, y_mm = side * (38 + float(rng.normal(0, 6))), float(rng.normal(4, 13))
        canvas.add_dome(Blob(x_mm, y_mm, float(rng.uniform(5, 10)), float(rng.uniform(7, 13)), 20.0 * side), 0.22)


def _grow(
    canvas: Canvas,
    rng: np.random.Generator,
    start: tuple[float, float],
    angle: float,
    side: int,
    radius_mm: float,
    depth: int,
) -> None:
    """One vessel from `start` (x, y) and its two branches; angle 0 points outwards."""
    points = [start]
    for _ in range(4):
        angle += float(rng.normal(0, 0.10))
        step = float(rng.uniform(0.75, 1.1)) * 2.4 * (radius_mm + 1.6)
        x_mm, y_mm = points[-1]
        points.append((x_mm + side * step * math.cos(angle), y_mm + step * math.sin(angle)))
    canvas.add(Ribbon(tuple(points), radius_mm, radius_mm * 0.75), 0.034 + 0.036 * radius_mm, 1.2)
    if depth < 3:
        for turn in (-0.38, 0.34):
            branch = angle + turn + float(rng.normal(0, 0.12))
            _grow(canvas, rng, points[-1], branch, side, radius_mm * 0.66, depth + 1)


def _add_mediastinum(canvas: Canvas) -> None:
    """Heart, great vessels, trachea and its two branches."""
    canvas.add_dome(Blob(24, 52, 78, 54, 38, ((3, 0.05, 0.8),)), 1.25)
    canvas.add_dome(Blob(-16, 50, 40, 58, -6), 0.55)
    canvas.add(Ribbon(((0, -215), (-2, -60), (4, 60), (4, 140)), 24, 26), 0.62, 7.0)
    canvas.add_dome(Blob(25, -48, 19, 18), 0.6)
    canvas.add(Ribbon(((22, -45), (19, 30), (12, 150)), 11), 0.24, 4.0)
    canvas.add(Ribbon(((-2, -215), (-3, -120), (-4, -52)), 8.5), -0.42, 2.5)
    for side, reach in ((-1, 30), (1, 36)):
        canvas.add(Ribbon(((-4, -52), (side * 14, -34), (side * reach, -18)), 6.5, 4.5), -0.26, 2.5)


def _add_bones(canvas: Canvas) -> None:
    """Spine, ribs front and back, clavicles, the inner edges of the shoulder blades, upper arms."""
    for index in range(19):
        y_mm = -212 + 24.0 * index
        canvas.add(Blob(0, y_mm, 18.5, 10.2, 0, (), 5), 0.28, 2.0)
        canvas.add(Blob(0, y_mm, 16.5, 8.4, 0, (), 5), -0.07, 2.0)
        canvas.add(Blob(0, y_mm + 6, 3.5, 6.5), 0.16, 2.0)
        for side in (-1, 1):
            canvas.add(Blob(side * 10.5, y_mm - 3, 3.6, 4.8), 0.12, 1.5)
            canvas.add(Stroke(side * 17, y_mm - 4, side * 30, y_mm - 7, 4.0), 0.13, 2.0)
    for side in (-1, 1):
        for rib in range(10):
            _add_rib(canvas, side, rib)
        clavicle = ((side * 16, -128), (side * 52, -140), (side * 92, -146), (side * 138, -160))
        _add_bone(canvas, Ribbon(clavicle, 6.2, 5.4), 0.30)
        blade = ((side * 108, -140), (side * 128, -70), (side * 138, -8))
        canvas.add(Ribbon(blade, 2.2, 1.6), 0.16, 1.5)
        canvas.add(Blob(side * 146, -86, 26, 68, side * 8), 0.12, 5.0)
        _add_bone(canvas, Blob(side * 166, -150, 24, 25), 0.32)


def _add_bone(canvas: Canvas, shape: Ribbon | Blob, amount: float) -> None:
    """A tube: more is crossed at its rim than in its middle."""
    canvas.add(shape, amount, 1.2)
    canvas.add(shape.grown(-1.8), -0.34 * amount, 1.8)


def _add_rib(canvas: Canvas, side: int, rib: int) -> None:
    """One rib: its back part outwards and down, its front part inwards and further down."""
    top = -150 + 23.0 * rib
    out = 96 + 30 * math.sin(min(1.0, (rib + 1.2) / 6) * math.pi / 2)
    back = [
        (side * (20 + (out - 20) * share), top - 10 * math.sin(math.pi * share) + (30 + 2.5 * rib) * share**1.7)
        for share in np.linspace(0, 1, 12)
    ]
    _add_bone(canvas, Ribbon(tuple((float(x), float(y)) for x, y in back), 5.4, 5.0), 0.30)
    if rib > 6:
        return
    low = back[-1][1]
    front = [
        (side * (out - (out - 40 - 5 * rib) * share), low + 6 * math.sin(math.pi * share) + (42 + 3 * rib) * share**0.9)
        for share in np.linspace(0, 1, 10)
    ]
    _add_bone(canvas, Ribbon(tuple((float(x), float(y)) for x, y in front), 5.0, 6.0), 0.20)
