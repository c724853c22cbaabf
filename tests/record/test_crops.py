from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from PIL import Image

from safecheck.errors import DossierError
from safecheck.record.crops import CropMeta, read_crop, write_crop
from safecheck.record.png import png_bytes, png_pixels

META = CropMeta(
    unit="HU",
    window="brain (centre 40 HU, width 80 HU)",
    first_row=16,
    first_column=24,
    patch_row=24,
    patch_column=32,
    patch_rows=8,
    patch_columns=8,
)


def arrays(shape: tuple[int, ...] = (24, 20)) -> tuple[npt.NDArray[Any], npt.NDArray[Any], npt.NDArray[np.float64]]:
    rng = np.random.default_rng(7)
    before, after = rng.uniform(0, 255, shape), rng.uniform(0, 255, shape)
    return before, after, rng.normal(0, 9, shape[:2])


@pytest.mark.parametrize(
    "pixels",
    [
        np.arange(256, dtype=np.uint8).reshape(16, 16),
        np.arange(0, 65536, 7, dtype=np.uint16)[:9216].reshape(96, 96),
        np.random.default_rng(1).integers(0, 256, (5, 9, 3), dtype=np.uint8),
        np.zeros((1, 1), np.uint8),
    ],
    ids=["grey 8 bits", "grey 16 bits", "colour", "one pixel"],
)
def test_another_library_reads_the_same_pixels_from_a_png(pixels: npt.NDArray[Any]) -> None:
    # Outside truth: Pillow's own PNG reader.
    with Image.open(io.BytesIO(png_bytes(pixels))) as image:
        found = np.asarray(image)
    assert np.array_equal(found.astype(pixels.dtype), pixels)
    again = png_pixels(png_bytes(pixels))
    assert again.dtype == pixels.dtype
    assert np.array_equal(again, pixels)


@pytest.mark.parametrize(
    "pixels",
    [np.zeros((4, 4), np.int16), np.zeros((0, 4), np.uint8), np.zeros((4, 4, 2), np.uint8), np.zeros(4, np.uint8)],
    ids=["signed", "empty", "two channels", "one dimension"],
)
def test_other_pixels_are_not_written_as_png(pixels: npt.NDArray[Any]) -> None:
    with pytest.raises(ValueError, match="are not written as PNG"):
        png_bytes(pixels)


def test_any_changed_byte_of_a_png_is_found() -> None:
    data = png_bytes(np.arange(64, dtype=np.uint8).reshape(8, 8))
    for position in range(len(data)):
        changed = bytearray(data)
        changed[position] ^= 0x10
        with pytest.raises(DossierError, match="not as it was written"):
            png_pixels(bytes(changed))


def test_a_png_cut_short_is_found() -> None:
    data = png_bytes(np.arange(64, dtype=np.uint8).reshape(8, 8))
    for size in range(len(data)):
        with pytest.raises(DossierError, match="not as it was written"):
            png_pixels(data[:size])


@pytest.mark.parametrize("shape", [(24, 20), (24, 20, 3), (1, 1)], ids=["grey", "colour", "one pixel"])
def test_a_crop_comes_back_as_written(tmp_path: Path, shape: tuple[int, ...]) -> None:
    before, after, difference = arrays(shape)
    write_crop(tmp_path, "place-001", before, after, difference, META)
    crop = read_crop(tmp_path, "place-001")
    assert np.abs(crop.original - before).max() <= 0.5
    assert np.abs(crop.recompressed - after).max() <= 0.5
    # Half a step of 65,534 over the span of twice the scale.
    assert np.abs(crop.difference - difference).max() <= np.abs(difference).max() / 32767 / 2 * (1 + 1e-9)
    assert crop.about.difference_scale == np.abs(difference).max()
    assert (crop.about.unit, crop.about.window, crop.about.patch_row) == (META.unit, META.window, META.patch_row)


def test_the_same_arrays_give_the_same_bytes(tmp_path: Path) -> None:
    for name in ("one", "two"):
        (tmp_path / name).mkdir()
        write_crop(tmp_path / name, "place-001", *arrays(), META)
    files = sorted(path.name for path in (tmp_path / "one").iterdir())
    assert files == [
        "place-001-difference.png",
        "place-001-original.png",
        "place-001-recompressed.png",
        "place-001.json",
    ]
    for name in files:
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()


def test_a_crop_in_which_nothing_changed_has_a_scale_of_one(tmp_path: Path) -> None:
    before, _, difference = arrays()
    write_crop(tmp_path, "still", before, before, difference * 0, META)
    crop = read_crop(tmp_path, "still")
    assert crop.about.difference_scale == 1
    assert not crop.difference.any()


@pytest.mark.parametrize(
    ("change", "says"),
    [
        ({"name": "../out"}, "lower-case letters"),
        ({"name": "Doe John"}, "lower-case letters"),
        ({"original": np.full((24, 20), 256.0)}, "outside 0 to 255"),
        ({"original": np.full((24, 20), np.nan)}, "outside 0 to 255"),
        ({"original": np.zeros((3, 3))}, "need one shape"),
        ({"difference": np.full((24, 20), np.inf)}, "not finite"),
    ],
    ids=["path", "free text", "level too high", "level not a number", "shape", "infinite"],
)
def test_a_crop_out_of_range_is_not_written(tmp_path: Path, change: dict[str, Any], says: str) -> None:
    before, after, difference = arrays()
    given: dict[str, Any] = {"name": "place-001", "original": before, "recompressed": after, "difference": difference}
    with pytest.raises(ValueError, match=says):
        write_crop(tmp_path, meta=META, **(given | change))
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize("lost", ["-original.png", "-recompressed.png", "-difference.png", ".json"])
def test_a_crop_with_a_file_missing_is_named(tmp_path: Path, lost: str) -> None:
    write_crop(tmp_path, "place-001", *arrays(), META)
    (tmp_path / f"place-001{lost}").unlink()
    with pytest.raises(DossierError, match="crop place-001 of the dossier cannot be read"):
        read_crop(tmp_path, "place-001")


def test_a_crop_named_by_a_path_is_never_opened(tmp_path: Path) -> None:
    with pytest.raises(DossierError, match="characters that no crop has"):
        read_crop(tmp_path, "../record")


def test_pictures_of_another_size_are_found(tmp_path: Path) -> None:
    write_crop(tmp_path, "place-001", *arrays(), META)
    (tmp_path / "place-001-original.png").write_bytes(png_bytes(np.zeros((3, 3), np.uint8)))
    with pytest.raises(DossierError, match="differ in size"):
        read_crop(tmp_path, "place-001")
