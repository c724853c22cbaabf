"""The rows: what a worker writes and a report reads, and nothing else passes between them.

Each table is one frozen dataclass; its fields are the columns, in order, and carry their unit and their meaning, so the
Parquet schema, the documentation and the types say the same thing. Units that depend on the image are named by the
column ``unit`` of the same row; every other column names its own.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, field
from typing import Any

__all__ = [
    "IMAGE_UNIT",
    "TABLES",
    "ColumnText",
    "FrameResult",
    "InputRow",
    "MeasureRow",
    "RegionRow",
    "TreatedFrame",
    "WindowRow",
    "columns_of",
]

IMAGE_UNIT = "unit of the image"
"""Unit of a column whose figures are in the unit that the row's column `unit` names."""


@dataclass(frozen=True, slots=True)
class ColumnText:
    """What a column holds."""

    name: str
    kind: str
    """'text', 'whole', 'real' or 'truth'; with ' or null' where a value may be absent."""
    unit: str
    meaning: str


def column(unit: str, meaning: str, *, default: Any = dataclasses.MISSING) -> Any:  # noqa: ANN401
    """Declare a column; ``unit`` is '' for names and counts."""
    return field(default=default, metadata={"unit": unit, "meaning": meaning})


def optional(unit: str, meaning: str) -> Any:  # noqa: ANN401
    """Declare a column that is null where it does not apply or was not evaluated."""
    return column(unit, meaning, default=None)


@dataclass(frozen=True, slots=True, kw_only=True)
class TreatedFrame:
    """Columns that name a frame and what was done to it; shared by three tables."""

    patient: str = column("", "Pseudonym of the patient; of the study where the patient is unknown.")
    study: str = column("", "Pseudonym of the study.")
    series: str = column("", "Pseudonym of the series.")
    instance: str = column("", "Pseudonym of the instance.")
    series_number: int | None = optional("", "Series Number as declared.")
    instance_number: int | None = optional("", "Instance Number as declared.")
    frame: int = column("", "Frame number, from 1.")
    stratum: str = column("", "Group of like images.")
    modality: str = column("", "Modality.")
    body_part: str = column("", "Body part: a term of the standard's list, other, or empty.")
    unit: str = column("", "Unit of every column in the unit of the image.")
    role: str = column("", "candidate, bracket, delivered, reversible, repeat, over-compressed or planted.")
    candidate: str = column("", "Name of the candidate or control.")


