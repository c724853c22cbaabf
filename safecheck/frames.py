"""The nouns: a frame, what it is made of, where it comes from, and what a ratio counts as the size before.

Arrays are indexed (row, column) with (0, 0) the first pixel; a pixel centre lies on whole numbers. Geometry is in
patient millimetres (DICOM LPS).
"""

from __future__ import annotations

import enum
from dataclasses import dataclass, field
from typing import Any, Literal, TypeAlias

import numpy as np
import numpy.typing as npt

__all__ = [
    "Display",
    "DisplayTable",
    "DisplayWindow",
    "Frame",
    "FrameKey",
    "Geometry",
    "LossHistory",
    "Mask",
    "ModalityTable",
    "ModalityTransform",
    "Origin",
    "PixelFormat",
    "Raster",
    "Rescale",
    "Samples",
    "SizeBasis",
    "Values",
    "luma",
]

Samples: TypeAlias = npt.NDArray[np.integer[Any]]
"""Stored values as read: (rows, columns) or (rows, columns, 3)."""
Values: TypeAlias = npt.NDArray[np.float64]
"""Values in a frame's unit: (rows, columns)."""
Mask: TypeAlias = npt.NDArray[np.bool_]
"""(rows, columns); True where a pixel counts."""


def _frozen(array: npt.NDArray[Any]) -> npt.NDArray[Any]:
    """Return the array read-only and C-contiguous, without copying one that already is."""
    array = np.ascontiguousarray(array)
    if array.flags.writeable:
        array = array.view()
        array.flags.writeable = False
    return array


class SizeBasis(enum.StrEnum):
    """What a ratio counts as the size before. The same code has another ratio on each."""

    BITS_STORED = "bits-stored"
    """pixels x channels x bits stored / 8."""
    BITS_ALLOCATED = "bits-allocated"
    """pixels x channels x bits allocated / 8."""
    CONTENT = "content"
    """content pixels only x channels x bits stored / 8."""
    LOSSLESS = "lossless"
    """bytes of the smallest reversible code."""
    NOW = "now"
    """bytes of the frame as it lies in the archive."""


@dataclass(frozen=True, slots=True)
class PixelFormat:
    """How stored values are laid out, after photometric conversion to what is recompressed."""

    bits_allocated: int
    """8 or 16."""
    bits_stored: int
    """1 to 16, at most `bits_allocated`."""
    signed: bool
    """Two's complement samples."""
    photometric: Literal["MONOCHROME1", "MONOCHROME2", "RGB"]
    """MONOCHROME1 shows low values bright. YBR sources are brought to RGB by the decoder."""

    def __post_init__(self) -> None:
        """Check ranges."""
        if self.bits_allocated not in (8, 16):
            raise ValueError(f"bits_allocated is {self.bits_allocated}, expected 8 or 16")
        if not 1 <= self.bits_stored <= self.bits_allocated:
            raise ValueError(f"bits_stored is {self.bits_stored}, expected 1 to {self.bits_allocated}")

    @property
    def channels(self) -> int:
        """1 for grey, 3 for colour."""
        return 3 if self.photometric == "RGB" else 1

    @property
    def lowest(self) -> int:
        """Least stored value the format can hold."""
        return -(1 << (self.bits_stored - 1)) if self.signed else 0

    @property
    def highest(self) -> int:
        """Largest stored value the format can hold."""
        return (1 << (self.bits_stored - (1 if self.signed else 0))) - 1

    @property
    def dtype(self) -> np.dtype[np.integer[Any]]:
        """Sample type in memory: the sign as declared, 8 or 16 bits as allocated."""
        return np.dtype(f"{'i' if self.signed else 'u'}{self.bits_allocated // 8}")


