"""Crops of the worst places: three PNG files and a JSON text each, in the folder places/ of a dossier with images.

`NAME-original.png` and `NAME-recompressed.png` hold display levels 0 to 255 at the window that `NAME.json` names.
`NAME-difference.png` holds after less before, 16 bits: 32768 is no change, 1 and 65535 are minus and plus
`difference_scale`, in the unit named.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from safecheck.documents import Document, from_json
from safecheck.errors import DossierError
from safecheck.record.canonical import document_bytes
from safecheck.record.png import png_bytes, png_pixels

__all__ = ["Crop", "CropDocument", "CropMeta", "read_crop", "write_crop"]

_ZERO, _SPAN = 32768, 32767
_NAME = re.compile(r"[a-z0-9][a-z0-9-]{0,60}")


class CropMeta(Document):
    """What the arrays of a crop are."""

    unit: str
    """Unit of the difference."""
    window: str
    """Display window in words, e.g. 'soft tissue (centre 40 HU, width 400 HU)'."""
    first_row: int
    """Row of the frame where the crop begins."""
    first_column: int
    patch_row: int
    """First row of the patch, counted in the frame."""
    patch_column: int
    patch_rows: int
    patch_columns: int


class CropDocument(CropMeta):
    """NAME.json."""

    schema_version: Literal["1"] = "1"
    rows: int
    columns: int
    difference_scale: float
    """Largest absolute difference of the crop; 1 where nothing changed."""


@dataclass(frozen=True, slots=True, eq=False)
class Crop:
    """A crop as read."""

    about: CropDocument
    original: npt.NDArray[np.uint8]
    """Display levels, (rows, columns) or (rows, columns, 3)."""
    recompressed: npt.NDArray[np.uint8]
    difference: npt.NDArray[np.float64]
    """After less before in `about.unit`, (rows, columns), within 1 part in 65,534 of `about.difference_scale`."""


def write_crop(
    folder: Path,
    name: str,
    original: npt.NDArray[Any],
    recompressed: npt.NDArray[Any],
    difference: npt.NDArray[np.float64],
    meta: CropMeta,
) -> None:
    """Write one crop: the same arrays give the same bytes.

    Parameters
    ----------
    folder
        places/, which must exist.
    name
        Lower-case letters, digits and hyphens, e.g. 'place-001'.
    original, recompressed
        Display levels 0 to 255 at the window that `meta` names, (rows, columns) or (rows, columns, 3).
    difference
        After less before in the unit that `meta` names, (rows, columns).

    Raises
    ------
    ValueError
        If the name, a shape or a value is another.
    """
    if not _NAME.fullmatch(name):
        raise ValueError("a crop is named by lower-case letters, digits and hyphens")
    if original.shape != recompressed.shape or original.shape[:2] != difference.shape:
        raise ValueError("original, recompressed and difference need one shape")
    if not np.isfinite(difference).all():
        raise ValueError("a difference is not finite")
    scale = float(np.abs(difference).max()) or 1.0
    coded = (np.rint(difference / scale * _SPAN) + _ZERO).astype(np.uint16)
    rows, columns = difference.shape
    about = CropDocument(**meta.model_dump(), rows=rows, columns=columns, difference_scale=scale)
    (folder / f"{name}-original.png").write_bytes(png_bytes(_levels(original)))
    (folder / f"{name}-recompressed.png").write_bytes(png_bytes(_levels(recompressed)))
    (folder / f"{name}-difference.png").write_bytes(png_bytes(coded))
    (folder / f"{name}.json").write_bytes(document_bytes(about))


def _levels(values: npt.NDArray[Any]) -> npt.NDArray[np.uint8]:
    """Display values 0 to 255 as whole levels."""
    if not (np.isfinite(values).all() and values.min() >= 0 and values.max() <= 255):
        raise ValueError("a display level lies outside 0 to 255")
    levels: npt.NDArray[np.uint8] = np.rint(values).astype(np.uint8)
    return levels


def read_crop(folder: Path, name: str) -> Crop:
    """Read a crop of a dossier.

    Raises
    ------
    DossierError
        If a file is missing or not as `write_crop` writes it.
    """
    if not _NAME.fullmatch(name):
        raise DossierError("the record names a crop by characters that no crop has")
    try:
        about = from_json(CropDocument, (folder / f"{name}.json").read_bytes())
        kinds = ("original", "recompressed", "difference")
        original, recompressed, coded = (png_pixels((folder / f"{name}-{kind}.png").read_bytes()) for kind in kinds)
    except OSError as error:
        raise DossierError(f"the crop {name} of the dossier cannot be read") from error
    shape = (about.rows, about.columns)
    if original.shape != recompressed.shape or not original.shape[:2] == coded.shape == shape:
        raise DossierError(f"the pictures of the crop {name} differ in size")
    if original.dtype != np.uint8 or recompressed.dtype != np.uint8 or coded.dtype != np.uint16:
        raise DossierError(f"the pictures of the crop {name} are of another kind than was written")
    difference = (coded.astype(np.float64) - _ZERO) / _SPAN * about.difference_scale
    return Crop(about, original, recompressed, difference)