@dataclass(frozen=True, slots=True, kw_only=True)
class MeasureRow(TreatedFrame):
    """measures.parquet: a row per frame and candidate, delivered copy or control."""

    # What the frame is
    slice_position_mm: float | None = optional("mm", "Position along the normal of the image plane.")
    slice_thickness_class: str = column("", "Class of slice thickness, or empty.")
    kernel: str = column("", "Reconstruction kernel, or a keyed short form of an unusual name, or empty.")
    manufacturer: str = column("", "Manufacturer, other, or empty.")
    rows: int = column("pixels", "Rows of the frame.")
    columns: int = column("pixels", "Columns of the frame.")
    channels: int = column("", "1 for grey, 3 for colour.")
    photometric: str = column("", "Photometric interpretation of the samples recompressed.")
    bits_allocated: int = column("bits", "Bits allocated.")
    bits_stored: int = column("bits", "Bits stored.")
    bits_used: int = column("bits", "Bits that the values found need.")
    signed: bool = column("", "Whether samples are signed.")
    slope: float | None = optional("unit of the image per stored value", "Rescale slope; null where a table is used.")
    content_rule: str = column("", "Rule, with its version, that told content from the rest.")
    content_reason: str = column("", "Why the modality's own rule gave way, or empty.")
    content_pixels: int = column("pixels", "Content pixels.")
    padding_pixels: int = column("pixels", "Padding pixels of the original.")
    source_syntax: str = column("", "Transfer syntax in which the frame lies in the archive.")
    source_bytes: int = column("bytes", "Size of the frame as it lies in the archive.")
    source_lossy: bool = column("", "Whether the source had already been compressed irreversibly.")
    generation: str = column("", "first, or second where the source was already lossy.")
    under_18: bool = column("", "Whether the header gives an age under 18 years.")
    may_show_text: bool = column("", "Whether burned-in text is declared or likely: no crop is ever written.")

    # What was done
    codec: str = column("", "Codec, or delivered.")
    codec_version: str = column("", "Library and version that wrote the code.")
    settings: str = column("", "Settings that wrote the code, as canonical JSON.")
    archive_can_write: bool = column("", "Whether a DICOM transfer syntax exists for the codec.")
    codec_note: str = column("", "What must be known of the codec, e.g. that no archive writes it, or empty.")
    dial: str = column("", "Setting by which the codec's size is set, or empty.", default="")
    dial_value: float | None = optional("", "Value of that setting.")
    code_precision: int | None = optional("bits", "Bits a sample that the code stream declares.")
    sample_offset: int | None = optional("stored values", "Added to each sample before coding.")
    sample_scale: float | None = optional("times", "Factor of each sample, once the offset is added, before coding.")
    clipped_on_reading: bool | None = optional("", "Whether values read beyond the bits stored were clipped.")
    asked: str = column("", "ratio per frame, ratio per series or setting; empty for controls.", default="")
    ratio_asked: float | None = optional("to 1", "Ratio asked for, on the basis named beside it.")
    basis: str = column("", "Basis of the ratio asked for.")
    reached: str = column("", "asked, bracket or why the ratio was not met; setting where none was asked of the frame.")
    encodes: int = column("", "Encodings needed to reach it.")
    code_bytes: int = column("bytes", "Size of the code stream.")
    code_crc32: int | None = optional("", "CRC-32 of the code stream; null for delivered copies.")
    bits_per_pixel: float = column("bits per pixel", "Bits of the code stream per pixel of the frame.")
    ratio_bits_stored: float = column("to 1", "Size on the bits-stored basis over the code.")
    ratio_bits_allocated: float = column("to 1", "Size on the bits-allocated basis over the code.")
    ratio_content: float | None = optional("to 1", "Bits stored of the content alone over the code.")
    lossless_bytes: int | None = optional("bytes", "Smallest reversible code of JPEG-LS and JPEG 2000 5/3.")
    lossless_codec: str = column("", "Codec that wrote it.")
    times_smaller_than_lossless: float | None = optional("times", "That reversible code over this code.")
    times_smaller_than_now: float = column("times", "Bytes as they lie in the archive over this code.")

    # How far values moved: after less before
    bias_frame: float | None = optional(IMAGE_UNIT, "Mean error over all pixels of the frame.")
    rmse_frame: float | None = optional(IMAGE_UNIT, "Root mean square error over all pixels of the frame.")
    mean_absolute_frame: float | None = optional(IMAGE_UNIT, "Mean absolute error over all pixels of the frame.")
    max_frame: float | None = optional(IMAGE_UNIT, "Largest absolute error over all pixels of the frame.")
    p999_frame: float | None = optional(IMAGE_UNIT, "99.9th percentile of the absolute error; from 1,000 pixels on.")
    bias_content: float | None = optional(IMAGE_UNIT, "Mean error over content.")
    rmse_content: float | None = optional(IMAGE_UNIT, "Root mean square error over content.")
    mean_absolute_content: float | None = optional(IMAGE_UNIT, "Mean absolute error over content.")
    max_content: float | None = optional(IMAGE_UNIT, "Largest absolute error in content.")
    max_content_row: int | None = optional("pixels", "Row of that largest error.")
    max_content_column: int | None = optional("pixels", "Column of that largest error.")
    p999_content: float | None = optional(IMAGE_UNIT, "99.9th percentile of it in content; from 1,000 pixels on.")
    peak_bits: float = column(IMAGE_UNIT, "Peak of the first PSNR: the span that the stored bits can express.")
    peak_range: float | None = optional(IMAGE_UNIT, "Peak of the second PSNR: the span of the original's content.")
    psnr_peak_bits_db: float | None = optional(
        "dB", "PSNR over all pixels of the frame, peak peak_bits; null if equal."
    )
    psnr_peak_range_db: float | None = optional("dB", "PSNR over all pixels, peak peak_range; null if equal.")
    psnr_peak_bits_content_db: float | None = optional("dB", "PSNR over content, peak peak_bits; null if equal.")
    psnr_peak_range_content_db: float | None = optional("dB", "PSNR over content, peak peak_range; null if equal.")
    unchanged: bool | None = optional("", "Whether every sample is equal; then PSNR is infinite and stands as null.")

    # Where
    worst_patch_rmse: float | None = optional(IMAGE_UNIT, "Largest RMSE of the 8x8 patches with half content or more.")
    worst_patch_row: int | None = optional("pixels", "First row of that patch.")
    worst_patch_column: int | None = optional("pixels", "First column of that patch.")
    worst_patch_region: str = column("", "Label of a drawn region that touches that patch, or empty.")
    patch_p95_rmse: float | None = optional(IMAGE_UNIT, "95th percentile of the patches' RMSE.")
    patch_median_rmse: float | None = optional(IMAGE_UNIT, "Median of the patches' RMSE.")
    window_mm: float | None = optional("mm", "Side of the larger patch; null without a spacing or if not larger.")
    worst_window_rmse: float | None = optional(IMAGE_UNIT, "Largest RMSE of the larger patches.")
    worst_window_row: int | None = optional("pixels", "First row of that larger patch.")
    worst_window_column: int | None = optional("pixels", "First column of that larger patch.")
    worst_outside_rmse: float | None = optional(IMAGE_UNIT, "Largest RMSE of patches clear of every drawn region.")
    worst_outside_row: int | None = optional("pixels", "First row of that patch.")
    worst_outside_column: int | None = optional("pixels", "First column of that patch.")
    edge_band_rmse: float | None = optional(IMAGE_UNIT, "RMSE in the band on both sides of the content's edge.")
    edge_band_max: float | None = optional(IMAGE_UNIT, "Largest absolute error in that band.")
    edge_band_row: int | None = optional("pixels", "Row of it.")
    edge_band_column: int | None = optional("pixels", "Column of it.")

    # Noise: a quotient by noise never stands alone
    noise_sd: float | None = optional(IMAGE_UNIT, "Noise SD of the original by the local estimator.")
    noise_sd_after: float | None = optional(IMAGE_UNIT, "Noise SD after, at the places chosen in the original.")
    noise_sd_kept_percent: float | None = optional("%", "noise_sd_after over noise_sd.")
    rmse_over_noise: float | None = optional("times", "rmse_content over noise_sd; read beside noise_sd_kept_percent.")

    # Padding
    padding_changed: int = column("pixels", "Padding pixels of the original whose value changed.")
    became_padding: int = column("pixels", "Other pixels whose value now lies in the padding range.")
    outside_flattened_max: float | None = optional(IMAGE_UNIT, "With outside = flatten: largest change made to air.")

    # Colour
    rmse_channels: float | None = optional("stored levels", "Root mean square error of all samples of all channels.")
    max_channels: float | None = optional("stored levels", "Largest absolute error of any sample of any channel.")
    ciede2000_mean: float | None = optional("CIEDE2000", "Mean colour difference over content, sRGB and D65 assumed.")
    ciede2000_p95: float | None = optional("CIEDE2000", "95th percentile of it.")
    ciede2000_max: float | None = optional("CIEDE2000", "Largest of it.")

    # Controls
    control_held: bool | None = optional(
        "", "Whether what was asked was found: of controls, and of a promised largest error."
    )
    control_found: str = column("", "What was found, in words; empty where nothing was asked.", default="")
    planted_size: float | None = optional(IMAGE_UNIT, "Planted control: displacement added to one 8x8 patch.")
    planted_row: int | None = optional("pixels", "Planted control: first row of that patch.")
    planted_column: int | None = optional("pixels", "Planted control: first column of that patch.")


