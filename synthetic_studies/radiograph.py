"""A chest radiograph of an invented body: line integrals, their logarithm, quantum noise, collimation, a marker."""

from __future__ import annotations

from pathlib import Path
from typing import Literal

import numpy as np
import numpy.typing as npt
from pydicom import Dataset

from synthetic_studies.chest import chest_attenuation
from synthetic_studies.fields import low_passed
from synthetic_studies.headers import declare_grey, declare_window, place_pixels, start_header, write_file
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.lettering import draw_text
from synthetic_studies.truth import Grid, Truth

__all__ = ["radiograph"]

Image = npt.NDArray[np.float64]
HEIGHT_MM = 430.0
_TOP = 3700.0
"""Stored values that the display curve spans, a sigmoid of the attenuation as digital films have it."""


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
    stored = _expose(grid, chest_attenuation(grid, seed), noise_sd, rng)
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
    centre = 1960 if photometric == "MONOCHROME2" else 4095 - 1960
    declare_window(header, centre, 3700)


def _expose(grid: Grid, attenuation: Image, noise_sd: float, rng: np.random.Generator) -> npt.NDArray[np.uint16]:
    """Attenuation to 12-bit values, bright where little arrives, brightest under the blades."""
    shape = (grid.rows, grid.columns)
    arrived = np.exp(-(attenuation - 2.2))
    noise = (0.8 * low_passed(rng, shape, 0.5) + 0.6 * low_passed(rng, shape, 0.2)) * noise_sd / np.sqrt(arrived)
    values = _TOP / (1 + np.exp(-(attenuation - 2.1) / 0.75)) + 120 + noise
    frame = _blades(grid)
    values = frame * values + (1 - frame) * (3890 + 5 * low_passed(rng, shape, 0.3))
    marker = draw_text("L", scale=max(1, grid.rows // 190))
    top, left = int(grid.rows * 0.05), int(grid.columns * 0.90)
    values[top : top + marker.shape[0], left : left + marker.shape[1]][marker] = 3850
    stored: npt.NDArray[np.uint16] = np.clip(np.rint(values), 0, 4095).astype(np.uint16)
    return stored


def _blades(grid: Grid) -> Image:
    """1 within the collimated field, 0 behind the blades, a soft border between."""
    rows, columns = np.arange(grid.rows)[:, None], np.arange(grid.columns)[None, :]
    inset, soft = 4.5 / grid.spacing_mm, 1.2 / grid.spacing_mm
    down = np.minimum(rows, grid.rows - 1 - rows)
    across = np.minimum(columns, grid.columns - 1 - columns)
    open_share: Image = np.clip((np.minimum(down, across) - inset) / soft, 0.0, 1.0)
    return open_share
