import math

import numpy as np
import pydicom
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydicom.data import get_testdata_file
from pydicom.dataset import Dataset
from pydicom.pixels.processing import apply_voi, apply_windowing

from safecheck.measures.display import Rendering, default_windows, find_clipped, render


def _show(value: float, rendering: Rendering) -> float:
    return float(render(np.array([[value]]), rendering)[0, 0])


# PS3.3 C.11.2.1.2, the standard's own worked examples for an output of 0 to 255.
@pytest.mark.parametrize(
    ("centre", "width", "value", "level"),
    [
        (2048, 4096, 0, 0),
        (2048, 4096, 4095.5, 255),
        (2048, 4096, 1, ((1 - 2047.5) / 4095 + 0.5) * 255),
        (2048, 1, 2047.5, 0),
        (2048, 1, 2047.6, 255),
        (0, 100, -50, 0),
        (0, 100, 49.01, 255),
        (0, 100, 10, ((10 + 0.5) / 99 + 0.5) * 255),
        (0, 1, -0.5, 0),
        (0, 1, -0.4, 255),
    ],
)
def test_linear_gives_the_examples_of_the_standard(centre: float, width: float, value: float, level: float) -> None:
    assert _show(value, Rendering("LINEAR", centre, width)) == pytest.approx(level, rel=1e-12)


# Computed from the stated definition, centre 40, width 400.
VALUES = (-159, 0, 39.5, 40, 100, 239, 240)


@pytest.mark.parametrize(
    ("rendering", "levels"),
    [
        (Rendering("LINEAR", 40, 400), (0.639098, 102.255639, 127.5, 127.819549, 166.165414, 255, 255)),
        (Rendering("LINEAR_EXACT", 40, 400), (0.6375, 102.0, 127.18125, 127.5, 165.75, 254.3625, 255)),
        (Rendering("SIGMOID", 40, 400), (30.6655, 102.334647, 127.181251, 127.5, 164.642358, 224.3345, 224.603255)),
    ],
    ids=lambda case: case.function if isinstance(case, Rendering) else "",
)
def test_windows_give_the_table(rendering: Rendering, levels: tuple[float, ...]) -> None:
    for value, level in zip(VALUES, levels, strict=True):
        assert _show(value, rendering) == pytest.approx(level, abs=5e-5)


@given(
    st.sampled_from(["LINEAR", "LINEAR_EXACT", "SIGMOID"]),
    st.floats(-500, 1500),
    # From 30 on: with less pydicom overflows in the exponential.
    st.floats(30, 4000),
    st.integers(0, 2**32 - 1),
)
def test_windows_are_those_of_pydicom(function: str, centre: float, width: float, seed: int) -> None:
    values = np.random.default_rng(seed).integers(-1024, 3072, (6, 7)).astype(np.int16)
    dataset = Dataset()
    dataset.WindowCenter, dataset.WindowWidth, dataset.VOILUTFunction = f"{centre:.9g}", f"{width:.9g}", function
    dataset.PhotometricInterpretation, dataset.BitsStored, dataset.PixelRepresentation = "MONOCHROME2", 16, 1
    shown = apply_windowing(values, dataset)
    # pydicom spans the range of 16 signed bits; ours spans 0 to 255.
    expected = (shown - (-(2**15))) / (2**16 - 1) * 255
    centre, width = float(f"{centre:.9g}"), float(f"{width:.9g}")
    rendering = Rendering(function, centre, width)  # type: ignore[arg-type]
    assert render(values.astype(np.float64), rendering) == pytest.approx(expected, rel=1e-9, abs=1e-9)


def test_a_table_is_that_of_pydicom() -> None:
    path = get_testdata_file("vlut_04.dcm", download=False)
    assert isinstance(path, str)
    dataset = pydicom.dcmread(path)
    item = dataset.VOILUTSequence[0]
    entries = np.asarray(item.LUTData, np.float64)
    first, bits = item.LUTDescriptor[1], item.LUTDescriptor[2]
    values = dataset.pixel_array
    rendering = Rendering("TABLE", first=first, entries=entries, top=2.0**bits - 1)
    expected = apply_voi(values, dataset) / (2.0**bits - 1) * 255
    np.testing.assert_allclose(render(values.astype(np.float64), rendering), expected, rtol=1e-12)