@dataclass(frozen=True, slots=True, kw_only=True)
class WindowRow(TreatedFrame):
    """windows.parquet: a row per frame, candidate and display window."""

    window: str = column("", "Label of the window.")
    window_source: str = column("", "file, plan or default.")
    centre: float | None = optional(IMAGE_UNIT, "Window centre; null for a look-up table.")
    width: float | None = optional(IMAGE_UNIT, "Window width; null for a look-up table.")
    function: str = column("", "LINEAR, LINEAR_EXACT, SIGMOID or TABLE.")
    share_clipped_percent: float | None = optional("% of content", "Content clipped in the original at this window.")
    pixels: int = column("pixels", "Content pixels not clipped in the original, over which SSIM stands.")
    ssim: float | None = optional("1", "Mean SSIM (Wang 2004) of display values 0 to 255 over those pixels.")
    ssim_p05: float | None = optional("1", "5th percentile of its map there.")
    ssim_lowest: float | None = optional("1", "Least value of its map there.")
    ssim_lowest_row: int | None = optional("pixels", "Row of that least value.")
    ssim_lowest_column: int | None = optional("pixels", "Column of it.")
    changed_5_levels_percent: float | None = optional("% of content", "Content changed by 5 or more of 255 levels.")
    max_levels: float | None = optional("display levels of 255", "Largest change of the display value in content.")


