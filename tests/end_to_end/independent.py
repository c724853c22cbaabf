"""Figures of a dossier computed again from the DICOM files, with other people's libraries and nothing of the package.

    python tests/end_to_end/independent.py DOSSIER ORIGINAL... [--delivered COPY...]

says for each figure of measures.csv and windows.csv how far it lies from the one computed here. Files are told apart
by their rows and columns, since the tables hold no names.

Decoding: pydicom with its own plug-ins. Encoding: OpenJPEG and CharLS by way of pylibjpeg-openjpeg and imagecodecs.
SSIM: scikit-image. The rest: the definitions written out in NumPy and SciPy.
"""

from __future__ import annotations

import csv
import functools
import itertools
import math
import sys
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import imagecodecs
import numpy as np
import numpy.typing as npt
import openjpeg.utils
import scipy.ndimage
import skimage.metrics
from pydicom import Dataset, dcmread
from pydicom.encaps import generate_frames
from pydicom.pixels.utils import pixel_array

__all__ = ["Difference", "Image", "compare", "read_image", "recompress"]

Array = npt.NDArray[Any]
Figures = dict[str, float | int | str]
"""Column -> what it should hold."""
SSIM_MARGIN = 5
"""Half of the 11x11 window of SSIM, which must lie wholly in the frame."""


@dataclass(frozen=True, eq=False)
class Image:
    """First frame of a DICOM file."""

    header: Dataset
    stored: Array
    values: Array
    """In the modality's unit; luma for colour."""
    padding: Array

    @property
    def bits(self) -> int:
        return int(self.header.BitsStored)

    @property
    def signed(self) -> bool:
        return bool(self.header.PixelRepresentation)

    @property
    def is_colour(self) -> bool:
        return self.stored.ndim == 3

    @property
    def bytes_stored(self) -> float:
        return self.stored.size * self.bits / 8


@dataclass(frozen=True)
class Difference:
    """One figure of the table beside the one computed here."""

    row: str
    column: str
    recorded: str
    computed: float | int | str

    @property
    def relative(self) -> float:
        """0 where equal; infinite where the table holds nothing. Below 1e-3 the difference counts, not its share."""
        if isinstance(self.computed, str):
            return 0.0 if self.computed == self.recorded else math.inf
        recorded = float(self.recorded or "inf")
        return 0.0 if recorded == self.computed else abs(recorded - self.computed) / max(abs(self.computed), 1e-3)


def read_image(path: Path) -> Image:
    """Read header and first frame."""
    header = dcmread(path, stop_before_pixels=True)
    stored = pixel_array(path, index=0, raw=True)
    return with_samples(header, stored)


def with_samples(header: Dataset, stored: Array) -> Image:
    """The image that these stored values make under a header."""
    if stored.ndim == 3:
        values = stored.astype(float) @ [0.299, 0.587, 0.114]  # ITU-R BT.601
    else:
        slope, intercept = float(header.get("RescaleSlope", 1)), float(header.get("RescaleIntercept", 0))
        values = stored * slope + intercept
    padding = np.zeros(stored.shape[:2], bool)
    if "PixelPaddingValue" in header:
        padding = stored == int(header.PixelPaddingValue)
    return Image(header, stored, values, padding)


def recompress(image: Image, ratio: float) -> tuple[bytes, Image]:
    """JPEG 2000 9/7 at a ratio on the bits-stored basis, by OpenJPEG told the bits stored."""
    code = openjpeg.utils.encode_array(
        image.stored,
        bits_stored=image.bits,
        photometric_interpretation=1 if image.is_colour else 0,
        compression_ratios=[ratio],
    )
    decoded = openjpeg.utils.decode(code, 0)
    return code, with_samples(image.header, decoded.reshape(image.stored.shape))


