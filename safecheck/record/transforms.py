"""What a transform study finds: the frames studied, a line per figure, pictures; and its table as CSV."""

from __future__ import annotations

import csv
import dataclasses
import io
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np
import numpy.typing as npt

from safecheck.frames import FrameKey

__all__ = [
    "COLUMNS",
    "MEASURES",
    "Finding",
    "Fixed",
    "LeftAside",
    "StudiedFrame",
    "StudyBasis",
    "StudyMeasure",
    "StudyPicture",
    "StudyPictures",
    "TransformStudy",
    "table_bytes",
]

Fixed: TypeAlias = Literal["kept share", "ratio", ""]


@dataclass(frozen=True, slots=True)
class StudyMeasure:
    """A kind of figure."""

    unit: str
    """'' for the unit of the image."""
    meaning: str


MEASURES: dict[str, StudyMeasure] = {
    "rmse": StudyMeasure("", "root mean square of the error over the area"),
    "rmse_over_cosine": StudyMeasure("1", "rmse over that of the cosine transform at the same tile size"),
    "rmse_over_best_size": StudyMeasure("1", "rmse over the least that any tile size gives with the same transform"),
    "kept_coefficients": StudyMeasure("1 per tile", "coefficients that a tile keeps, the constant counted"),
    "kept_share": StudyMeasure("percent", "kept coefficients over all; of a code, over inner tiles"),
    "ratio_bits_stored": StudyMeasure("1", "ratio that the code reached, on the bits-stored basis"),
    "code_bytes": StudyMeasure("bytes", "size of the code"),
    "step": StudyMeasure("stored value", "step of the quantiser"),
    "dropped_part": StudyMeasure("percent", "squared error in coefficients that came back as nothing, over all of it"),
    "rounding_part": StudyMeasure("percent", "squared error in coefficients that came back, over all of it"),
    "rounding_over_law": StudyMeasure("1", "mean squared error of coefficients that came back, over step squared / 12"),
    "gain": StudyMeasure("dB", "arithmetic over geometric mean of the variances of coefficients over inner tiles"),
    "gain_complex": StudyMeasure("dB", "the same for the complex coefficients of the Fourier transform"),
    "gain_model_own": StudyMeasure("dB", "gain for a separable Markov field of the frame's own correlations"),
    "gain_model_own_complex": StudyMeasure("dB", "the same for the complex coefficients"),
    "gain_model_0.95": StudyMeasure("dB", "gain for a separable Markov field of correlation 0.95"),
    "gain_model_0.95_complex": StudyMeasure("dB", "the same for the complex coefficients"),
    "inner_tiles": StudyMeasure("1", "tiles with every pixel in the frame and in its content"),
    "correlation_down": StudyMeasure("1", "correlation of content pixels with the one below"),
    "correlation_across": StudyMeasure("1", "correlation of content pixels with the one to the right"),
}
"""Name -> unit and meaning, in the order of the documents."""


@dataclass(frozen=True, slots=True)
class Finding:
    """One figure."""

    area: str
    """``content``, ``region LABEL`` or ``inner tiles``."""
    transform: str
    """'' where it depends on none."""
    tile_size: int | None
    fixed: Fixed
    """What was held fixed: the share of coefficients kept, or the ratio asked of the code."""
    fixed_at: float | None
    """In percent, or the ratio."""
    measure: str
    """One of `MEASURES`."""
    value: float


@dataclass(frozen=True, slots=True, eq=False)
class StudyPicture:
    """The error of one transform and tile size."""

    transform: str
    tile_size: int
    error: npt.NDArray[np.float64]
    """After less before, in the image's unit."""


@dataclass(frozen=True, slots=True, eq=False)
class StudyPictures:
    """One part of a frame, before and with the errors."""

    first_row: int
    first_column: int
    original: npt.NDArray[np.float64]
    """In the image's unit."""
    low: float
    """Value shown black."""
    high: float
    """Value shown white."""
    kept: tuple[StudyPicture, ...]
    kept_percent: float
    coded: tuple[StudyPicture, ...]
    ratio: float


@dataclass(frozen=True, slots=True, eq=False)
class StudiedFrame:
    """A frame and all that was found of it."""

    key: FrameKey
    modality: str
    stratum: str
    unit: str
    rows: int
    columns: int
    bits_stored: int
    content_rule: str
    content_pixels: int
    may_show_text: bool
    under_18: bool
    source_lossy: bool
    notes: tuple[str, ...]
    findings: tuple[Finding, ...]
    pictures: StudyPictures | None = None


@dataclass(frozen=True, slots=True, eq=False)
class StudyBasis:
    """Functions of a transform along one direction; a tile's are the products of two."""

    transform: str
    functions: npt.NDArray[np.float64]
    """(size, size), a function a row, low frequency first."""


@dataclass(frozen=True, slots=True)
class LeftAside:
    """Inputs or frames that were not studied, for one reason."""

    what: Literal["file", "frame"]
    reason: str
    number: int


@dataclass(frozen=True, slots=True, eq=False)
class TransformStudy:
    """A whole study."""

    frames: tuple[StudiedFrame, ...]
    files: int
    """Files read."""
    series: int
    """Series with files that may be studied."""
    most_frames: int
    """At most so many frames were to be studied."""
    left_aside: tuple[LeftAside, ...]
    codec_version: str
    bases: tuple[StudyBasis, ...] = ()
    """Those to be drawn."""


COLUMNS = (
    *(field.name for field in dataclasses.fields(FrameKey)),
    *("modality", "stratum", "content_rule"),
    *(field.name for field in dataclasses.fields(Finding)),
    "unit",
)
"""Of the table."""


def table_bytes(frames: Sequence[StudiedFrame]) -> bytes:
    """Write every figure as CSV (RFC 4180, UTF-8, a header line, empty for what does not apply)."""
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow(COLUMNS)
    for frame in frames:
        place = (*dataclasses.astuple(frame.key), frame.modality, frame.stratum, frame.content_rule)
        for finding in frame.findings:
            unit = MEASURES[finding.measure].unit or frame.unit
            writer.writerow((*place, *dataclasses.astuple(finding), unit))
    return text.getvalue().encode("utf-8")
