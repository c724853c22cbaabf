"""Units, padding and display settings of a frame."""

from __future__ import annotations

import struct
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from pydicom import dcmread
from pydicom.dataset import Dataset
from pydicom.pixels.processing import apply_modality_lut, apply_voi_lut

from safecheck.dicom.reader import open_instance
from safecheck.errors import InputRefused
from safecheck.frames import DisplayTable, DisplayWindow, Frame, ModalityTable, Rescale
from safecheck.wording import lint
from tests.dicom.factory import BIG_ENDIAN, CT_NAME, EXPLICIT, IMPLICIT, header_for, noise, write_instance

Array = npt.NDArray[Any]
GREY = noise((12, 10), 12)
SIGNED = noise((12, 10), 12, signed=True, dtype="i2")
CAPTURE = "Secondary Capture Image Storage"


def item(**changes: object) -> Dataset:
    made = Dataset()
    for keyword, value in changes.items():
        setattr(made, keyword, value)
    return made


def grey_header(**changes: object) -> Dataset:
    return header_for(GREY, **{"BitsStored": 12, **changes})


def read(
    folder: Path,
    dataset: Dataset,
    samples: Array = GREY,
    syntax: str = EXPLICIT,
    *,
    modality: str = "CT",
    object_class: str = CT_NAME,
    number: int = 1,
) -> Frame:
    pixels = samples.astype(samples.dtype.newbyteorder(">" if syntax == BIG_ENDIAN else "<")).tobytes()
    instance = write_instance(folder, dataset, pixels, syntax, modality=modality, object_class=object_class)
    with open_instance(instance) as reader:
        return reader.frame(number)


# --- units

UNITS = [
    # From the rule for units: HU only for CT with Rescale Type HU or absent, not localizers, not spectral maps.
    pytest.param("CT", {}, "HU", id="CT without a type"),
    pytest.param("CT", {"RescaleType": "HU"}, "HU", id="CT in HU"),
    pytest.param(
        "CT", {"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"]}, "rescaled, unit unspecified", id="localizer"
    ),
    pytest.param(
        "CT",
        {"ImageType": ["ORIGINAL", "PRIMARY", "LOCALIZER"], "RescaleType": "HU"},
        "rescaled, unit unspecified",
        id="localizer in HU",
    ),
    pytest.param(
        "CT",
        {"ImageType": ["DERIVED", "PRIMARY", "AXIAL", "EFF_ATOMIC_NUM"], "RescaleType": "HU"},
        "rescaled, unit unspecified",
        id="atomic number map",
    ),
    pytest.param(
        "CT", {"ImageType": ["DERIVED", "PRIMARY", "AXIAL", "IODINE_MAP"]}, "rescaled, unit unspecified", id="iodine"
    ),
    pytest.param("CT", {"RescaleType": "Z_EFF"}, "Z_EFF", id="effective atomic number"),
    pytest.param("CT", {"RescaleType": "HU_MOD"}, "HU_MOD", id="modified HU"),
    pytest.param("CT", {"RescaleType": "US"}, "rescaled, unit unspecified", id="declared unspecified"),
    pytest.param("CT", {"RescaleType": "SMITH JOHN"}, "rescaled, unit unspecified", id="free text"),
    pytest.param("MR", {"RescaleType": "HU"}, "rescaled, unit unspecified", id="MR in HU"),
    pytest.param("MR", {}, "rescaled, unit unspecified", id="MR without a type"),
    pytest.param("PT", {}, "rescaled, unit unspecified", id="PET"),
    pytest.param("DX", {"RescaleType": "OD"}, "OD", id="optical density"),
]


@pytest.mark.parametrize(("modality", "changes", "unit"), UNITS)
def test_units_are_known_terms_only(tmp_path: Path, modality: str, changes: dict[str, object], unit: str) -> None:
    dataset = grey_header(RescaleSlope=2.5, RescaleIntercept=-1024, **changes)
    frame = read(tmp_path, dataset, modality=modality)
    assert frame.unit == unit
    assert frame.modality_transform == Rescale(2.5, -1024)


# PS3.3 C.11.1.1.2, Defined Terms of Rescale Type.
STANDARD_TERMS = ("OD", "HU", "US", "MGML", "Z_EFF", "ED", "EDW", "HU_MOD", "PCT")