@dataclass(frozen=True, slots=True, kw_only=True)
class RegionRow(TreatedFrame):
    """regions.parquet: a row per frame, candidate and region that covers part of it."""

    region: str = column("", "Name of the region in the region file.")
    label: str = column("", "Label that its author gave.")
    region_role: str = column("", "target, background, uniform, edge or other.")
    area_pixels: float = column("pixels", "Exact area of the region on the frame.")
    area_mm2: float | None = optional("mm²", "The same in mm²; null without a spacing.")
    bias: float | None = optional(IMAGE_UNIT, "Mean error, weighted by coverage.")
    rmse: float | None = optional(IMAGE_UNIT, "Root mean square error, weighted by coverage.")
    mean_absolute: float | None = optional(IMAGE_UNIT, "Mean absolute error, weighted by coverage.")
    max: float | None = optional(IMAGE_UNIT, "Largest absolute error of a pixel whose centre is inside.")
    max_row: int | None = optional("pixels", "Row of it.")
    max_column: int | None = optional("pixels", "Column of it.")
    p999: float | None = optional(IMAGE_UNIT, "99.9th percentile of the absolute error; from 1,000 pixels on.")
    psnr_peak_bits_db: float | None = optional("dB", "PSNR over the region, peak as in measures; null if equal.")
    psnr_peak_range_db: float | None = optional("dB", "PSNR over the region, peak as in measures; null if equal.")
    mean_before: float | None = optional(IMAGE_UNIT, "Mean of the original, weighted by coverage.")
    mean_after: float | None = optional(IMAGE_UNIT, "Mean after.")
    sd_before: float | None = optional(IMAGE_UNIT, "Standard deviation of the original, weighted by coverage.")
    sd_after: float | None = optional(IMAGE_UNIT, "Standard deviation after.")
    background: str = column("", "Region used as background for CNR, or empty.")
    contrast_before: float | None = optional(IMAGE_UNIT, "Mean of the region less mean of its background, before.")
    contrast_after: float | None = optional(IMAGE_UNIT, "The same after.")
    cnr_before: float | None = optional("1", "Difference of means over the background's SD, before.")
    cnr_after: float | None = optional("1", "The same after; read beside noise_removed_percent.")
    noise_removed_percent: float | None = optional("%", "Share of the background's SD that is gone.")
    ssim: float | None = optional("1", "Mean SSIM map over pixels whose centre is inside, at the first window.")
    ssim_window: str = column("", "Label of that window.")