@functools.cache
def reversible_sizes(image: Image) -> dict[str, int]:
    """Bytes of JPEG-LS and of JPEG 2000 5/3."""
    unsigned = image.stored.astype(np.int64) + (1 << (image.bits - 1)) * image.signed
    narrow = f"u{1 if image.bits <= 8 else 2}"
    jpegls = imagecodecs.jpegls_encode(unsigned.astype(narrow), level=0)
    jpeg2000 = imagecodecs.jpeg2k_encode(
        image.stored, codecformat="j2k", bitspersample=image.bits, reversible=True, mct=image.is_colour
    )
    return {"jpegls-reversible": len(jpegls), "jpeg2000-reversible": len(jpeg2000)}


@functools.cache
def content_of(image: Image) -> tuple[str, Array]:
    """Content by the rule of the modality, with the rule's name."""
    if image.header.Modality == "CT":
        return "ct-air-1", ~(image.padding | _surrounding_air(image.values, image.padding))
    if image.header.Modality == "MR":
        return "mr-background-1", ~(image.padding | _background(image.values, image.padding))
    return "padding-only-1", ~image.padding


def _connected_to_outside(low: Array, padding: Array) -> Iterator[Array]:
    """Yield the 4-connected areas of low values that touch the frame's rim or padding."""
    areas, _ = scipy.ndimage.label(low & ~padding)
    rim = scipy.ndimage.binary_dilation(padding)
    rim[0], rim[-1], rim[:, 0], rim[:, -1] = True, True, True, True
    for number in np.unique(areas[rim]):
        if number:
            yield areas == number


def _surrounding_air(values: Array, padding: Array) -> Array:
    """Areas below -500 HU that touch the outside and whose mean is below -900 HU."""
    air = np.zeros(values.shape, bool)
    for area in _connected_to_outside(values < -500, padding):
        if values[area].mean() < -900:
            air |= area
    return air


def _background(values: Array, padding: Array) -> Array:
    """What lies around the body in a magnitude image: low after a mean of 3x3, and connected to the outside."""
    least = values.min()
    filled = np.zeros(values.shape, bool)
    for area in _connected_to_outside(values == least, padding):
        filled |= area
    outside = filled | padding
    width = max(4, min(values.shape) // 32)
    near = scipy.ndimage.binary_dilation(outside, np.ones((2 * width + 1, 2 * width + 1)))
    near[:width], near[-width:], near[:, :width], near[:, -width:] = True, True, True, True
    # Of Rayleigh noise a quarter lies below sigma * sqrt(-2 ln 0.75).
    level = 2.5 * np.percentile(values[near & ~outside], 25) / math.sqrt(-2 * math.log(0.75))
    if level > 0.25 * np.percentile(values[~outside], 99):
        if not filled.any():
            raise ValueError("no background in this frame")
        level = least
    smooth = scipy.ndimage.uniform_filter(values, 3, mode="nearest")
    background = np.zeros(values.shape, bool)
    for area in _connected_to_outside((smooth <= max(level, least)) | (values == least), padding):
        background |= area
    return background


def measure(before: Image, after: Image, code_bytes: int, source_bytes: int) -> Figures:
    """Columns of measures.csv."""
    error = after.values - before.values
    rule, content = content_of(before)
    peak_bits = float((1 << before.bits) - 1) * abs(float(before.header.get("RescaleSlope", 1)))
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
        "peak_bits": peak_bits,
        "peak_range": float(np.ptp(before.values[content])),
        "padding_changed": int((after.stored != before.stored)[before.padding].sum()),
    }
    for name, errors in (("frame", error.ravel()), ("content", error[content])):
        figures |= {
            f"bias_{name}": float(errors.mean()),
            f"rmse_{name}": float(np.sqrt(np.mean(errors**2))),
            f"mean_absolute_{name}": float(np.abs(errors).mean()),
            f"max_{name}": float(np.abs(errors).max()),
            f"p999_{name}": float(np.percentile(np.abs(errors), 99.9)),
        }
    for peak in ("bits", "range"):
        for name, suffix in (("frame", ""), ("content", "_content")):
            ratio = float(figures[f"peak_{peak}"]) / float(figures[f"rmse_{name}"])
            figures[f"psnr_peak_{peak}{suffix}_db"] = 20 * math.log10(ratio)
    if before.is_colour:
        of_channels = after.stored.astype(float) - before.stored
        figures["rmse_channels"] = float(np.sqrt(np.mean(of_channels**2)))
        figures["max_channels"] = float(np.abs(of_channels).max())
    return figures | _worst_patch(error, content)


