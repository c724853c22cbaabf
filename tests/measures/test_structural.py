import numpy as np
import pytest
from hypothesis import given, settings
from skimage.metrics import structural_similarity

from safecheck.measures.display import Rendering, find_clipped, render
from safecheck.measures.planes import Mask, Plane
from safecheck.measures.structural import WindowFigures, measure_window, prepare_window
from tests.measures.planes import two_planes

IDENTITY = Rendering("LINEAR_EXACT", 127.5, 255)
"""Shows 0 to 255 as they are."""


def _everywhere(plane: Plane) -> Mask:
    return np.ones(plane.shape, np.bool_)


def _ssim(before: Plane, after: Plane) -> float:
    """Mean over the whole valid part, clipped pixels too."""
    wanted = _everywhere(before)
    _, picture = measure_window(prepare_window(before, wanted, IDENTITY, wanted), after, with_map=True)
    assert picture is not None
    return float(np.nanmean(picture))


def _arrays() -> dict[str, Plane]:
    """Test arrays by their stated formulas, 64 by 64."""
    y, x = np.mgrid[0:64, 0:64]
    a = (37 * x + 59 * y + 5 * ((x * y) % 23)) % 256
    b = np.clip(a + ((x + 2 * y) % 7 - 3) * 4, 0, 255)
    s0 = 128 + 100 * np.sin(2 * np.pi * x / 16) * np.cos(2 * np.pi * y / 16)
    s, s16 = np.round(s0), np.round(s0 / 16) * 16
    assert (a.sum(), b.sum(), s.sum(), s16.sum()) == (521242, 521263, 524288, 524288)
    arrays = {"A": a, "B": b, "S": s, "S16": s16, "255-S": 255 - s, "S+10": s + 10}
    return {name: array.astype(np.float64) for name, array in arrays.items()}


# Computed from the stated definition (Wang et al. 2004) by an independent script.
@pytest.mark.parametrize(
    ("before", "after", "expected"),
    [
        ("A", "B", 0.99420680),
        ("S", "S16", 0.99491833),
        ("S", "255-S", -0.82680433),
        ("S", "S+10", 0.99636963),
    ],
)
def test_ssim_of_reference_pairs(before: str, after: str, expected: float) -> None:
    arrays = _arrays()
    assert _ssim(arrays[before], arrays[after]) == pytest.approx(expected, abs=5e-9)


# Computed from the stated definition: only the luminance term is left.
@pytest.mark.parametrize(
    ("one", "other", "expected"), [(100, 110, 0.995476444), (0, 10, 0.061054905), (0, 255, 9.999e-5)]
)
def test_ssim_of_constants(one: float, other: float, expected: float) -> None:
    assert _ssim(np.full((16, 16), one), np.full((16, 16), other)) == pytest.approx(expected, rel=1e-6)


RENDERINGS = {
    "narrow": Rendering("LINEAR", 40, 80),
    "wide": Rendering("LINEAR", 40, 400),
    "exact": Rendering("LINEAR_EXACT", 300, 1500),
    "sigmoid": Rendering("SIGMOID", 40, 400),
    "table": Rendering("TABLE", first=-100, entries=np.linspace(0, 1023, 500) ** 2 / 1023, top=1023),
    "turned": Rendering("LINEAR", 40, 400, inverted=True),
}


@pytest.mark.parametrize("window", RENDERINGS)
def test_ssim_of_a_real_pair_is_that_of_scikit_image(ct_pair: tuple[Plane, Plane], window: str) -> None:
    before, after = ct_pair
    rendering = RENDERINGS[window]
    content = before > -500
    figures, picture = measure_window(
        prepare_window(before, content, rendering, _everywhere(before)), after, with_map=True
    )
    shown_b, shown_a = render(before, rendering), render(after, rendering)
    _, full = structural_similarity(
        shown_b, shown_a, gaussian_weights=True, sigma=1.5, use_sample_covariance=False, data_range=255, full=True
    )
    valid = np.zeros(before.shape, np.bool_)
    valid[5:-5, 5:-5] = True
    scored = full[content & ~find_clipped(before, rendering) & valid]
    assert picture is not None
    np.testing.assert_allclose(picture[valid], full[valid], rtol=1e-9, atol=1e-12)
    assert np.isnan(picture[~valid]).all()
    clipped = find_clipped(before, rendering) & content
    change = np.abs(shown_a - shown_b)[content]
    assert figures.pixels == scored.size
    assert figures.share_clipped_percent == pytest.approx(100 * clipped.sum() / content.sum(), rel=1e-12)
    assert figures.ssim == pytest.approx(float(scored.mean()), rel=1e-9)
    assert figures.ssim_p05 == pytest.approx(float(np.percentile(scored, 5)), rel=1e-9)
    assert figures.ssim_lowest == pytest.approx(float(scored.min()), rel=1e-9)
    assert figures.ssim_lowest_row is not None
    assert figures.ssim_lowest_column is not None
    assert full[figures.ssim_lowest_row, figures.ssim_lowest_column] == pytest.approx(scored.min(), rel=1e-9)
    assert figures.changed_5_levels_percent == pytest.approx(100 * float((change >= 5 - 1e-9).mean()), rel=1e-12)
    assert figures.max_levels == pytest.approx(float(change.max()), rel=1e-12)


