"""A colour ultrasound cine of nothing in particular: sector, speckle, a flow box, and text in the pixels."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import numpy.typing as npt
from pydicom import Dataset

from synthetic_studies.fields import low_passed
from synthetic_studies.headers import place_pixels, start_header, write_file
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.lettering import draw_text
from synthetic_studies.truth import Grid, Truth

__all__ = ["us_cine"]

Image = npt.NDArray[np.float64]
Colour = npt.NDArray[np.uint8]


def us_cine(
    folder: Path, *, seed: int, rows: int = 480, columns: int = 640, frames: int = 8, patient: Patient | None = None
) -> Truth:
    """Write a multi-frame RGB cine, 8 bits, with the patient's invented name burned into every frame.

    `properties['text_rows']` tells up to which row the text reaches.
    """
    grid = Grid(rows, columns, 180.0 / rows)
    patient = patient or Patient(1 + seed % 99)
    scope = Scope("us_cine", seed, (rows, columns, frames, patient.number))
    header = start_header("US", scope, patient, 1)
    _describe(header, grid, frames)
    caption, text_rows = _caption(grid, patient)
    place_pixels(header, np.stack(_draw_frames(grid, seed, frames, caption)))
    path = folder / "us_0001.dcm"
    write_file(path, header)
    return Truth(
        kind="us_cine",
        seed=seed,
        files=(path,),
        patient_id=patient.identifier,
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=(str(header.SOPInstanceUID),),
        grid=grid,
        unit="luma level",
        frames=frames,
        properties={"text_rows": text_rows},
    )


def _describe(header: Dataset, grid: Grid, frames: int) -> None:
    """US image, cine and multi-frame modules."""
    header.ImageType = ["ORIGINAL", "PRIMARY", "ABDOMINAL", "0011"]
    header.BodyPartExamined = "ABDOMEN"
    header.PatientOrientation = ""
    header.NumberOfFrames, header.FrameTime = frames, "40"
    header.FrameIncrementPointer = 0x00181063
    header.BurnedInAnnotation, header.LossyImageCompression = "YES", "00"
    header.SamplesPerPixel, header.PlanarConfiguration = 3, 0
    header.PhotometricInterpretation = "RGB"
    header.Rows, header.Columns = grid.rows, grid.columns
    header.BitsAllocated, header.BitsStored, header.HighBit, header.PixelRepresentation = 8, 8, 7, 0
    header.UltrasoundColorDataPresent = 1
    header.SequenceOfUltrasoundRegions = [_region(grid)]


def _region(grid: Grid) -> Dataset:
    """US Region Calibration: the sector's box, in cm."""
    item = Dataset()
    item.RegionSpatialFormat, item.RegionDataType, item.RegionFlags = 1, 1, 0
    item.RegionLocationMinX0, item.RegionLocationMinY0 = 0, 0
    item.RegionLocationMaxX1, item.RegionLocationMaxY1 = grid.columns - 1, grid.rows - 1
    item.PhysicalUnitsXDirection = item.PhysicalUnitsYDirection = 3
    item.PhysicalDeltaX = item.PhysicalDeltaY = grid.spacing_mm / 10
    return item