@pytest.mark.parametrize("declared", [None, *STANDARD_TERMS])
def test_a_standard_rescale_type_needs_no_note(tmp_path: Path, declared: str | None) -> None:
    frame = read(tmp_path, grey_header(RescaleSlope=2, RescaleIntercept=0, RescaleType=declared))
    assert not [note for note in frame.origin.notes if "Rescale Type" in note]


def test_a_rescale_type_of_no_standard_term_is_left_aside_with_a_note_that_does_not_quote_it(tmp_path: Path) -> None:
    frame = read(tmp_path, grey_header(RescaleSlope=2, RescaleIntercept=0, RescaleType="SMITH JOHN"))
    note = "the declared Rescale Type is none of the standard's terms and was left aside"
    assert frame.origin.notes.count(note) == 1
    assert "SMITH" not in str(frame.origin.notes)
    assert not list(lint(note))


def test_a_secondary_capture_of_ct_is_in_hounsfield_units_only_where_it_says_so(tmp_path: Path) -> None:
    for changes, unit in (({}, "rescaled, unit unspecified"), ({"RescaleType": "HU"}, "HU")):
        dataset = grey_header(RescaleSlope=1, RescaleIntercept=0, **changes)
        assert read(tmp_path, dataset, object_class=CAPTURE).unit == unit


def test_without_rescale_the_unit_is_the_stored_value(tmp_path: Path) -> None:
    frame = read(tmp_path, grey_header())
    assert (frame.unit, frame.modality_transform) == ("stored value", Rescale())


@pytest.mark.parametrize("syntax", [EXPLICIT, IMPLICIT, BIG_ENDIAN])
@pytest.mark.parametrize("signed", [False, True])
@pytest.mark.parametrize("bits", [8, 16])
def test_a_modality_table_gives_the_values_that_pydicom_gives(
    tmp_path: Path, syntax: str, signed: bool, bits: int
) -> None:
    samples = SIGNED if signed else GREY
    entries = np.random.default_rng(5).integers(0, 1 << bits, 1000)
    first = -500 if signed else 700
    table = Dataset()
    table.add_new("LUTDescriptor", "SS" if signed else "US", [1000, first, bits])
    table.ModalityLUTType = "US"
    table.add_new("LUTData", "US", [int(each) for each in entries])
    dataset = header_for(samples, BitsStored=12)
    dataset.ModalityLUTSequence = [table]
    frame = read(tmp_path, dataset, samples, syntax)
    assert isinstance(frame.modality_transform, ModalityTable)
    expected = apply_modality_lut(samples, dcmread(tmp_path / "image"))
    assert np.array_equal(frame.values(frame.raster.samples), expected)
    assert frame.unit == "rescaled, unit unspecified"


@pytest.mark.parametrize("signed", [False, True])
def test_the_first_mapped_value_is_read_by_the_sign_of_the_samples(tmp_path: Path, signed: bool) -> None:
    # PS3.3 C.11.1.1: the second value of the descriptor takes the representation of the samples; here it is written
    # with the other one.
    samples = SIGNED if signed else GREY
    table = Dataset()
    table.add_new("LUTDescriptor", "SS", [1000, -500, 16])
    table.add_new("LUTData", "US", list(range(1000)))
    dataset = header_for(samples, BitsStored=12)
    dataset.ModalityLUTSequence = [table]
    instance = write_instance(tmp_path, dataset, samples.tobytes())
    content = instance.source.path.read_bytes()
    tag = b"\x28\x00\x02\x30"
    assert content.count(tag + b"SS") == 1
    instance.source.path.write_bytes(content.replace(tag + b"SS", tag + (b"US" if signed else b"SS")))
    with open_instance(instance) as reader:
        transform = reader.frame(1).modality_transform
    assert isinstance(transform, ModalityTable)
    assert transform.first == (-500 if signed else 65536 - 500)


def test_a_table_of_65536_entries_is_coded_as_zero(tmp_path: Path) -> None:
    # PS3.3 C.11.1.1: the first value of the descriptor is then 0.
    dataset = grey_header()
    table = Dataset()
    table.add_new("LUTDescriptor", "US", [0, 0, 16])
    table.add_new("LUTData", "OW", np.arange(1 << 16, dtype="<u2")[::-1].tobytes())
    dataset.ModalityLUTSequence = [table]
    frame = read(tmp_path, dataset)
    assert np.array_equal(frame.values(GREY), 65535 - GREY.astype(float))


