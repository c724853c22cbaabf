"""From a region redrawn to its figures, with the frame and its recompressed copy at hand.

Run as ``python -m tests.benchmarks.region_redrawn``; the table goes to standard output. Every round draws another
shape, a target whose background stands already; its row holds all figures of regions.parquet, CNR and SSIM among them.
Wall times. Not a test: timings are no law.
"""

from __future__ import annotations

import dataclasses
import math
import statistics
import tempfile
import time
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path

import numpy as np

from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.reader import open_instance
from safecheck.evaluation import Assignment, Candidate, load_kernels
from safecheck.evaluation.original import Original, PlacedRegion, prepare
from safecheck.evaluation.rows import region_rows
from safecheck.evaluation.treatment import Treated, recompress
from safecheck.frames import SizeBasis, Values
from safecheck.measures.region import prepare_region
from safecheck.measures.structural import measure_window, prepare_window
from safecheck.regions.region import Grid, OnFrames, Part, Region, cover_grid
from safecheck.regions.shapes import Ellipse, Polygon, Rectangle
from synthetic_studies import ct_body, radiograph
from tests.benchmarks.assess_speed import say

ROUNDS = 9
VERTICES = 60
CANDIDATE = Candidate("tiled 10", "tiled", 10.0, SizeBasis.BITS_STORED)
STEPS = ("covered", "picked", "measured")


@dataclasses.dataclass(frozen=True, slots=True)
class AtHand:
    """What a process keeps of a frame on which regions are drawn."""

    original: Original
    """With the background as its only region."""
    treated: Treated
    ssim_map: Values

    @property
    def grid(self) -> Grid:
        """The frame's pixels."""
        return Grid(*self.original.frame.raster.shape)


def bring(path: Path) -> AtHand:
    """Read and recompress the first frame of a file, with the SSIM map wherever a region may come to lie."""
    (instance,) = gather([path], pseudonyms=Pseudonyms(bytes(32))).instances
    with open_instance(instance) as reader:
        original = prepare(reader.frame(1), Assignment((CANDIDATE,)))
    treated = recompress(original, CANDIDATE)[0]
    values, rendering = original.values, original.baseline.windows[0].rendering
    everywhere = prepare_window(values, original.content.mask, rendering, np.ones(values.shape, np.bool_))
    _, ssim_map = measure_window(everywhere, treated.values, with_map=True)
    if ssim_map is None:
        raise SystemExit("no SSIM map")
    rows, columns = values.shape
    square = Rectangle(centre=(rows / 2, columns / 2), height=rows / 20, width=columns / 20)
    grid = Grid(rows, columns)
    background = Region("background", "background", "background", (_part(square, grid),))
    regions = (place(background, original, grid, []),)
    return AtHand(dataclasses.replace(original, regions=regions), treated, ssim_map)


def _part(shape: Rectangle | Ellipse | Polygon, grid: Grid) -> Part:
    """A shape on the frame."""
    return Part(placement=OnFrames(rows=grid.rows, columns=grid.columns), shape=shape)


def place(region: Region, original: Original, grid: Grid, marks: list[float]) -> PlacedRegion:
    """Cover the frame and pick the pixels; the time after each is added to the marks."""
    covered = cover_grid(region, grid)
    marks.append(time.perf_counter())
    if covered is None:
        raise SystemExit("a region lies outside the frame")
    baseline = prepare_region(original.values, covered.fractions, covered.inside, original.frame.raster.padding)
    marks.append(time.perf_counter())
    return PlacedRegion(region, covered, baseline, float(covered.fractions.sum()))


def draw_polygon(grid: Grid, rng: np.random.Generator) -> Polygon:
    """An outline as a hand draws it, about a fifth of the frame's shorter side in radius."""
    waves, phase = int(rng.integers(2, 6)), rng.uniform(0, 2 * math.pi)
    angles = np.arange(VERTICES) * (2 * math.pi / VERTICES)
    radii = 0.2 * min(grid.rows, grid.columns) * (1 + 0.2 * np.sin(waves * angles + phase))
    radii *= rng.uniform(0.95, 1.05, VERTICES)
    row, column = _centre(grid, rng)
    rows, columns = row + radii * np.sin(angles), column + radii * np.cos(angles)
    return Polygon(outline=(tuple(zip(rows.tolist(), columns.tolist(), strict=True)),))


def draw_ellipse(grid: Grid, rng: np.random.Generator) -> Ellipse:
    """A turned ellipse of about the polygon's size."""
    height, width = min(grid.rows, grid.columns) * rng.uniform((0.25, 0.45), (0.35, 0.55))
    return Ellipse(centre=_centre(grid, rng), height=height, width=width, angle_degrees=rng.uniform(5, 85))


def _centre(grid: Grid, rng: np.random.Generator) -> tuple[float, float]:
    """A place near the middle."""
    row, column = rng.uniform(0.4, 0.6, 2) * (grid.rows, grid.columns)
    return float(row), float(column)


Draw = Callable[[Grid, np.random.Generator], Polygon | Ellipse]


def redraw(at_hand: AtHand, draw: Draw, rng: np.random.Generator) -> tuple[float, list[float]]:
    """Pixels of a new shape, and milliseconds of each step to its figures."""
    original, grid = at_hand.original, at_hand.grid
    shape = draw(grid, rng).model_dump()
    marks = [time.perf_counter()]
    # As the page on which it is drawn sends it: checked like a region file.
    part = Part.model_validate(
        {"placement": {"kind": "frames", "rows": grid.rows, "columns": grid.columns}, "shape": shape}
    )
    placed = place(Region("drawn", "drawn", "target", (part,), "background"), original, grid, marks)
    drawn = dataclasses.replace(original, regions=(placed, *original.regions))
    row = region_rows(drawn, at_hand.treated, at_hand.ssim_map)[0]
    marks.append(time.perf_counter())
    if None in (row.rmse, row.sd_after, row.cnr_after, row.ssim):
        raise SystemExit("a figure of the region is missing")
    return row.area_pixels, [1e3 * (end - start) for start, end in pairwise(marks)]


def compare(name: str, at_hand: AtHand) -> None:
    """Print the rows of one frame."""
    rng = np.random.default_rng(7)
    for kind, draw in ((f"polygon of {VERTICES} vertices", draw_polygon), ("turned ellipse", draw_ellipse)):
        redraw(at_hand, draw, rng)
        rounds = [redraw(at_hand, draw, rng) for _ in range(ROUNDS)]
        area = statistics.median(pixels for pixels, _ in rounds)
        totals = [sum(steps) for _, steps in rounds]
        medians = [statistics.median(step) for step in zip(*(steps for _, steps in rounds), strict=True)]
        figures = " | ".join(f"{value:.1f}" for value in (statistics.median(totals), max(totals), *medians))
        say(f"| {name} | {kind} | {area:.0f} | {figures} |")


def main() -> None:
    """Print the table."""
    load_kernels()
    say(f"| frame | shape | pixels, median | total ms, median of {ROUNDS} | slowest | {' | '.join(STEPS)} |")
    say("| --- " * (5 + len(STEPS)) + "|")
    with tempfile.TemporaryDirectory() as folder:
        (slice_file,) = ct_body(Path(folder) / "ct", seed=8, slices=1).files
        (film,) = radiograph(Path(folder) / "cr", seed=8, rows=2500, columns=2000).files
        compare("CT 512x512", bring(slice_file))
        compare("CR 2500x2000", bring(film))


if __name__ == "__main__":
    main()