def test_a_table_clips_what_lies_outside_its_entries() -> None:
    rendering = Rendering("TABLE", first=10, entries=np.array([0.0, 100.0, 200.0]), top=255)
    values = np.array([[8.0, 10.0, 11.4, 12.0, 13.0]])
    assert render(values, rendering).tolist() == [[0, 0, 100, 200, 200]]
    assert find_clipped(values, rendering).tolist() == [[True, False, False, False, True]]


@pytest.mark.parametrize("function", ["LINEAR", "LINEAR_EXACT", "SIGMOID"])
def test_monochrome1_is_shown_turned(function: str) -> None:
    values = np.arange(-300.0, 300.0)[np.newaxis]
    plain = render(values, Rendering(function, 40, 400))  # type: ignore[arg-type]
    turned = render(values, Rendering(function, 40, 400, inverted=True))  # type: ignore[arg-type]
    assert turned == pytest.approx(255 - plain, abs=1e-12)


@given(st.floats(-200, 200), st.floats(1, 800), st.sampled_from(["LINEAR", "LINEAR_EXACT"]))
def test_only_the_flat_ends_are_clipped(centre: float, width: float, function: str) -> None:
    rendering = Rendering(function, centre, width)  # type: ignore[arg-type]
    values = np.arange(-700.0, 700.0)[np.newaxis]
    clipped, levels = find_clipped(values, rendering), render(values, rendering)
    assert set(levels[clipped].tolist()) <= {0.0, 255.0}
    inside = levels[~clipped]
    assert ((inside > -1e-9) & (inside < 255 + 1e-9)).all()


# Computed by hand from the standard's two conditions: at or below the low end, above the high end.
def test_the_low_end_is_clipped_and_the_high_end_is_not() -> None:
    values = np.array([[-161.0, -160.0, -159.0, 239.0, 240.0]])
    assert find_clipped(values, Rendering("LINEAR", 40, 400)).tolist() == [[True, True, False, False, True]]


def test_sigmoid_clips_nothing_and_does_not_overflow() -> None:
    rendering = Rendering("SIGMOID", 0, 1e-3)
    values = np.array([[-1e6, 0.0, 1e6]])
    assert not find_clipped(values, rendering).any()
    assert render(values, rendering)[0] == pytest.approx([0, 127.5, 255])


@pytest.mark.parametrize(
    ("function", "width"), [("LINEAR", 0.5), ("LINEAR_EXACT", 0.0), ("SIGMOID", -1.0), ("LINEAR", math.nan)]
)
def test_a_width_out_of_range_is_refused(function: str, width: float) -> None:
    with pytest.raises(ValueError, match="cannot have the width"):
        Rendering(function, 0, width)  # type: ignore[arg-type]


def test_a_table_without_entries_is_refused() -> None:
    with pytest.raises(ValueError, match="needs entries"):
        Rendering("TABLE")


def test_default_windows_are_stated_for_ct_and_span_the_content_elsewhere() -> None:
    # Common practice, no source.
    assert [(w.centre, w.width) for w in default_windows("CT", "HU", "HEAD", 0, 1)] == [(40, 80), (500, 2000)]
    assert [(w.centre, w.width) for w in default_windows("CT", "HU", "", 0, 1)] == [(40, 400), (-600, 1500)]
    (window,) = default_windows("MR", "stored value", "", 10, 110)
    rendering = Rendering(window.function, window.centre, window.width)
    assert (_show(10, rendering), _show(60, rendering), _show(110, rendering)) == (0, 127.5, 255)
    assert default_windows("MR", "stored value", "", 10, 10) == ()
    assert default_windows("CR", "stored value", "", None, None) == ()