def test_the_map_is_asked_for_where_regions_lie_only(ct_pair: tuple[Plane, Plane]) -> None:
    before, after = ct_pair
    content, wanted = np.zeros(before.shape, np.bool_), np.zeros(before.shape, np.bool_)
    content[200:260, 100:300] = True
    wanted[300:310, 400:420] = True
    rendering = RENDERINGS["wide"]
    baseline = prepare_window(before, content, rendering, wanted)
    _, picture = measure_window(baseline, after, with_map=True)
    _, whole = measure_window(prepare_window(before, content, rendering, _everywhere(before)), after, with_map=True)
    assert picture is not None
    assert whole is not None
    assert (picture[wanted] == whole[wanted]).all()
    assert (picture[baseline.scored] == whole[baseline.scored]).all()
    assert np.isnan(picture[:150]).all()
    assert measure_window(baseline, after)[1] is None


@settings(max_examples=40)
@given(two_planes())
def test_nothing_changed_gives_the_best_values(planes: tuple[Plane, Plane, Mask]) -> None:
    before, _, content = planes
    figures, _ = measure_window(prepare_window(before, content, RENDERINGS["wide"]), before)
    if figures.pixels:
        assert figures.ssim == pytest.approx(1, rel=1e-12)
        assert figures.ssim_lowest == pytest.approx(1, rel=1e-12)
    assert not figures.changed_5_levels_percent
    assert not figures.max_levels


@settings(max_examples=40)
@given(two_planes(least=11))
def test_ssim_is_symmetric(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, _ = planes
    assert _ssim(before, after) == pytest.approx(_ssim(after, before), rel=1e-9, abs=1e-12)


@settings(max_examples=40)
@given(two_planes())
def test_nothing_is_ever_not_a_number(planes: tuple[Plane, Plane, Mask]) -> None:
    before, after, content = planes
    figures, _ = measure_window(prepare_window(before, content, RENDERINGS["wide"]), after)
    for name in WindowFigures.__slots__:
        value = getattr(figures, name)
        assert value is None or np.isfinite(value), name
    assert (figures.ssim is None) == (figures.pixels == 0)
    assert (figures.max_levels is None) == (not content.any())


def test_a_frame_smaller_than_the_window_has_no_ssim_but_counts_levels() -> None:
    before = np.full((10, 30), 100.0)
    figures, _ = measure_window(prepare_window(before, _everywhere(before), IDENTITY), before + 5)
    assert (figures.ssim, figures.pixels) == (None, 0)
    assert figures.changed_5_levels_percent == 100
    assert figures.max_levels == 5


# A change of exactly five levels counts, although the difference of two doubles need not come out as 5.
@pytest.mark.parametrize("width", [255.0, 51.0, 510.0, 127.5])
def test_a_change_of_exactly_five_levels_counts(width: float) -> None:
    before = np.linspace(-0.4, 0.4, 400).reshape(20, 20) * width
    step = 5 * width / 255
    rendering = Rendering("LINEAR_EXACT", 0, width)
    change = render(before + step, rendering) - render(before, rendering)
    assert (change < 5).any()
    baseline = prepare_window(before, _everywhere(before), rendering)
    assert measure_window(baseline, before + step)[0].changed_5_levels_percent == 100
    assert measure_window(baseline, before + step * 0.999)[0].changed_5_levels_percent == 0


def test_a_change_that_clipping_hides_is_no_change_of_levels() -> None:
    before = np.full((12, 12), 1000.0)
    baseline = prepare_window(before, _everywhere(before), RENDERINGS["wide"])
    figures, _ = measure_window(baseline, before + 500)
    assert (figures.max_levels, figures.ssim, figures.share_clipped_percent) == (0, None, 100)


def test_another_shape_is_refused() -> None:
    before = np.zeros((12, 12))
    with pytest.raises(ValueError, match="expected an array of shape"):
        measure_window(prepare_window(before, _everywhere(before), IDENTITY), np.zeros((12, 13)))