@dataclass(frozen=True, slots=True, eq=False)
class Raster:
    """What a codec sees of a frame: samples, their format, and which pixels are padding."""

    samples: Samples
    """(rows, columns) or (rows, columns, 3), dtype `format.dtype`, every value within the format's range."""
    format: PixelFormat
    padding: Mask | None = None
    """(rows, columns), True where a pixel holds padding; None where the frame has none."""

    def __post_init__(self) -> None:
        """Check shapes and types; freeze the arrays."""
        shape = self.samples.shape
        expected = 2 if self.format.channels == 1 else 3
        if len(shape) != expected or min(shape) < 1 or (expected == 3 and shape[2] != 3):
            raise ValueError(f"samples of shape {shape} do not fit {self.format.photometric}")
        if self.samples.dtype != self.format.dtype:
            raise ValueError(f"samples are {self.samples.dtype}, expected {self.format.dtype}")
        object.__setattr__(self, "samples", _frozen(self.samples))
        if self.padding is not None:
            if self.padding.shape != shape[:2] or self.padding.dtype != np.bool_:
                raise ValueError("padding is a boolean mask of the frame's rows and columns")
            padding = _frozen(self.padding) if self.padding.any() else None
            object.__setattr__(self, "padding", padding)

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.samples.shape[0], self.samples.shape[1]

    @property
    def pixels(self) -> int:
        """Rows times columns."""
        return int(self.samples.shape[0] * self.samples.shape[1])

    def size_bytes(self, basis: SizeBasis) -> float:
        """Bytes before recompression on the two bases that depend on the raster alone.

        Raises
        ------
        ValueError
            For a basis that needs more than the raster.
        """
        if basis is SizeBasis.BITS_STORED:
            return self.pixels * self.format.channels * self.format.bits_stored / 8
        if basis is SizeBasis.BITS_ALLOCATED:
            return self.pixels * self.format.channels * self.format.bits_allocated / 8
        raise ValueError(f"the size on basis {basis} is not a property of the raster")


@dataclass(frozen=True, slots=True)
class Rescale:
    """Linear modality transform: value = stored * slope + intercept."""

    slope: float = 1.0
    """Not zero; may be negative."""
    intercept: float = 0.0

    def apply(self, samples: Samples) -> Values:
        """(rows, columns) stored -> (rows, columns) in the frame's unit."""
        return samples.astype(np.float64) * self.slope + self.intercept


@dataclass(frozen=True, slots=True, eq=False)
class ModalityTable:
    """Modality LUT (PS3.3 C.11.1): inputs below the first mapped take the first entry, above the last the last."""

    first: int
    """Stored value that the first entry stands for."""
    entries: npt.NDArray[np.float64]

    def apply(self, samples: Samples) -> Values:
        """(rows, columns) stored -> (rows, columns) in the frame's unit."""
        index = np.clip(samples.astype(np.int64) - self.first, 0, len(self.entries) - 1)
        return self.entries[index]


ModalityTransform: TypeAlias = Rescale | ModalityTable


@dataclass(frozen=True, slots=True)
class DisplayWindow:
    """A VOI window (PS3.3 C.11.2) on values in the frame's unit."""

    label: str
    """How outputs name it; never free text of a file."""
    centre: float
    width: float
    """At least 1 for LINEAR, above 0 for LINEAR_EXACT and SIGMOID."""
    function: Literal["LINEAR", "LINEAR_EXACT", "SIGMOID"] = "LINEAR"
    source: Literal["file", "plan", "default"] = "file"

    def __post_init__(self) -> None:
        """Check the width."""
        if not (self.width >= 1 if self.function == "LINEAR" else self.width > 0):
            raise ValueError(f"a {self.function} window cannot have the width {self.width}")


@dataclass(frozen=True, slots=True, eq=False)
class DisplayTable:
    """A VOI LUT (PS3.3 C.11.2) on values in the frame's unit, rounded to whole numbers for the look-up."""

    label: str
    first: int
    entries: npt.NDArray[np.float64]
    bits: int
    """Bits of the entries: the display range is 0 to 2**bits - 1."""
    source: Literal["file", "plan", "default"] = "file"


Display: TypeAlias = DisplayWindow | DisplayTable


@dataclass(frozen=True, slots=True)
class Geometry:
    """Where a frame lies in the patient (PS3.3 C.7.6.2)."""

    position_mm: tuple[float, float, float]
    """Centre of the first pixel."""
    along_columns: tuple[float, float, float]
    """Unit vector in which the column index grows (first triple of Image Orientation)."""
    along_rows: tuple[float, float, float]
    """Unit vector in which the row index grows."""
    frame_of_reference: str = ""
    """Keyed pseudonym; '' where the file names none."""


@dataclass(frozen=True, slots=True)
class LossHistory:
    """What is known of irreversible steps before this assessment."""

    lossy: bool
    """Declared in the header, implied by the syntax, or found in the code stream."""
    declared: str = ""
    """(0028,2110) as found: '00', '01' or ''."""
    ratios: tuple[str, ...] = ()
    """(0028,2112) as found."""
    methods: tuple[str, ...] = ()
    """(0028,2114) as found; unknown terms are carried through."""
    evidence: tuple[str, ...] = ()
    """Why it counts as lossy or not, one short sentence each."""