def _worst_patch(error: Array, content: Array) -> Figures:
    """Largest RMSE over content of the complete 8x8 patches from (0, 0) with half content or more."""
    rows, columns = (length // 8 * 8 for length in error.shape)
    patches = (rows // 8, 8, columns // 8, 8)
    inside = content[:rows, :columns]
    counts = inside.reshape(patches).sum(axis=(1, 3))
    sums = np.where(inside, error[:rows, :columns] ** 2, 0).reshape(patches).sum(axis=(1, 3))
    means = np.where(counts >= 32, sums / np.maximum(counts, 1), -1)
    return {"worst_patch_rmse": float(np.sqrt(means.max()))}


def measure_window(before: Image, after: Image, row: dict[str, str]) -> Figures:
    """Columns of windows.csv for the window that a row names by centre, width and function."""
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
    scores = ssim[content & ~clipped & valid]
    change = np.abs(shown[1] - shown[0])[content]
    return {
        "share_clipped_percent": 100 * float(clipped[content].mean()),
        "pixels": int(scores.size),
        "ssim": float(scores.mean()),
        "ssim_p05": float(np.percentile(scores, 5)),
        "ssim_lowest": float(scores.min()),
        "changed_5_levels_percent": 100 * float((change >= 5 - 1e-9).mean()),
        "max_levels": float(change.max()),
    }


def compare(dossier: Path, originals: list[Path], delivered: list[Path]) -> Iterator[Difference]:
    """Yield each figure of the dossier's JPEG 2000 candidates and delivered copies beside the one computed here."""
    tables = {name: _read_rows(dossier / f"{name}.csv") for name in ("measures", "windows")}
    befores = {image.values.shape: (image, _bytes_of(path)) for path in originals for image in [read_image(path)]}
    copies = {image.values.shape: (image, _bytes_of(path)) for path in delivered for image in [read_image(path)]}
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
            yield Difference(name, "code_crc32", row["code_crc32"], zlib.crc32(code))
        figures = measure(before, after, code_bytes, source_bytes)
        yield from (Difference(name, column, row[column], figure) for column, figure in figures.items())
        for window in tables["windows"]:
            if (window["instance"], window["candidate"]) == (row["instance"], row["candidate"]):
                shown = measure_window(before, after, window)
                label = f"{name}, {window['window']}"
                yield from (Difference(label, column, window[column], figure) for column, figure in shown.items())


def _read_rows(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def _bytes_of(path: Path) -> int:
    """Bytes of the first frame as they lie in the file: of a code stream up to its end marker FFD9."""
    header = dcmread(path)
    if not header.file_meta.TransferSyntaxUID.is_compressed:
        return int(header.Rows * header.Columns * header.SamplesPerPixel * header.BitsAllocated // 8)
    code = next(generate_frames(header.PixelData, number_of_frames=1))
    return code.rindex(b"\xff\xd9") + 2


def main(arguments: list[str]) -> int:
    """Compare as the command line asks; 1 where a figure lies further than 1e-9 off."""
    parts = [
        list(part) for is_mark, part in itertools.groupby(arguments, lambda each: each == "--delivered") if not is_mark
    ]
    dossier, *originals = map(Path, parts[0])
    found = list(compare(dossier, originals, [Path(each) for each in parts[1]] if len(parts) > 1 else []))
    for each in found:
        sys.stdout.write(f"{each.relative:9.2e}  {each.row}: {each.column} {each.recorded} / {each.computed!r}\n")
    worst = max((each.relative for each in found), default=math.inf)
    sys.stdout.write(f"{len(found)} figures, largest relative difference {worst:.2e}\n")
    return int(worst > 1e-9)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
