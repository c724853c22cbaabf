"""A CT series of an invented body whose values, discs, edge and noise are known."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
import numpy.typing as npt
from pydicom import Dataset

from synthetic_studies.anatomy import LIVER_HU, Tissue, draw_body, weave_tissue
from synthetic_studies.drawing import Blob, Canvas
from synthetic_studies.fields import band_passed, streaked
from synthetic_studies.headers import (
    declare_grey,
    declare_plane,
    declare_window,
    place_pixels,
    start_header,
    write_file,
)
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.truth import Circle, Disc, Edge, Grid, Truth

__all__ = ["ct_body", "noise_share"]

Image = npt.NDArray[np.float64]
Kernel = Literal["SOFT", "STANDARD", "SHARP"]
Storage = Literal["signed", "unsigned-12"]

CUTOFF: dict[str, float] = {"SOFT": 0.20, "STANDARD": 0.28, "SHARP": 0.42}
"""Cycles per pixel; the noise spectrum peaks at 0.71 of it."""
FIELD_MM = 400.0
_DISC_PLACES = ((-92, -50, 8), (-70, -58, 6), (-50, -52, 4), (-112, -18, 8), (-86, -24, 6), (-62, -28, 4))
_UNIFORM = (-96.0, 13.0, 15.0)
_BACKGROUND = (-70.0, 10.0, 6.0)
_EDGE = (44.0, 88.0, -48.0, 10.0)
"""From x, to x, y, and how far both sides are clear, in mm."""


@dataclass(frozen=True, slots=True)
class _Series:
    """Everything that the slices of one series share."""

    grid: Grid
    seed: int
    noise_sd_hu: float
    kernel: Kernel
    storage: Storage
    thickness_mm: float
    contrasts_hu: tuple[float, float]

    @property
    def padding(self) -> int:
        return -2000 if self.storage == "signed" else 0

    @property
    def field_circle(self) -> Circle:
        rows, columns = self.grid.rows, self.grid.columns
        return Circle((rows - 1) / 2, (columns - 1) / 2, min(rows, columns) / 2)

    def disc(self, label: str, role: str, place: tuple[float, float, float], contrast: float, calm: float) -> Disc:
        x_mm, y_mm, radius_mm = place
        row, column = self.grid.pixel(x_mm, y_mm)
        sd = self.noise_sd_hu * float(noise_share(np.array(x_mm), np.array(y_mm)))
        circle = Circle(row, column, radius_mm / self.grid.spacing_mm)
        value = LIVER_HU + contrast
        return Disc(label, role, circle, x_mm, y_mm, radius_mm, value, contrast, circle.radius * calm, sd)

    def targets(self) -> tuple[Disc, ...]:
        found = []
        for index, place in enumerate(_DISC_PLACES):
            contrast = self.contrasts_hu[index // 3]
            label = f"disc {index + 1}"
            found.append(self.disc(label, "target", place, contrast, 1.5))
        return tuple(found)

    def uniform(self) -> Disc:
        return self.disc("uniform insert", "uniform", _UNIFORM, 8.0 - LIVER_HU, 1.15)

    def background(self) -> Disc:
        return self.disc("liver", "background", _BACKGROUND, 0.0, 1.2)

    def edge(self) -> Edge:
        left, right, y_mm, reach = _EDGE
        start, end = self.grid.pixel(left, y_mm), self.grid.pixel(right, y_mm)
        half = reach / self.grid.spacing_mm
        return Edge("fluid level", start, end, half, -980.0, 12.0, (left, y_mm), (right, y_mm))


def noise_share(x_mm: Image, y_mm: Image) -> Image:
    """SD of the noise at a point, as a share of that at the middle: it falls towards the rim of the body."""
    share: Image = 0.35 + 0.65 * np.exp(-((x_mm / 170.0) ** 2) - (y_mm / 130.0) ** 2)
    return share


def _noise(series: _Series, rng: np.random.Generator) -> Image:
    """Band-limited noise whose strength and direction depend on the position."""
    grid = series.grid
    shape, cutoff = (grid.rows, grid.columns), CUTOFF[series.kernel]
    blank = Canvas(grid, 0.0)
    lean = 0.75 * np.exp(-(((blank.y_mm - 45) / 45) ** 2) - (blank.x_mm / 150) ** 2)
    even, rows = band_passed(rng, shape, cutoff), streaked(rng, shape, cutoff)
    mixed: Image = np.sqrt(1 - lean**2) * even + lean * rows
    return series.noise_sd_hu * noise_share(blank.x_mm, blank.y_mm) * mixed


def _draw_slice(series: _Series, tissue: Tissue, z_mm: float) -> Image:
    """Section in HU without noise, with the planted discs and the edge."""
    calm = Canvas(series.grid, 0.0)
    discs = (*series.targets(), series.background(), series.uniform())
    for disc in discs:
        quiet = Blob(disc.x_mm, disc.y_mm, disc.radius_mm * 1.6, disc.radius_mm * 1.6)
        calm.paint(quiet.grown(1.0), 1.0, soft_mm=2.0)
    planted = Canvas(series.grid, 0.0)
    planted.values = draw_body(series.grid, series.seed, z_mm, tissue, calm.values)
    _draw_level(planted, series.edge())
    for disc in discs:
        planted.paint(Blob(disc.x_mm, disc.y_mm, disc.radius_mm, disc.radius_mm), disc.value)
    return planted.values


def _draw_level(canvas: Canvas, edge: Edge) -> None:
    """Gas above fluid: one straight boundary, as gravity makes it."""
    middle = (edge.start_mm[0] + edge.end_mm[0]) / 2
    half = (edge.end_mm[0] - edge.start_mm[0]) / 2
    level = edge.start_mm[1]
    box, inside = canvas.cover(Blob(middle, level + half * 0.05, half * 1.32, half * 1.02, -8), 1.0)
    below = np.clip((canvas.y_mm[box[0], :] - level) / canvas.grid.spacing_mm + 0.5, 0, 1)
    content = edge.value_above + below * (edge.value_below - edge.value_above)
    canvas.values[box] += inside * (content - canvas.values[box])


def _store(series: _Series, values_hu: Image) -> npt.NDArray[np.int16] | npt.NDArray[np.uint16]:
    """HU to stored values; outside the reconstructed field the padding value."""
    circle = series.field_circle
    rows = np.arange(series.grid.rows)[:, None] - circle.row
    columns = np.arange(series.grid.columns)[None, :] - circle.column
    outside = np.hypot(rows, columns) > circle.radius
    lowest, highest = (-1999, 8191) if series.storage == "signed" else (1, 4095)
    stored = np.clip(np.rint(values_hu + 1024), lowest, highest).astype(np.int16)
    stored[outside] = series.padding
    return stored if series.storage == "signed" else stored.astype(np.uint16)


def _describe(header: Dataset, series: _Series, scope: Scope, z_mm: float) -> None:
    """CT Image module and what goes with it."""
    header.ImageType = ["ORIGINAL", "PRIMARY", "AXIAL"]
    header.BodyPartExamined = "ABDOMEN"
    header.ConvolutionKernel = series.kernel
    header.KVP, header.XRayTubeCurrent, header.AcquisitionNumber = "120", "240", 1
    header.RescaleIntercept, header.RescaleSlope, header.RescaleType = "-1024", "1", "HU"
    header.BurnedInAnnotation, header.LossyImageCompression = "NO", "00"
    signed = series.storage == "signed"
    declare_plane(header, series.grid, scope, z_mm, series.thickness_mm)
    declare_grey(header, series.grid, stored=14 if signed else 12, signed=signed)
    declare_window(header, 50, 400)
    header.add_new(0x00280120, "SS" if signed else "US", series.padding)


def ct_body(
    folder: Path,
    *,
    seed: int,
    rows: int = 512,
    columns: int = 512,
    slices: int = 12,
    noise_sd_hu: float = 14.0,
    thickness_mm: float = 5.0,
    kernel: Kernel = "STANDARD",
    storage: Storage = "signed",
    contrasts_hu: tuple[float, float] = (-40.0, -20.0),
    patient: Patient | None = None,
) -> Truth:
    """Write a CT series of the upper abdomen, one file per slice.

    Parameters
    ----------
    folder
        Made when missing.
    seed
        Equal seeds and options give equal bytes.
    rows, columns
        The reconstructed field is the inscribed circle, 400 mm across; outside lies padding.
    slices
        Number of files.
    noise_sd_hu
        SD at the middle of the field; it falls towards the rim (`noise_share`).
    thickness_mm
        Slice thickness and distance.
    kernel
        Sets the frequency at which the noise spectrum peaks.
    storage
        'signed' is 14 in 16 with padding -2000, 'unsigned-12' is 12 in 16 with padding 0.
    contrasts_hu
        Of discs 1 to 3 and of discs 4 to 6 (radii 8, 6 and 4 mm), over liver.
    patient
        By default one that follows from the seed.

    Returns
    -------
    Truth
        In HU; discs and edge lie at the same place in every slice.
    """
    grid = Grid(rows, columns, FIELD_MM / min(rows, columns))
    series = _Series(grid, seed, noise_sd_hu, kernel, storage, thickness_mm, contrasts_hu)
    patient = patient or Patient(1 + seed % 99)
    scope = Scope("ct_body", seed, (series, slices, patient.number))
    positions = tuple((index - (slices - 1) / 2) * thickness_mm for index in range(slices))
    files = _write_slices(folder, series, scope, patient, positions)
    return _truth_of(series, scope, patient, positions, files)


def _write_slices(
    folder: Path, series: _Series, scope: Scope, patient: Patient, positions: tuple[float, ...]
) -> tuple[Path, ...]:
    """Write one file for each position along z."""
    tissue = weave_tissue(series.grid, series.seed)
    files = []
    for index, z_mm in enumerate(positions):
        rng = np.random.default_rng([series.seed, 21, index])
        values = _draw_slice(series, tissue, z_mm) + _noise(series, rng)
        header = start_header("CT", scope, patient, index + 1)
        _describe(header, series, scope, z_mm)
        place_pixels(header, _store(series, values))
        files.append(folder / f"ct_{index + 1:04d}.dcm")
        write_file(files[-1], header)
    return tuple(files)


def _truth_of(
    series: _Series, scope: Scope, patient: Patient, positions: tuple[float, ...], files: tuple[Path, ...]
) -> Truth:
    """Gather what is known of the series."""
    return Truth(
        kind="ct_body",
        seed=series.seed,
        files=files,
        patient_id=patient.identifier,
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=tuple(scope.uid("instance", index + 1) for index in range(len(files))),
        grid=series.grid,
        unit="HU",
        slice_positions_mm=positions,
        noise_sd=series.noise_sd_hu,
        padding_value=series.padding,
        field_circle=series.field_circle,
        targets=series.targets(),
        background=series.background(),
        uniform=series.uniform(),
        edge=series.edge(),
        properties={"kernel": series.kernel, "storage": series.storage, "thickness_mm": series.thickness_mm},
    )