def test_a_modality_table_beside_a_slope_is_refused(tmp_path: Path) -> None:
    dataset = grey_header(RescaleSlope=1, RescaleIntercept=0)
    dataset.ModalityLUTSequence = [item(LUTDescriptor=[1, 0, 16])]
    with pytest.raises(InputRefused, match=r"^rescale"):
        read(tmp_path, dataset)


@pytest.mark.parametrize("descriptor", [[3, 0, 16], [2, 0, 32], [2, 0, 7]])
def test_a_table_that_its_descriptor_does_not_fit_is_refused(tmp_path: Path, descriptor: list[int]) -> None:
    dataset = grey_header()
    table = Dataset()
    table.add_new("LUTDescriptor", "US", descriptor)
    table.add_new("LUTData", "US", [1, 2])
    dataset.ModalityLUTSequence = [table]
    with pytest.raises(InputRefused, match=r"^header: LUT"):
        read(tmp_path, dataset)


# --- padding


def padded(
    folder: Path, samples: Array, *, representation: str, value: int, limit: int | None = None, **changes: object
) -> Frame:
    dataset = header_for(samples, **{"BitsStored": 12, **changes})
    dataset.add_new("PixelPaddingValue", representation, value)
    if limit is not None:
        dataset.add_new("PixelPaddingRangeLimit", representation, limit)
    # Written as bytes: the library would otherwise bring the element to the sign of the samples.
    instance = write_instance(folder, dataset, samples.tobytes())
    with open_instance(instance) as reader:
        return reader.frame(1)


LADDER = np.arange(-60, 60, dtype="i2").reshape(10, 12)


def test_the_padding_value_alone_marks_every_pixel_that_holds_it(tmp_path: Path) -> None:
    samples = np.where(LADDER % 7 == 0, -2000, LADDER).astype("i2")
    mask = padded(tmp_path, samples, representation="SS", value=-2000).raster.padding
    assert mask is not None
    assert np.array_equal(mask, samples == -2000)


@pytest.mark.parametrize(
    ("photometric", "value", "limit"),
    [("MONOCHROME2", -60, -40), ("MONOCHROME1", 59, 30)],
    ids=["from below", "from above"],
)
def test_the_padding_range_includes_both_its_ends(tmp_path: Path, photometric: str, value: int, limit: int) -> None:
    # PS3.3 C.7.5.1.1.2: MONOCHROME2 from the value up to the limit, MONOCHROME1 from the value down to it.
    frame = padded(
        tmp_path, LADDER, representation="SS", value=value, limit=limit, PhotometricInterpretation=photometric
    )
    assert frame.padding_range == (min(value, limit), max(value, limit))
    assert frame.raster.padding is not None
    assert np.array_equal(frame.raster.padding, (min(value, limit) <= LADDER) & (max(value, limit) >= LADDER))
    assert frame.origin.notes == ()


def test_a_limit_on_the_wrong_side_is_read_as_a_range_and_noted(tmp_path: Path) -> None:
    frame = padded(tmp_path, LADDER, representation="SS", value=59, limit=30)
    assert frame.raster.padding is not None
    assert frame.raster.padding.sum() == 30
    assert any("other side" in note for note in frame.origin.notes)


def test_a_padding_value_of_the_other_sign_is_read_by_its_bits(tmp_path: Path) -> None:
    samples = np.where(LADDER % 7 == 0, -2000, LADDER).astype("i2")
    dataset = header_for(samples, BitsStored=12)
    dataset.add_new("PixelPaddingValue", "SS", -2000)
    instance = write_instance(tmp_path, dataset, samples.tobytes())
    content = instance.source.path.read_bytes()
    element = b"\x28\x00\x20\x01SS\x02\x00" + struct.pack("<h", -2000)
    assert content.count(element) == 1
    instance.source.path.write_bytes(content.replace(element, element.replace(b"SS", b"US")))
    with open_instance(instance) as reader:
        frame = reader.frame(1)
    assert frame.raster.padding is not None
    assert np.array_equal(frame.raster.padding, samples == -2000)
    assert any("other sign" in note for note in frame.origin.notes)