@dataclass(frozen=True, slots=True, kw_only=True)
class InputRow:
    """inputs.parquet: a row per input file or archive member."""

    input: str = column("", "Pseudonym of the file.")
    side: str = column("", "original or delivered.")
    status: str = column("", "assessed, excluded or refused.")
    reason: str = column("", "Reason code where not assessed, or empty.")
    detail: str = column("", "What was found, without identifiers.")
    patient: str = column("", "Pseudonym of the patient, or empty.")
    study: str = column("", "Pseudonym of the study, or empty.")
    series: str = column("", "Pseudonym of the series, or empty.")
    instance: str = column("", "Pseudonym of the instance, or empty.")
    series_number: int | None = optional("", "Series Number as declared.")
    instance_number: int | None = optional("", "Instance Number as declared.")
    modality: str = column("", "Modality, or empty.")
    stratum: str = column("", "Group of like images, or empty.")
    object_class: str = column("", "Name of the SOP class, or empty.")
    source_syntax: str = column("", "Transfer syntax, or empty.")
    bytes: int = column("bytes", "Size of the file or member.")
    pixel_bytes: int | None = optional("bytes", "Size of the pixel data as it lies there.")
    frames: int | None = optional("", "Frames declared.")
    frames_assessed: int = column("", "Frames assessed.")
    frames_refused: int = column("", "Frames refused, with the reason of the first in `reason`.")
    rows: int | None = optional("pixels", "Rows.")
    columns: int | None = optional("pixels", "Columns.")
    bits_allocated: int | None = optional("bits", "Bits allocated.")
    bits_stored: int | None = optional("bits", "Bits stored.")
    photometric: str = column("", "Photometric interpretation as declared, or empty.")
    lossy: bool | None = optional("", "Whether already lossy: declared, implied or found.")
    lossy_evidence: str = column("", "Why.")
    lossy_declared: str = column("", "Lossy Image Compression as found, or empty.")
    lossy_ratio: str = column("", "Lossy Image Compression Ratio as found, or empty.")
    lossy_method: str = column("", "Lossy Image Compression Method as found, or empty.")
    derived: bool | None = optional("", "Whether Image Type begins with DERIVED.")
    new_uid: bool | None = optional("", "Delivered: whether the SOP Instance UID differs from the original's.")
    matched: str = column("", "Delivered pairs: how the other side was matched, or unmatched, or empty.")
    pair: str = column("", "Delivered pairs: pseudonym of the other side's file, or empty.")


TABLES: dict[str, type[MeasureRow] | type[RegionRow] | type[WindowRow] | type[InputRow]] = {
    "measures": MeasureRow,
    "regions": RegionRow,
    "windows": WindowRow,
    "inputs": InputRow,
}
"""The tables of a dossier by name."""

_KINDS = {"str": "text", "int": "whole", "float": "real", "bool": "truth"}


def columns_of(row: type[Any]) -> tuple[ColumnText, ...]:
    """Describe the columns of a row class, in order."""
    texts = []
    for item in dataclasses.fields(row):
        parts = str(item.type).split(" | ")
        kind = _KINDS[parts[0]] + (" or null" if "None" in parts else "")
        texts.append(ColumnText(item.name, kind, item.metadata["unit"], item.metadata["meaning"]))
    return tuple(texts)


@dataclass(frozen=True, slots=True)
class FrameResult:
    """All rows that one frame gives."""

    measures: tuple[MeasureRow, ...] = ()
    windows: tuple[WindowRow, ...] = ()
    regions: tuple[RegionRow, ...] = ()
    notes: tuple[str, ...] = ()
    """What was not run on the frame, one sentence each."""
    delivered_differs: str = ""
    """Why a delivered copy was not measured against the frame, or ''."""
