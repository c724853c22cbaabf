"""An MR head series of an invented body: magnitude images, so that noise is Rician in the background."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import numpy.typing as npt
from pydicom import Dataset

from synthetic_studies.drawing import Blob, Canvas, Ribbon, smooth_line
from synthetic_studies.fields import low_passed
from synthetic_studies.headers import (
    declare_grey,
    declare_plane,
    declare_window,
    place_pixels,
    start_header,
    write_file,
)
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.truth import Grid, Truth

__all__ = ["mr_head"]

Image = npt.NDArray[np.float64]
FIELD_MM = 230.0
SLOPE = 2.442002
"""Rescale slope, as some makers write it into MR images."""
_FAT, _WHITE, _GREY, _FLUID, _MARROW, _MUSCLE = 2350.0, 2050.0, 1450.0, 420.0, 1700.0, 1000.0


def mr_head(
    folder: Path,
    *,
    seed: int,
    rows: int = 256,
    columns: int = 256,
    slices: int = 6,
    noise_sd: float = 40.0,
    thickness_mm: float = 5.0,
    patient: Patient | None = None,
) -> Truth:
    """Write a T1-weighted axial head series, 12 bits in 16, with a rescale slope.

    Parameters
    ----------
    folder
        Made when missing.
    seed
        Equal seeds and options give equal bytes.
    rows, columns, slices
        The field is 230 mm across the shorter side.
    noise_sd
        SD of each of the two channels whose magnitude is stored, in rescaled values. Where there is no signal the
        magnitude has mean sd * sqrt(pi / 2) and SD sd * sqrt(2 - pi / 2) (Rayleigh).
    thickness_mm
        Slice thickness and distance.
    patient
        By default one that follows from the seed.
    """
    grid = Grid(rows, columns, FIELD_MM / min(rows, columns))
    patient = patient or Patient(1 + seed % 99)
    scope = Scope("mr_head", seed, (rows, columns, slices, noise_sd, thickness_mm, patient.number))
    positions = tuple((index - (slices - 1) / 2) * thickness_mm for index in range(slices))
    files, uids = [], []
    for index, z_mm in enumerate(positions):
        rng = np.random.default_rng([seed, 41, index])
        header = start_header("MR", scope, patient, index + 1)
        _describe(header, grid, scope, z_mm, thickness_mm)
        place_pixels(header, _acquire(_head(grid, seed, z_mm), noise_sd, rng))
        path = folder / f"mr_{index + 1:04d}.dcm"
        write_file(path, header)
        files.append(path)
        uids.append(str(header.SOPInstanceUID))
    return Truth(
        kind="mr_head",
        seed=seed,
        files=tuple(files),
        patient_id=patient.identifier,
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=tuple(uids),
        grid=grid,
        unit="rescaled, unit unspecified",
        slice_positions_mm=positions,
        noise_sd=noise_sd,
        properties={"slope": SLOPE, "thickness_mm": thickness_mm},
    )


def _describe(header: Dataset, grid: Grid, scope: Scope, z_mm: float, thickness_mm: float) -> None:
    """MR Image module and what goes with it."""
    header.ImageType = ["ORIGINAL", "PRIMARY", "M"]
    header.BodyPartExamined = "HEAD"
    header.ScanningSequence, header.SequenceVariant, header.ScanOptions = "SE", "NONE", ""
    header.MRAcquisitionType, header.MagneticFieldStrength = "2D", "1.5"
    header.RepetitionTime, header.EchoTime, header.EchoTrainLength = "520", "12", "1"
    header.AcquisitionNumber = 1
    header.RescaleIntercept, header.RescaleSlope, header.RescaleType = "0", str(SLOPE), "US"
    header.BurnedInAnnotation, header.LossyImageCompression = "NO", "00"
    declare_plane(header, grid, scope, z_mm, thickness_mm)
    declare_grey(header, grid, stored=12)
    declare_window(header, 1300, 2600)


def _acquire(signal: Image, noise_sd: float, rng: np.random.Generator) -> npt.NDArray[np.uint16]:
    """Magnitude of a signal in two noisy channels, in stored values."""
    real = signal + noise_sd * rng.standard_normal(signal.shape)
    imaginary = noise_sd * rng.standard_normal(signal.shape)
    return np.clip(np.rint(np.hypot(real, imaginary) / SLOPE), 0, 4095).astype(np.uint16)


def _head(grid: Grid, seed: int, z_mm: float) -> Image:
    """Signal without noise, in rescaled values, with the slow shading of a head coil."""
    rng = np.random.default_rng([seed, 42])
    canvas = Canvas(grid, 0.0)
    scale = 1.0 - 0.0035 * abs(z_mm) * (z_mm > 0)
    wave = ((3, 0.012, 1.0), (4, 0.014, float(rng.uniform(-0.3, 0.3))))
    skull = Blob(0, 0, 77 * scale, 95 * scale, 0, wave, 2.15)
    canvas.paint(skull, 900, soft_mm=1.0)
    canvas.paint(skull.grown(-1.6), _FAT, soft_mm=1.0)
    bone = replace(skull.grown(-5.0), waves=((2, 0.012, 0.5), (5, 0.010, 0.0), (3, 0.012, 1.3)))
    for side in (-1, 1):
        canvas.paint(Blob(side * 69 * scale, 8, 6, 34, side * 3), _MUSCLE, soft_mm=1.2)
    canvas.paint(bone, 160, soft_mm=1.2)
    canvas.paint(bone.grown(-2.0), _MARROW, soft_mm=1.8, strength=0.6)
    canvas.paint(bone.grown(-4.2), 160, soft_mm=1.4)
    canvas.paint(bone.grown(-6.0), _FLUID, soft_mm=1.0)
    _paint_brain(canvas, bone.grown(-7.6), rng, z_mm)
    _paint_depth(canvas, z_mm)
    texture = 1 + 0.018 * low_passed(rng, (grid.rows, grid.columns), 0.2)
    shading = 1 + 0.10 * np.hypot(canvas.x_mm, canvas.y_mm + 15) / 95 - 0.05
    signal: Image = canvas.values * texture * shading
    return signal


def _paint_brain(canvas: Canvas, brain: Blob, rng: np.random.Generator, z_mm: float) -> None:
    """White matter, a folded ribbon of grey, and fluid in the folds: zero lines of a smooth field near the rim."""
    shape = (canvas.grid.rows, canvas.grid.columns)
    cutoff = 0.075 * canvas.grid.spacing_mm
    turn = z_mm / 26
    fold = math.cos(turn) * low_passed(rng, shape, cutoff) + math.sin(turn) * low_passed(rng, shape, cutoff)
    inside = -brain.distance_mm(canvas.x_mm, canvas.y_mm)
    slope = np.hypot(*np.gradient(fold, canvas.grid.spacing_mm)) + 0.03
    reach = np.clip(1 - (inside - 16) / 12, 0, 1)
    fissure = np.abs(canvas.x_mm) + np.clip(46 - np.abs(canvas.y_mm + 4), 0, None) * 0.8
    distance = np.minimum(np.abs(fold) / slope + 14 * (1 - reach), np.minimum(np.maximum(inside, 0), fissure))
    canvas.paint(brain, _GREY, soft_mm=1.0)
    within = np.clip(inside / 1.0, 0, 1)
    canvas.paint_where(within * np.clip((distance - 3.6) / 1.2, 0, 1), _WHITE)
    canvas.paint_where(within * np.clip((1.25 - distance) / 1.0, 0, 1) * (inside > 0), _FLUID)


def _paint_depth(canvas: Canvas, z_mm: float) -> None:
    """Ventricles, deep grey nuclei, and the septum between."""
    size = 1.0 - z_mm / 140
    for side in (-1, 1):
        canvas.paint(Blob(side * 26, 4, 12 * size, 24 * size, side * -14), _GREY + 90, soft_mm=3.0)
        canvas.paint(Blob(side * 11, 12, 8, 13 * size, side * 12), _GREY + 40, soft_mm=2.5)
        front = smooth_line((side * 2.6, 2, side * 3.4, -12, side * 6.5, -24, side * 14, -31))
        canvas.paint(Ribbon(front, 2.0 * size, 4.2 * size), _FLUID, soft_mm=1.4)
        back = smooth_line((side * 3, 14, side * 11, 24, side * 20, 36, side * 21, 50))
        canvas.paint(Ribbon(back, 1.8 * size, 4.4 * size), _FLUID, soft_mm=1.4)
        canvas.paint(Ribbon(smooth_line((side * 36, -16, side * 39, 2, side * 35, 20)), 1.2, 1.0), 1700, soft_mm=1.5)
    canvas.paint(Ribbon(((0.0, -2.0), (0.0, 18.0)), 1.8), _FLUID, soft_mm=1.2)