def _caption(grid: Grid, patient: Patient) -> tuple[npt.NDArray[np.bool_], int]:
    """Mask of the burned-in text, and the first row that it leaves free."""
    scale = max(1, grid.rows // 240)
    mask = np.zeros((grid.rows, grid.columns), bool)
    row = 2 * scale
    for line in (patient.name.replace("^", " ").upper(), f"{patient.identifier}  03.02.2001", "QUILLHAVEN / INVENTED"):
        text = draw_text(line, scale)[: grid.rows - row, : grid.columns - 4 * scale]
        mask[row : row + text.shape[0], 4 * scale : 4 * scale + text.shape[1]] = text
        row += 9 * scale
    return mask, row


def _draw_frames(grid: Grid, seed: int, frames: int, caption: npt.NDArray[np.bool_]) -> list[Colour]:
    """Frames over one period of a slow pulse; the speckle moves with the tissue."""
    rng = np.random.default_rng([seed, 51])
    shape = (grid.rows, grid.columns)
    speckle = np.hypot(low_passed(rng, shape, 0.16), low_passed(rng, shape, 0.16))
    other = np.hypot(low_passed(rng, shape, 0.16), low_passed(rng, shape, 0.16))
    swirl = low_passed(rng, shape, 0.03)
    drawn = []
    for index in range(frames):
        phase = 2 * math.pi * index / max(frames, 1)
        moved = np.roll(speckle, round(2 * math.sin(phase)), axis=0)
        mixed = math.cos(0.3 * math.sin(phase)) * moved + abs(math.sin(0.3 * math.sin(phase))) * other
        drawn.append(_draw_frame(grid, mixed, swirl, phase, caption))
    return drawn


def _draw_frame(grid: Grid, speckle: Image, swirl: Image, phase: float, caption: npt.NDArray[np.bool_]) -> Colour:
    """One frame: log-compressed speckle within the sector, flow in its box, text on top."""
    down = (np.arange(grid.rows)[:, None] + 0.06 * grid.rows) / grid.rows
    across = (np.arange(grid.columns)[None, :] - (grid.columns - 1) / 2) / grid.rows
    depth, angle = np.hypot(down, across), np.arctan2(across, down)
    sector = (np.abs(angle) < 0.62) & (depth > 0.16) & (depth < 1.03)
    echo = _tissue(depth, angle, phase)
    level = np.where(sector, 34 * np.log1p(echo * speckle**2 * 40) * (1.05 - 0.45 * depth), 0.0)
    grey = np.repeat(np.clip(level, 0, 255)[:, :, None], 3, axis=2)
    box = sector & (np.abs(angle - 0.12) < 0.2) & (np.abs(depth - 0.56) < 0.13)
    _colour_flow(grey, box, depth, angle, swirl, phase)
    grey[caption] = 235
    frame: Colour = np.rint(np.clip(grey, 0, 255)).astype(np.uint8)
    return frame


def _tissue(depth: Image, angle: Image, phase: float) -> Image:
    """Echo strength: layers near the probe, a bright capsule, a dark vessel and a cyst with its bright wake."""
    layers = 0.7 + 0.9 * np.exp(-(((depth - 0.2) / 0.012) ** 2)) + 0.7 * np.exp(-(((depth - 0.26) / 0.01) ** 2))
    capsule = 3.0 * np.exp(-(((depth - 0.34 - 0.05 * angle) / 0.008) ** 2))
    diaphragm = 5.0 * np.exp(-(((depth - 0.9 + 0.25 * angle**2 + 0.006 * math.sin(phase)) / 0.012) ** 2))
    vessel = np.hypot((depth - 0.56 - 0.1 * (angle - 0.12)) / 0.045, (angle - 0.12) / 0.5)
    cyst = np.hypot((depth - 0.62) / 0.075, (angle + 0.3) / 0.12)
    wake = 1 + 1.2 * ((np.abs(angle + 0.3) < 0.1) & (depth > 0.69))
    tissue: Image = (layers + capsule + diaphragm) * wake
    return tissue * np.where(np.minimum(vessel, cyst) < 1, 0.004, 1.0)


def _colour_flow(
    grey: Image, box: npt.NDArray[np.bool_], depth: Image, angle: Image, swirl: Image, phase: float
) -> None:
    """Red towards the probe and blue away, only where the vessel is."""
    vessel = np.hypot((depth - 0.56 - 0.1 * (angle - 0.12)) / 0.042, (angle - 0.12) / 0.48)
    speed = (1 - vessel**2) * (0.6 + 0.4 * math.sin(phase)) + 0.12 * swirl
    flowing = box & (vessel < 1) & (np.abs(speed) > 0.1)
    amount = np.clip(np.abs(speed[flowing]), 0, 1)
    towards = speed[flowing] > 0
    grey[flowing, 0] = np.where(towards, 110 + 145 * amount, 10)
    grey[flowing, 1] = np.where(towards, 150 * amount**2, 90 * amount)
    grey[flowing, 2] = np.where(towards, 10, 120 + 135 * amount)
