"""Figures of a dossier computed again from the DICOM files, with other people's libraries and nothing of the package.

    python -m tests.end_to_end.independent DOSSIER ORIGINAL... [--delivered COPY...] [--regions FILE]

says for each figure of measures.csv, windows.csv and regions.csv how far it lies from the one computed here. Files are
told apart by their rows and columns, since the tables hold no names.

SSIM: scikit-image. The rest: the definitions of docs/measures.md written out in NumPy, here and in the modules beside.
"""

from __future__ import annotations

import argparse
import csv
import itertools
import math
import operator
import sys
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import skimage.metrics

from tests.end_to_end import independent_places as places
from tests.end_to_end.independent_image import Image, bytes_of, content_of, read_image, recompress, reversible_sizes
from tests.end_to_end.independent_places import Array, Figure
from tests.end_to_end.independent_regions import Drawn, measure_region, read_regions

__all__ = ["Difference", "compare"]

Figures = dict[str, Figure]
"""Column -> what it should hold."""
SSIM_MARGIN = 5
"""Half of the 11x11 window of SSIM, which must lie wholly in the frame."""
BOUND = 1e-9
"""Relative difference up to which figures agree."""


@dataclass(frozen=True)
class Difference:
    """One figure of the table beside the one computed here."""

    table: str
    row: str
    column: str
    recorded: str
    computed: Figure

    @property
    def agrees(self) -> bool:
        return self.relative <= BOUND

    @property
    def relative(self) -> float:
        """0 where equal; infinite where one is nothing. Below 1e-3 the difference counts, not its share."""
        if self.computed is None or isinstance(self.computed, str):
            return 0.0 if (self.computed or "") == self.recorded else math.inf
        recorded = float(self.recorded or "inf")
        return 0.0 if recorded == self.computed else abs(recorded - self.computed) / max(abs(self.computed), 1e-3)


def peaks_of(before: Image) -> dict[str, float]:
    """Peaks of both PSNR."""
    return {
        "bits": float((1 << before.bits) - 1) * before.step,
        "range": float(np.ptp(before.values[content_of(before)[1]])),
    }


def measure(before: Image, after: Image, code_bytes: int, source_bytes: int, drawn: dict[str, Drawn]) -> Figures:
    """Columns of measures.csv."""
    error = after.values - before.values
    rule, content = content_of(before)
    peaks = peaks_of(before)
    sizes = reversible_sizes(before)
    figures: Figures = {
        "content_rule": rule,
        "lossless_codec": min(sizes, key=lambda name: sizes[name]),
        "content_pixels": int(content.sum()),
        "padding_pixels": int(before.padding.sum()),
        "code_bytes": code_bytes,
        "bits_per_pixel": 8 * code_bytes / before.values.size,
        "ratio_bits_stored": before.bytes_stored / code_bytes,
        "ratio_bits_allocated": before.stored.size * before.header.BitsAllocated / 8 / code_bytes,
        "ratio_content": int(content.sum()) * before.stored.size / before.values.size * before.bits / 8 / code_bytes,
        "times_smaller_than_lossless": min(sizes.values()) / code_bytes,
        "lossless_bytes": min(sizes.values()),
        "times_smaller_than_now": source_bytes / code_bytes,
        "peak_bits": peaks["bits"],
        "peak_range": peaks["range"],
        "padding_changed": int((after.stored != before.stored)[before.padding].sum()),
        "unchanged": "false" if (after.stored != before.stored).any() else "true",
        "became_padding": int((after.padding & ~before.padding).sum()),
    }
    for name, errors in (("frame", error.ravel()), ("content", error[content])):
        figures |= {
            f"bias_{name}": float(errors.mean()),
            f"rmse_{name}": float(np.sqrt(np.mean(errors**2))),
            f"mean_absolute_{name}": float(np.abs(errors).mean()),
            f"max_{name}": float(np.abs(errors).max()),
            f"p999_{name}": float(np.percentile(np.abs(errors), 99.9)),
        }
    for (peak, value), (name, suffix) in itertools.product(peaks.items(), (("frame", ""), ("content", "_content"))):
        rmse = error.ravel() if name == "frame" else error[content]
        figures[f"psnr_peak_{peak}{suffix}_db"] = 20 * math.log10(value / math.sqrt(np.mean(rmse**2)))
    if before.is_colour:
        of_channels = after.stored.astype(float) - before.stored
        figures["rmse_channels"] = float(np.sqrt(np.mean(of_channels**2)))
        figures["max_channels"] = float(np.abs(of_channels).max())
        figures |= places.colour_difference(before.stored, after.stored, content)
    return (
        figures
        | places.place_of_largest(np.abs(error), content, "max_content")
        | places.worst_patches(error, content, {each.label: each.coverage > 0 for each in drawn.values()})
        | places.worst_windows(error, content, before.spacing_mm)
        | places.edge_band(error, content, before.padding)
        | places.noise(before.values, after.values, content, before.step)
    )


