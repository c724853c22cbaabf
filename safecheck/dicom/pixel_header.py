"""What the header says about samples, checked against itself before one of them is read."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from pydicom.dataset import Dataset

from safecheck.dicom.elements import term, whole, whole_number
from safecheck.errors import InputRefused
from safecheck.frames import PixelFormat

__all__ = ["MOST_PIXELS", "PixelHeader", "read_pixel_header"]

MOST_PIXELS = 1 << 28
"""Rows times Columns beyond this are refused before anything is decoded: 16384 x 16384, many times any detector's."""

_GREY = ("MONOCHROME1", "MONOCHROME2")
_COLOUR = ("RGB", "YBR_FULL", "YBR_FULL_422", "YBR_RCT", "YBR_ICT", "XYB")


@dataclass(frozen=True, slots=True)
class PixelHeader:
    """The elements of the Image Pixel Module (PS3.3 C.7.6.3) that the pixel path needs; they agree with each other."""

    rows: int
    columns: int
    channels: int
    """Samples per Pixel: 1 or 3."""
    bits_allocated: int
    """8 or 16."""
    bits_stored: int
    high_bit: int
    """Place of the most significant stored bit, from 0."""
    signed: bool
    photometric: str
    planes: bool
    """Planar Configuration 1: all of one channel, then the next."""
    frames: int
    overlay_bits: frozenset[int]
    """Bit places of the samples in which overlay planes are declared to lie."""

    @property
    def frame_bytes(self) -> int:
        """Bytes of one uncompressed frame."""
        samples = self.rows * self.columns * self.channels
        if self.photometric == "YBR_FULL_422":
            samples = self.rows * self.columns * 2
        return samples * self.bits_allocated // 8

    @property
    def shape(self) -> tuple[int, ...]:
        """(rows, columns) or (rows, columns, 3)."""
        return (self.rows, self.columns) if self.channels == 1 else (self.rows, self.columns, self.channels)

    @property
    def container(self) -> np.dtype[np.unsignedinteger]:
        """Type of a sample's allocated bits, before the sign is read."""
        return np.dtype(f"u{self.bits_allocated // 8}")

    @property
    def format(self) -> PixelFormat:
        """Format of the raster that comes out, colour brought to RGB."""
        if self.photometric == "MONOCHROME1":
            return PixelFormat(self.bits_allocated, self.bits_stored, self.signed, "MONOCHROME1")
        if self.photometric == "MONOCHROME2":
            return PixelFormat(self.bits_allocated, self.bits_stored, self.signed, "MONOCHROME2")
        return PixelFormat(self.bits_allocated, self.bits_stored, self.signed, "RGB")


def read_pixel_header(dataset: Dataset) -> PixelHeader:
    """Read and check the Image Pixel Module.

    Raises
    ------
    InputRefused
        'header', 'bits', 'sign', 'photometric', 'palette' or 'too-large'.
    """
    photometric, channels = _photometric(dataset)
    allocated, stored, high_bit = _bits(dataset)
    rows, columns = whole_number(dataset, "Rows"), whole_number(dataset, "Columns")
    frames = whole_number(dataset, "NumberOfFrames", missing=1)
    if min(rows, columns, frames) < 1:
        raise InputRefused("header", "Rows, Columns or Number of Frames is below 1")
    if rows * columns > MOST_PIXELS:
        raise InputRefused("too-large", f"a frame of {rows} x {columns} pixels, at most {MOST_PIXELS} expected")
    if photometric == "YBR_FULL_422" and columns % 2:
        raise InputRefused("photometric", "YBR_FULL_422 with an odd number of columns")
    return PixelHeader(
        rows=rows,
        columns=columns,
        channels=channels,
        bits_allocated=allocated,
        bits_stored=stored,
        high_bit=high_bit,
        signed=_signed(dataset, channels),
        photometric=photometric,
        planes=_planes(dataset, channels),
        frames=frames,
        overlay_bits=_overlay_bits(dataset, allocated),
    )


def _photometric(dataset: Dataset) -> tuple[str, int]:
    photometric = term(dataset, "PhotometricInterpretation")
    channels = whole_number(dataset, "SamplesPerPixel")
    if not photometric:
        raise InputRefused("header", "PhotometricInterpretation is missing")
    if photometric == "PALETTE COLOR":
        raise InputRefused("palette", "")
    if photometric not in _GREY + _COLOUR:
        raise InputRefused(
            "photometric", "expected MONOCHROME1, MONOCHROME2, RGB, YBR_FULL, YBR_FULL_422, YBR_RCT or YBR_ICT"
        )
    if channels != (1 if photometric in _GREY else 3):
        raise InputRefused("photometric", f"{photometric} with {channels} samples per pixel")
    return photometric, channels


def _bits(dataset: Dataset) -> tuple[int, int, int]:
    if "PixelData" not in dataset and ("FloatPixelData" in dataset or "DoubleFloatPixelData" in dataset):
        raise InputRefused("bits", "samples are floating point")
    allocated = whole_number(dataset, "BitsAllocated")
    stored = whole_number(dataset, "BitsStored")
    high_bit = whole_number(dataset, "HighBit")
    if allocated not in (8, 16):
        raise InputRefused("bits", f"{allocated} bits allocated, expected 8 or 16")
    if not 1 <= stored <= allocated:
        raise InputRefused("bits", f"{stored} bits stored in {allocated} allocated")
    if not stored - 1 <= high_bit < allocated:
        raise InputRefused("bits", f"high bit {high_bit} with {stored} bits stored in {allocated} allocated")
    return allocated, stored, high_bit


def _signed(dataset: Dataset, channels: int) -> bool:
    representation = whole_number(dataset, "PixelRepresentation")
    if representation not in (0, 1):
        raise InputRefused("header", "PixelRepresentation is neither 0 nor 1")
    if representation == 1 and channels == 3:
        raise InputRefused("sign", "colour samples are declared signed")
    return representation == 1


def _planes(dataset: Dataset, channels: int) -> bool:
    if channels == 1:
        return False
    planar = whole_number(dataset, "PlanarConfiguration")
    if planar not in (0, 1):
        raise InputRefused("header", "PlanarConfiguration is neither 0 nor 1")
    return planar == 1


def _overlay_bits(dataset: Dataset, allocated: int) -> frozenset[int]:
    """Bit places of overlay planes without data of their own (PS3.3 C.9.2, retired: planes inside the samples)."""
    found = set()
    for group in range(0x6000, 0x6020, 2):
        if (group, 0x0102) not in dataset or (group, 0x3000) in dataset:
            continue
        # A malformed number is None, and its plane masks nothing.
        allocated_of_plane, position = (whole(dataset, group << 16 | element) for element in (0x0100, 0x0102))
        if allocated_of_plane == allocated and position is not None and 0 <= position < allocated:
            found.add(position)
    return frozenset(found)
