import dataclasses
import math
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings

from safecheck.measures import baseline
from safecheck.measures.baseline import FrameFigures, load_kernels, measure_frame, prepare_baseline
from safecheck.measures.colour import ColourFigures
from safecheck.measures.display import Rendering
from safecheck.measures.planes import Mask, Plane
from safecheck.measures.region import ContrastFigures, RegionFigures
from safecheck.measures.structural import WindowFigures, measure_window
from safecheck.record.rows import MeasureRow, RegionRow, WindowRow
from tests.measures.planes import two_planes


@pytest.mark.parametrize(
    ("figures", "row"),
    [
        (FrameFigures, MeasureRow),
        (ColourFigures, MeasureRow),
        (WindowFigures, WindowRow),
        (RegionFigures, RegionRow),
        (ContrastFigures, RegionRow),
    ],
    ids=lambda kind: kind.__name__,
)
def test_figures_are_named_as_columns(figures: type, row: type) -> None:
    columns = {field.name for field in dataclasses.fields(row)}
    assert {field.name for field in dataclasses.fields(figures)} <= columns


@settings(max_examples=60, deadline=None)
@given(two_planes())
def test_every_figure_is_finite_or_null(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, content = planes
    prepared = prepare_baseline(before, content, peak_bits=4095, stored_unit=1, spacing_mm=(0.9, 0.9))
    for candidate in (before, after):
        for name, value in dataclasses.asdict(measure_frame(prepared, candidate)).items():
            assert value is None or math.isfinite(value), name


@settings(max_examples=60, deadline=None)
@given(two_planes(least=9))
def test_nothing_changed_gives_the_best_value_everywhere(planes: tuple[Plane, Plane, Mask]) -> None:
    before, _, content = planes
    figures = measure_frame(prepare_baseline(before, content, peak_bits=4095, stored_unit=1), before)
    for name, value in dataclasses.asdict(figures).items():
        if name.startswith("psnr"):
            assert value is None, name
        elif name.endswith(("rmse", "_max", "_content", "_frame", "rmse_over_noise")):
            assert not value, name
    assert figures.noise_sd_kept_percent in (None, 100)


def test_a_real_frame_is_measured_in_one_go(ct_pair: tuple[Plane, Plane]) -> None:
    before, after = ct_pair
    content = before > -500
    padding = before == before.min()
    prepared = prepare_baseline(
        before,
        content,
        peak_bits=16383,
        stored_unit=1,
        padding=padding,
        spacing_mm=(0.478516, 0.478516),
        renderings=(Rendering("LINEAR", 40, 80), Rendering("LINEAR", 40, 400)),
    )
    figures = measure_frame(prepared, after)
    error = (after - before)[content]
    mse = float(np.mean(error**2))
    assert figures.rmse_content == pytest.approx(math.sqrt(mse), rel=1e-9)
    assert figures.psnr_peak_bits_content_db == pytest.approx(10 * math.log10(16383**2 / mse), rel=1e-9)
    span = float(np.ptp(before[content]))
    assert figures.peak_range == span
    assert figures.psnr_peak_range_content_db == pytest.approx(10 * math.log10(span**2 / mse), rel=1e-9)
    assert figures.window_mm == 10
    assert figures.noise_sd is not None
    assert figures.noise_sd_after is not None
    assert figures.noise_sd_kept_percent == pytest.approx(100 * figures.noise_sd_after / figures.noise_sd, rel=1e-12)
    assert figures.rmse_over_noise == pytest.approx(math.sqrt(mse) / figures.noise_sd, rel=1e-9)
    assert len([measure_window(window, after) for window in prepared.windows]) == 2


def test_the_same_call_gives_the_same_bits(ct_pair: tuple[Plane, Plane]) -> None:
    before, after = ct_pair
    prepared = prepare_baseline(
        before, before > -500, peak_bits=16383, stored_unit=1, renderings=(Rendering("LINEAR", 40, 400),)
    )
    assert measure_frame(prepared, after) == measure_frame(prepared, after.copy())
    assert measure_window(prepared.windows[0], after)[0] == measure_window(prepared.windows[0], after.copy())[0]


def test_a_frame_of_one_pixel_is_measured() -> None:
    before = np.array([[5.0]])
    figures = measure_frame(
        prepare_baseline(before, np.ones((1, 1), np.bool_), peak_bits=255, stored_unit=1), before + 2
    )
    assert (figures.bias_frame, figures.max_content, figures.worst_patch_rmse, figures.noise_sd) == (2, 2, None, None)


def test_loading_kernels_loads_all_there_are() -> None:
    load_kernels()
    folder = Path(baseline.__file__).parent
    names = {f"safecheck.measures.{path.stem}" for path in folder.glob("*_kernels.py")}
    assert len(names) == 6
    assert names <= set(sys.modules)
