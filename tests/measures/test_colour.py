import numpy as np
import numpy.typing as npt
import pytest
from skimage.color import deltaE_ciede2000, rgb2lab

from safecheck.measures.colour import ColourFigures, measure_colour, prepare_colour, to_lab
from safecheck.measures.colour_kernels import difference
from tests.measures.planes import Levels

# Sharma, Wu, Dalal 2005, table 1: read in third-party code that restates it (two copies agree), not in the paper.
SHARMA = """
50.0000 2.6772 -79.7751 50.0000 0.0000 -82.7485 2.0425
50.0000 3.1571 -77.2803 50.0000 0.0000 -82.7485 2.8615
50.0000 2.8361 -74.0200 50.0000 0.0000 -82.7485 3.4412
50.0000 -1.3802 -84.2814 50.0000 0.0000 -82.7485 1.0000
50.0000 -1.1848 -84.8006 50.0000 0.0000 -82.7485 1.0000
50.0000 -0.9009 -85.5211 50.0000 0.0000 -82.7485 1.0000
50.0000 0.0000 0.0000 50.0000 -1.0000 2.0000 2.3669
50.0000 -1.0000 2.0000 50.0000 0.0000 0.0000 2.3669
50.0000 2.4900 -0.0010 50.0000 -2.4900 0.0009 7.1792
50.0000 2.4900 -0.0010 50.0000 -2.4900 0.0010 7.1792
50.0000 2.4900 -0.0010 50.0000 -2.4900 0.0011 7.2195
50.0000 2.4900 -0.0010 50.0000 -2.4900 0.0012 7.2195
50.0000 -0.0010 2.4900 50.0000 0.0009 -2.4900 4.8045
50.0000 -0.0010 2.4900 50.0000 0.0010 -2.4900 4.8045
50.0000 -0.0010 2.4900 50.0000 0.0011 -2.4900 4.7461
50.0000 2.5000 0.0000 50.0000 0.0000 -2.5000 4.3065
50.0000 2.5000 0.0000 73.0000 25.0000 -18.0000 27.1492
50.0000 2.5000 0.0000 61.0000 -5.0000 29.0000 22.8977
50.0000 2.5000 0.0000 56.0000 -27.0000 -3.0000 31.9030
50.0000 2.5000 0.0000 58.0000 24.0000 15.0000 19.4535
50.0000 2.5000 0.0000 50.0000 3.1736 0.5854 1.0000
50.0000 2.5000 0.0000 50.0000 3.2972 0.0000 1.0000
50.0000 2.5000 0.0000 50.0000 1.8634 0.5757 1.0000
50.0000 2.5000 0.0000 50.0000 3.2592 0.3350 1.0000
60.2574 -34.0099 36.2677 60.4626 -34.1751 39.4387 1.2644
63.0109 -31.0961 -5.8663 62.8187 -29.7946 -4.0864 1.2630
61.2901 3.7196 -5.3901 61.4292 2.2480 -4.9620 1.8731
35.0831 -44.1164 3.7933 35.0232 -40.0716 1.5901 1.8645
22.7233 20.0904 -46.6940 23.0331 14.9730 -42.5619 2.0373
36.4612 47.8580 18.3852 36.2715 50.5065 21.2231 1.4146
90.8027 -2.0831 1.4410 91.1528 -1.6435 0.0447 1.4441
90.9257 -0.5406 -0.9208 88.6381 -0.8985 -0.7239 1.5381
6.7747 -0.2908 -2.4247 5.8714 -0.0985 -2.2286 0.6377
2.0776 0.0795 -1.1350 0.9033 -0.0636 -0.5514 0.9082
"""
PAIRS = [tuple(float(word) for word in line.split()) for line in SHARMA.strip().splitlines()]


@pytest.mark.parametrize("pair", PAIRS, ids=range(1, len(PAIRS) + 1))
def test_ciede2000_gives_the_published_pairs(pair: tuple[float, ...]) -> None:
    assert difference(*pair[:6]) == pytest.approx(pair[6], abs=5.1e-5)
    assert difference(*pair[3:6], *pair[:3]) == pytest.approx(pair[6], abs=5.1e-5)


def test_ciede2000_is_that_of_scikit_image_all_over_the_space() -> None:
    rng = np.random.default_rng(3)
    one = rng.uniform([0, -110, -110], [100, 110, 110], (4000, 3))
    other = one + rng.normal(0, 8, one.shape)
    other[:500] = rng.uniform([0, -110, -110], [100, 110, 110], (500, 3))
    expected = deltaE_ciede2000(one, other)
    found = [difference(*a, *b) for a, b in zip(one, other, strict=True)]
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-12)


def test_lab_of_every_corner_is_that_of_scikit_image() -> None:
    levels = np.array([0, 1, 9, 10, 11, 100, 254, 255])
    samples = np.stack(np.meshgrid(levels, levels, levels), -1).reshape(8, 64, 3).astype(np.uint8)
    assert to_lab(samples, 255) == pytest.approx(rgb2lab(samples), rel=1e-9, abs=1e-9)


def test_a_real_colour_pair_is_that_of_scikit_image(colour_pair: tuple[Levels, Levels]) -> None:
    before, after = colour_pair
    content = np.zeros(before.shape[:2], np.bool_)
    content[40:400, 30:600] = True
    expected = deltaE_ciede2000(rgb2lab(before), rgb2lab(after))[content]
    figures = measure_colour(prepare_colour(before, content, 255), after)
    assert figures.ciede2000_mean == pytest.approx(float(expected.mean()), rel=1e-9)
    error = after.astype(float) - before
    assert figures.rmse_channels == pytest.approx(float(np.sqrt((error**2).mean())), rel=1e-9)
    assert figures.max_channels == np.abs(error).max()
    assert figures.ciede2000_p95 == pytest.approx(float(np.percentile(expected, 95)), rel=1e-9)
    assert figures.ciede2000_max == pytest.approx(float(expected.max()), rel=1e-9)


def test_more_bits_of_the_same_colours_give_the_same_lab() -> None:
    rng = np.random.default_rng(4)
    samples = rng.integers(0, 256, (5, 6, 3)).astype(np.uint16)
    assert to_lab(samples * 257, 65535) == pytest.approx(to_lab(samples, 255), rel=1e-9, abs=1e-9)


def test_nothing_changed_gives_no_colour_difference(colour_pair: tuple[Levels, Levels]) -> None:
    before, _ = colour_pair
    content = np.ones(before.shape[:2], np.bool_)
    assert measure_colour(prepare_colour(before, content, 255), before) == ColourFigures(0.0, 0.0, 0.0, 0.0, 0.0)
    assert measure_colour(prepare_colour(before, ~content, 255), before) == ColourFigures(0.0, 0.0)


@pytest.mark.parametrize(
    ("samples", "highest", "words"),
    [
        pytest.param(np.full((2, 2, 3), 256, np.uint16), 255, "outside 0 to 255", id="too bright"),
        pytest.param(np.full((2, 2, 3), -1, np.int16), 255, "outside 0 to 255", id="below zero"),
        pytest.param(np.zeros((2, 2), np.uint8), 255, "expected RGB samples", id="grey"),
        pytest.param(np.zeros((2, 2, 3), np.uint8), 0, "level of full light", id="no light"),
    ],
)
def test_samples_that_are_no_colours_are_refused(samples: npt.NDArray[np.uint16], highest: int, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        to_lab(samples, highest)