@dataclass(frozen=True, slots=True)
class FrameKey:
    """A place in the input, under pseudonyms."""

    patient: str
    study: str
    series: str
    instance: str
    frame: int
    """1 for the first frame of an instance, as DICOM counts."""
    series_number: int | None = None
    instance_number: int | None = None


@dataclass(frozen=True, slots=True)
class Origin:
    """Where a frame comes from, in words that hold no identifier."""

    modality: str
    """Of the acquisition, e.g. CT."""
    body_part: str
    """A term of the standard's list, 'other', or ''."""
    slice_thickness_class: str
    """'up to 1 mm', 'over 1 to 3 mm', 'over 3 to 5 mm', 'over 5 mm', or ''."""
    kernel: str
    """A known form of kernel name, a keyed short form of any other, or ''."""
    manufacturer: str
    """A known manufacturer, 'other', or ''."""
    source_syntax: str
    """Name of the transfer syntax."""
    source_bytes: int
    """Bytes of this frame as it lies in the file."""
    history: LossHistory
    slice_position_mm: float | None = None
    """Along the normal of the image plane."""
    may_show_text: bool = False
    """Burned-in text is declared or likely: no crop of this frame is ever written."""
    under_18: bool = False
    """The header gives an age, or dates that give one, under 18 years."""
    notes: tuple[str, ...] = ()
    """What preflight noticed and set right, one short sentence each."""

    @property
    def stratum(self) -> str:
        """Images alike for a policy, as one line; unknown parts are said to be unknown."""
        parts = [self.modality or "modality unknown", self.body_part or "body part unknown"]
        if self.modality in ("CT", "MR", "PT"):
            parts.append(self.slice_thickness_class or "thickness unknown")
        if self.modality == "CT":
            parts.append(self.kernel or "kernel unknown")
        if self.history.lossy:
            parts.append("source already lossy")
        return ", ".join(parts)


@dataclass(frozen=True, slots=True, eq=False)
class Frame:
    """One image plane: samples, bits, unit, geometry, display settings."""

    key: FrameKey
    origin: Origin
    raster: Raster
    bits_used: int
    """Bits that the values found really need, at most `raster.format.bits_stored`."""
    unit: str
    """'HU', a declared Rescale Type, 'rescaled, unit unspecified', 'stored value', or 'luma level' for colour."""
    modality_transform: ModalityTransform = field(default_factory=Rescale)
    spacing_mm: tuple[float, float] | None = None
    """(between rows, between columns); None where missing, zero or not in the patient."""
    geometry: Geometry | None = None
    padding_range: tuple[int, int] | None = None
    """Least and largest stored value that the header declares as padding; None where it declares none."""
    displays: tuple[Display, ...] = ()
    """As the file gives them; those of the plan and the defaults are added where they are measured."""

    def values(self, samples: Samples) -> Values:
        """Stored values, of this frame or of its recompressed form, in the frame's unit: (rows, columns).

        Colour gives luma in stored levels (see `luma`); measures of colour difference stand beside it.
        """
        if samples.ndim == 3:
            return luma(samples)
        return self.modality_transform.apply(samples)

    @property
    def stratum(self) -> str:
        """Group of like images: that of the origin, with the unit where it is not the usual one: units never mix."""
        grey = "HU" if self.origin.modality == "CT" else "stored value"
        usual = "luma level" if self.raster.format.channels == 3 else grey
        if self.unit == usual:
            return self.origin.stratum
        unit = "rescaled units" if self.unit.startswith("rescaled") else self.unit
        return f"{self.origin.stratum}, in {unit}"

    @property
    def peak_of_bits(self) -> float:
        """Largest less least value that the stored bits can express, in the frame's unit."""
        ends = np.array([[self.raster.format.lowest, self.raster.format.highest]])
        if self.raster.format.channels == 3:
            return float(self.raster.format.highest - self.raster.format.lowest)
        if isinstance(self.modality_transform, ModalityTable):
            return float(np.ptp(self.modality_transform.entries))
        return float(np.ptp(self.modality_transform.apply(ends)))


def luma(samples: Samples) -> Values:
    """Luma of RGB stored values, in stored levels (ITU-R BT.601: 0.299 R + 0.587 G + 0.114 B).

    Parameters
    ----------
    samples
        (rows, columns, 3).

    Returns
    -------
    numpy.ndarray
        (rows, columns), float64.
    """
    rgb = samples.astype(np.float64)
    return 0.299 * rgb[..., 0] + 0.587 * rgb[..., 1] + 0.114 * rgb[..., 2]