def measure_window(before: Image, after: Image, row: dict[str, str]) -> tuple[Figures, Array]:
    """Columns of windows.csv for the window that a row names by centre, width and function, and the map of SSIM.

    The map is not-a-number where the 11x11 window does not lie wholly in the frame.
    """
    centre, width = float(row["centre"]), float(row["width"])
    if row["function"] == "LINEAR":  # PS3.3 C.11.2.1.2.1
        centre, width = centre - 0.5, width - 1
    inverted = before.header.PhotometricInterpretation == "MONOCHROME1"
    shown = [np.clip(((each.values - centre) / width + 0.5) * 255, 0, 255) for each in (before, after)]
    shown = [255 - each if inverted else each for each in shown]
    clipped = (before.values <= centre - width / 2) | (before.values > centre + width / 2)
    content = content_of(before)[1]
    ssim = skimage.metrics.structural_similarity(
        *shown, data_range=255, gaussian_weights=True, sigma=1.5, use_sample_covariance=False, full=True
    )[1]
    valid = np.zeros(ssim.shape, bool)
    valid[SSIM_MARGIN:-SSIM_MARGIN, SSIM_MARGIN:-SSIM_MARGIN] = True
    domain = content & ~clipped & valid
    scores = ssim[domain]
    change = np.abs(shown[1] - shown[0])[content]
    figures: Figures = _window_expected(before, content) | {
        "share_clipped_percent": 100 * float(clipped[content].mean()),
        "pixels": int(scores.size),
        "ssim": float(scores.mean()),
        "ssim_p05": float(np.percentile(scores, 5)),
        "ssim_lowest": float(scores.min()),
        "changed_5_levels_percent": 100 * float((change >= 5 - 1e-9).mean()),
        "max_levels": float(change.max()),
    }
    figures |= places.place_of_largest(-ssim, domain, "ssim_lowest")
    return figures, np.where(valid, ssim, np.nan)


def _window_expected(before: Image, content: Array) -> Figures:
    """The window of the file, else the levels of colour, else the range of content (CT without one has others)."""
    if "WindowCenter" in before.header:
        centre, width = float(before.header.WindowCenter), float(before.header.WindowWidth)
        return {"window_source": "file", "function": "LINEAR", "centre": centre, "width": width}
    low, high = (0, (1 << before.bits) - 1) if before.is_colour else np.quantile(before.values[content], (0, 1))
    centre, width = float(low + high) / 2, float(high - low)
    return {"window_source": "default", "function": "LINEAR_EXACT", "centre": centre, "width": width}