def test_a_padding_value_that_no_sample_can_hold_marks_nothing(tmp_path: Path) -> None:
    frame = padded(tmp_path, GREY, representation="US", value=63536)
    assert (frame.raster.padding, frame.padding_range) == (None, None)
    assert any("outside the stored range" in note for note in frame.origin.notes)


def test_a_padding_value_found_nowhere_gives_no_mask(tmp_path: Path) -> None:
    frame = padded(tmp_path, LADDER, representation="SS", value=-2000)
    assert (frame.raster.padding, frame.padding_range) == (None, (-2000, -2000))
    assert frame.origin.notes == ()


def test_a_limit_without_a_value_is_not_applied(tmp_path: Path) -> None:
    dataset = header_for(LADDER, BitsStored=12)
    dataset.add_new("PixelPaddingRangeLimit", "SS", -40)
    frame = read(tmp_path, dataset, LADDER)
    assert frame.raster.padding is None
    assert any("without a padding value" in note for note in frame.origin.notes)


def test_a_padding_value_is_not_applied_to_colour(tmp_path: Path) -> None:
    samples = np.zeros((10, 12, 3), dtype="u1")
    dataset = header_for(samples)
    dataset.add_new("PixelPaddingValue", "US", 0)
    frame = read(tmp_path, dataset, samples)
    assert frame.raster.padding is None
    assert any("colour" in note for note in frame.origin.notes)


# --- display


def test_several_windows_keep_their_order_and_lose_their_free_text(tmp_path: Path) -> None:
    dataset = grey_header(
        WindowCenter=[40, -600, 300.5],
        WindowWidth=[80, 1500, 0.5],
        WindowCenterWidthExplanation=["BRAIN", "SMITH^JOHN", "BONE"],
    )
    frame = read(tmp_path, dataset)
    assert frame.displays == (
        DisplayWindow("file window 1", 40, 80),
        DisplayWindow("file window 2", -600, 1500),
    )
    assert any("impossible width" in note for note in frame.origin.notes)


@pytest.mark.parametrize("function", ["LINEAR", "LINEAR_EXACT", "SIGMOID"])
def test_the_function_of_a_window_is_read(tmp_path: Path, function: Any) -> None:
    frame = read(tmp_path, grey_header(WindowCenter=40, WindowWidth=80, VOILUTFunction=function))
    assert frame.displays == (DisplayWindow("file window 1", 40, 80, function),)


@pytest.mark.parametrize(
    "changes",
    [
        {"WindowCenter": [40, 50], "WindowWidth": 80},
        {"WindowCenter": 40},
        {"WindowCenter": 40, "WindowWidth": 80, "VOILUTFunction": "CUBIC"},
    ],
    ids=["unpaired", "no width", "unknown function"],
)
def test_windows_that_cannot_be_used_are_left_out_with_a_note(tmp_path: Path, changes: dict[str, object]) -> None:
    frame = read(tmp_path, grey_header(**changes))
    assert frame.displays == ()
    assert any("display windows" in note for note in frame.origin.notes)


@pytest.mark.parametrize("first", [-900, 500])
def test_a_voi_table_on_rescaled_values_maps_as_pydicom_maps(tmp_path: Path, first: int) -> None:
    entries = np.random.default_rng(6).integers(0, 1 << 12, 2000)
    dataset = grey_header(RescaleSlope=1, RescaleIntercept=-1024)
    table = Dataset()
    table.add_new("LUTDescriptor", "SS" if first < 0 else "US", [2000, first, 12])
    table.LUTExplanation = "SMITH^JOHN"
    table.add_new("LUTData", "US", [int(each) for each in entries])
    dataset.VOILUTSequence = [table]
    frame = read(tmp_path, dataset)
    (display,) = frame.displays
    assert isinstance(display, DisplayTable)
    assert (display.label, display.first, display.bits) == ("file table 1", first, 12)
    values = frame.values(GREY)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        expected = apply_voi_lut(values.astype(int), dataset)
    ours = display.entries[np.clip(values - display.first, 0, len(display.entries) - 1).astype(int)]
    assert np.array_equal(ours, expected)


def test_colour_has_no_windows(tmp_path: Path) -> None:
    samples = np.zeros((10, 12, 3), dtype="u1")
    frame = read(tmp_path, header_for(samples, WindowCenter=40, WindowWidth=80), samples)
    assert frame.displays == ()
