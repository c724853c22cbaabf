"""Copies of a series as an archive might deliver them, and studies that were lossy from the start."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Literal

import numpy as np
import numpy.typing as npt
from pydicom import Dataset, dcmread

from synthetic_studies.ct import ct_body
from synthetic_studies.headers import place_pixels, write_file
from synthetic_studies.identity import Scope
from synthetic_studies.loss import quantise_blocks
from synthetic_studies.truth import PairTruth, Truth

__all__ = ["Manner", "already_lossy", "deliver", "delivered_pair"]

Flag = Literal["01", "00", "missing"]


@dataclass(frozen=True, slots=True)
class Manner:
    """How the copies are declared; the defaults are what the standard asks (PS3.3 C.7.6.1.1.5)."""

    flag: Flag = "01"
    """Lossy Image Compression."""
    ratio: bool = True
    """Lossy Image Compression Ratio and Method are given."""
    derived: bool = True
    """Image Type starts with DERIVED."""
    new_uid: bool = True
    """A new SOP Instance UID."""
    source: bool = True
    """Source Image Sequence points to the original."""
    padding_kept: bool = True
    """Padding comes back as it was."""


_AS_ASKED = Manner()


def deliver(original: Truth, folder: Path, *, step: float, manner: Manner = _AS_ASKED) -> Truth:
    """Write a changed copy of every file of a grey single-frame series.

    Parameters
    ----------
    original
        A series of single-frame grey files.
    folder
        Made when missing.
    step
        Quantiser step of the planted change, in stored values.
    manner
        What the copies' headers declare.

    Returns
    -------
    Truth
        Of the copies; `pairs` holds the planted change of each file, in the series' unit.
    """
    scope = Scope(f"delivered {original.kind}", original.seed, (original.series_uid, step, manner))
    files, uids, pairs, ratios = [], [], [], []
    for index, source in enumerate(original.files):
        header = dcmread(source)
        path = folder / f"copy_{index + 1:04d}.dcm"
        ratio, pair = _change(header, source, path, step, manner)
        _declare(header, ratio, manner, scope.uid("series"), scope.uid("instance", index + 1))
        write_file(path, header)
        files.append(path)
        uids.append(str(header.SOPInstanceUID))
        pairs.append(pair)
        ratios.append(ratio)
    return replace(
        original,
        kind=f"delivered {original.kind}",
        files=tuple(files),
        series_uid=scope.uid("series") if manner.new_uid else original.series_uid,
        instance_uids=tuple(uids),
        lossy_ratio=float(np.mean(ratios)),
        pairs=tuple(pairs),
        properties={**original.properties, "step": step},
    )


def _change(header: Dataset, source: Path, path: Path, step: float, manner: Manner) -> tuple[float, PairTruth]:
    """Quantise the pixels in place; give the estimated ratio and the change."""
    before = header.pixel_array
    padding = before == header.get("PixelPaddingValue", np.iinfo(np.int32).max)
    reach = 1 << (header.BitsStored - header.PixelRepresentation)
    lowest = -reach if header.PixelRepresentation else 0
    after, size_bytes = quantise_blocks(before, step, lowest, reach - 1)
    if manner.padding_kept:
        after[padding] = before[padding]
    place_pixels(header, after)
    ratio = round(before.nbytes / size_bytes, 1)
    return ratio, _compare(source, path, before, after, padding, float(header.get("RescaleSlope", 1)))


def _compare(
    source: Path,
    path: Path,
    before: npt.NDArray[np.integer[Any]],
    after: npt.NDArray[np.integer[Any]],
    padding: npt.NDArray[np.bool_],
    slope: float,
) -> PairTruth:
    change = (after.astype(np.float64) - before.astype(np.float64)) * slope
    inside = change[~padding]
    return PairTruth(
        original=source,
        delivered=path,
        rmse=float(np.sqrt(np.mean(inside**2))),
        bias=float(np.mean(inside)),
        maximum=float(np.abs(inside).max()),
        rmse_frame=float(np.sqrt(np.mean(change**2))),
        padding_changed=int(np.count_nonzero(change[padding])),
    )


def _declare(header: Dataset, ratio: float, manner: Manner, series_uid: str, instance_uid: str) -> None:
    """Write into the header what the manner says."""
    if manner.source:
        header.SourceImageSequence = [_reference(header)]
    if manner.new_uid:
        header.SeriesInstanceUID, header.SOPInstanceUID = series_uid, instance_uid
    if manner.derived and "ImageType" in header:
        header.ImageType = ["DERIVED", *header.ImageType[1:]]
        header.DerivationDescription = f"Irreversible 8x8 cosine quantisation, about {ratio}:1"
        header.DerivationCodeSequence = [_code("113040", "Lossy Compression")]
    if manner.flag == "missing":
        del header.LossyImageCompression
    else:
        header.LossyImageCompression = manner.flag
    if manner.ratio:
        header.LossyImageCompressionRatio = str(ratio)
        header.LossyImageCompressionMethod = "ISO_10918_1"


def _code(value: str, meaning: str) -> Dataset:
    item = Dataset()
    item.CodeValue, item.CodingSchemeDesignator, item.CodeMeaning = value, "DCM", meaning
    return item


def _reference(header: Dataset) -> Dataset:
    """Make an item of Source Image Sequence that names this instance."""
    item = Dataset()
    item.ReferencedSOPClassUID = header.SOPClassUID
    item.ReferencedSOPInstanceUID = header.SOPInstanceUID
    item.PurposeOfReferenceCodeSequence = [_code("121320", "Uncompressed predecessor")]
    return item


def delivered_pair(
    folder: Path,
    *,
    seed: int,
    step: float = 24.0,
    manner: Manner = _AS_ASKED,
    rows: int = 256,
    columns: int = 256,
    slices: int = 4,
    noise_sd_hu: float = 14.0,
) -> Truth:
    """Write a CT series into `folder/original` and its changed copies into `folder/delivered`.

    Returns
    -------
    Truth
        Of the copies; `parts` holds the original's truth first, then the copies'.
    """
    original = ct_body(
        folder / "original", seed=seed, rows=rows, columns=columns, slices=slices, noise_sd_hu=noise_sd_hu
    )
    copies = deliver(original, folder / "delivered", step=step, manner=manner)
    return replace(copies, parts=(original, copies))


def already_lossy(
    folder: Path, *, seed: int, step: float = 40.0, rows: int = 256, columns: int = 256, slices: int = 3
) -> Truth:
    """Write an uncompressed CT series whose pixels went through a lossy quantiser, and whose header says so.

    The image is ORIGINAL: lossy from the scanner on, without a predecessor (PS3.3 C.7.6.1.1.2). Its pairs
    name the written file on both sides, since no other exists.
    """
    clean = ct_body(folder, seed=seed, rows=rows, columns=columns, slices=slices)
    manner = Manner(derived=False, new_uid=True, source=False)
    lossy = deliver(clean, folder, step=step, manner=manner)
    for path in clean.files:
        path.unlink()
    pairs = tuple(replace(pair, original=pair.delivered) for pair in lossy.pairs)
    return replace(lossy, kind="already_lossy", pairs=pairs)
