"""Reading, recompressing and content of an image: other people's libraries and nothing of the package.

Decoding: pydicom with its own plug-ins. Encoding: OpenJPEG by way of pylibjpeg-openjpeg and imagecodecs, CharLS by way
of pyjpegls.
Content: the rules of docs/measures.md written out in NumPy and SciPy.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import imagecodecs
import jpeg_ls
import numpy as np
import openjpeg.utils
import scipy.ndimage
from pydicom import Dataset, dcmread
from pydicom.encaps import generate_frames
from pydicom.pixels.utils import pixel_array

from tests.end_to_end.independent_places import Array

__all__ = ["Image", "bytes_of", "content_of", "read_image", "recompress", "reversible_sizes"]


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

    @property
    def step(self) -> float:
        """One stored step in the image's unit."""
        return abs(float(self.header.get("RescaleSlope", 1)))

    @property
    def spacing_mm(self) -> tuple[float, float] | None:
        rows, columns = map(float, self.header.get("PixelSpacing") or (0, 0))
        return (rows, columns) if rows > 0 and columns > 0 else None


def read_image(path: Path) -> Image:
    """Read header and first frame."""
    header = dcmread(path, stop_before_pixels=True)
    stored = pixel_array(path, index=0, raw=True)
    return with_samples(header, stored)


def with_samples(header: Dataset, stored: Array) -> Image:
    """The image that these stored values make under a header."""
    if stored.ndim == 3:
        red, green, blue = np.moveaxis(stored.astype(float), -1, 0)
        values = 0.299 * red + 0.587 * green + 0.114 * blue  # ITU-R BT.601
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
    samples = unsigned.astype(narrow).tobytes()
    # Colour is interleaved pixel by pixel.
    mode = 2 if image.is_colour else 0
    channels = 3 if image.is_colour else 1
    jpegls = jpeg_ls.encode_buffer(samples, *image.stored.shape[:2], channels, image.bits, interleave_mode=mode)
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


def bytes_of(path: Path) -> int:
    """Bytes of the first frame as they lie in the file: of a code stream up to its end marker FFD9."""
    header = dcmread(path)
    if not header.file_meta.TransferSyntaxUID.is_compressed:
        return int(header.Rows * header.Columns * header.SamplesPerPixel * header.BitsAllocated // 8)
    code = next(generate_frames(header.PixelData, number_of_frames=1))
    return code.rindex(b"\xff\xd9") + 2