def measure_regions(
    before: Image, after: Image, drawn: dict[str, Drawn], ssim: Array, window: str
) -> dict[str, Figures]:
    """Name -> columns of regions.csv, with the map of SSIM at the first window."""
    found = {}
    pixel_mm2 = math.prod(before.spacing_mm) if before.spacing_mm else None
    for name, region in drawn.items():
        background = drawn.get(region.background)
        figures = measure_region(before.values, after.values, before.padding, region, background, pixel_mm2)
        for peak, value in peaks_of(before).items():
            rmse = float(figures["rmse"] or 0)
            figures[f"psnr_peak_{peak}_db"] = 20 * math.log10(value / rmse) if rmse else None
        figures |= {"ssim": float(np.nanmean(ssim[region.centres & ~before.padding])), "ssim_window": window}
        found[name] = figures
    return found


def compare(
    dossier: Path, originals: list[Path], delivered: list[Path], regions: Path | None = None
) -> Iterator[Difference]:
    """Yield each figure of the dossier's JPEG 2000 candidates and delivered copies beside the one computed here."""
    tables = {name: _read_rows(dossier / f"{name}.csv") for name in ("measures", "windows", "regions")}
    befores = {image.values.shape: (image, bytes_of(path)) for path in originals for image in [read_image(path)]}
    copies = {image.values.shape: (image, bytes_of(path)) for path in delivered for image in [read_image(path)]}
    drawn = {shape: read_regions(regions, shape) if regions else {} for shape in befores}
    for row in tables["measures"]:
        if row["codec"] not in ("jpeg2000", "delivered") or row["role"] not in ("candidate", "delivered"):
            continue
        shape = int(row["rows"]), int(row["columns"])
        before, source_bytes = befores[shape]
        name = f"{shape[0]}x{shape[1]} {row['candidate']}"
        if row["role"] == "delivered":
            after, code_bytes = copies[shape]
        else:
            code, after = recompress(before, float(row["ratio_asked"]))
            code_bytes = len(code)
            yield Difference("measures", name, "code_crc32", row["code_crc32"], zlib.crc32(code))
        yield from _beside("measures", name, row, measure(before, after, code_bytes, source_bytes, drawn[shape]))
        of_windows = [(window, *measure_window(before, after, window)) for window in _of_row(tables["windows"], row)]
        for window, shown, _ in of_windows:
            yield from _beside("windows", f"{name}, {window['window']}", window, shown)
        first, _, ssim = of_windows[0]
        computed = measure_regions(before, after, drawn[shape], ssim, first["window"])
        recorded = {region["region"]: region for region in _of_row(tables["regions"], row)}
        yield Difference("regions", name, "region", " ".join(recorded), " ".join(computed))
        for region, figures in computed.items():
            yield from _beside("regions", f"{name}, {region}", recorded[region], figures)


def _of_row(table: list[dict[str, str]], row: dict[str, str]) -> list[dict[str, str]]:
    """Rows of another table on the same frame and candidate."""
    key = operator.itemgetter("instance", "candidate")
    return [each for each in table if key(each) == key(row)]


def _beside(table: str, name: str, row: dict[str, str], figures: Figures) -> Iterator[Difference]:
    return (Difference(table, name, column, row[column], figure) for column, figure in figures.items())


def _read_rows(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def main(arguments: list[str]) -> int:
    """Compare as the command line asks; 1 where a figure lies further off than the bound."""
    parser = argparse.ArgumentParser()
    parser.add_argument("dossier", type=Path)
    parser.add_argument("originals", type=Path, nargs="+")
    parser.add_argument("--delivered", type=Path, nargs="*", default=[])
    parser.add_argument("--regions", type=Path)
    asked = parser.parse_args(arguments)
    found = list(compare(asked.dossier, asked.originals, asked.delivered, asked.regions))
    for each in found:
        sys.stdout.write(f"{each.relative:9.2e}  {each.row}: {each.column} {each.recorded} / {each.computed!r}\n")
    worst = max((each.relative for each in found), default=math.inf)
    sys.stdout.write(f"{len(found)} figures, largest relative difference {worst:.2e}\n")
    return int(not found or not all(each.agrees for each in found))


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
