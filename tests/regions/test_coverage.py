"""Coverage: exact areas, against closed forms and against counting on a fine lattice."""

from __future__ import annotations

import math

import numpy as np
import pytest
import skimage.draw
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.regions.coverage import Coverage, cover, find_centres
from safecheck.regions.shapes import Ellipse, Polygon, Rectangle, Ring, Shape


@pytest.mark.parametrize("angle", [0.0, 17.0, 45.0, 90.0, -123.4])
@pytest.mark.parametrize("centre", [(20.0, 30.0), (20.31, 30.77)])
def test_the_area_of_a_rectangle_is_that_of_its_sides(centre: tuple[float, float], angle: float) -> None:
    shape = Rectangle(centre=centre, height=7.5, width=3.2, angle_degrees=angle)
    assert cover(shape.rings(), 64, 64).sum() == pytest.approx(7.5 * 3.2, rel=1e-12)


@pytest.mark.parametrize(("height", "width"), [(0.4, 0.4), (3.0, 11.0), (40.0, 25.5)])
def test_the_area_of_an_ellipse_is_pi_times_its_half_axes(height: float, width: float) -> None:
    shape = Ellipse(centre=(31.2, 30.9), height=height, width=width, angle_degrees=31)
    assert cover(shape.rings(), 64, 64).sum() == pytest.approx(math.pi * height * width / 4, rel=1e-9)


def test_each_pixel_of_a_disc_holds_the_share_that_counting_finds() -> None:
    # Counted on a lattice of 101 x 101 points per pixel: a boundary pixel is known to about 1/100.
    covered = cover(Ellipse(centre=(8.3, 7.9), height=11.0, width=11.0).rings(), 16, 16)
    offsets = (np.arange(101) + 0.5) / 101 - 0.5
    rows = np.arange(16)[:, None] + offsets
    inside = ((rows.reshape(-1, 1) - 8.3) ** 2 + (rows.reshape(1, -1) - 7.9) ** 2) <= 5.5**2
    counted = inside.reshape(16, 101, 16, 101).mean(axis=(1, 3))
    assert np.abs(covered - counted).max() < 0.01


def test_a_pixel_centre_lies_on_whole_numbers() -> None:
    covered = cover(Rectangle(centre=(2, 3), height=1, width=1).rings(), 6, 6)
    expected = np.zeros((6, 6))
    expected[2, 3] = 1.0
    assert np.array_equal(covered, expected)


def test_a_shape_much_smaller_than_a_pixel_keeps_its_area() -> None:
    assert cover(Rectangle(centre=(2.2, 3.1), height=0.01, width=0.02).rings(), 6, 6).sum() == pytest.approx(2e-4)


def test_a_ring_inside_another_cuts_a_hole_whatever_its_sense() -> None:
    outer = ((0.0, 0.0), (0.0, 20.0), (20.0, 20.0), (20.0, 0.0))
    hole = ((5.0, 5.0), (5.0, 9.0), (9.0, 9.0), (9.0, 5.0))
    island = ((6.0, 6.0), (6.0, 7.0), (7.0, 7.0), (7.0, 6.0))
    for turned in (hole, hole[::-1]):
        covered = cover(Polygon(outline=(outer, turned, island)).rings(), 32, 32)
        assert covered.sum() == pytest.approx(400 - 16 + 1)
        assert covered[8, 8] == 0.0


def test_no_rounding_is_left_beside_a_shape() -> None:
    shape = Ellipse(centre=(100.3, 200.7), height=33.3, width=21.1, angle_degrees=31)
    covered = cover(shape.rings(), 512, 512)
    near = np.zeros((512, 512), dtype=bool)
    near[80:122, 180:222] = True
    assert not covered[~near].any()
    assert (covered[98:103, 199:203] == 1.0).all()


def test_what_lies_outside_the_image_is_cut_off() -> None:
    assert cover(Rectangle(centre=(0, 0), height=4, width=4).rings(), 8, 8).sum() == pytest.approx(6.25)
    assert cover(Rectangle(centre=(4, 7), height=4, width=40).rings(), 8, 8).sum() == pytest.approx(32)
    assert cover(Rectangle(centre=(-20, 4), height=4, width=4).rings(), 8, 8).sum() == 0


def _star(seed: int, points: int) -> Ring:
    """A star-shaped ring: it never crosses itself."""
    rng = np.random.default_rng(seed)
    angles = np.sort(rng.uniform(0, 2 * np.pi, points))
    radii = rng.uniform(3, 11, points)
    return np.column_stack([12 + radii * np.sin(angles), 12.4 + radii * np.cos(angles)])


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10_000), points=st.integers(3, 12))
def test_shape_and_complement_sum_to_one(seed: int, points: int) -> None:
    ring = _star(seed, points)
    around = np.array([(-9.0, -9.0), (-9.0, 40.0), (40.0, 40.0), (40.0, -9.0)])
    inside: Coverage = cover([ring], 24, 24)
    outside: Coverage = cover([around, ring], 24, 24)
    assert np.allclose(inside + outside, 1.0, atol=1e-12)


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10_000), down=st.integers(0, 6), right=st.integers(0, 6))
def test_a_move_by_whole_pixels_moves_the_coverage(seed: int, down: int, right: int) -> None:
    ring = _star(seed, 7)
    here, there = cover([ring], 40, 40), cover([ring + np.array([down, right])], 40, 40)
    assert np.allclose(here[: 40 - down, : 40 - right], there[down:, right:], atol=1e-12)


@pytest.mark.parametrize("seed", range(6))
def test_a_polygon_covers_what_a_fine_raster_of_scikit_image_covers(seed: int) -> None:
    ring, scale = _star(seed, 9), 40
    fine = skimage.draw.polygon2mask((24 * scale, 24 * scale), (ring + 0.5) * scale - 0.5)
    counted = fine.reshape(24, scale, 24, scale).mean(axis=(1, 3))
    # A lattice of 40 x 40 points knows a boundary pixel to about 1/40 of the length of edge inside it.
    assert np.abs(cover([ring], 24, 24) - counted).max() < 0.025
    assert cover([ring], 24, 24).sum() == pytest.approx(counted.sum(), abs=0.05)


@pytest.mark.parametrize(
    "shape", [Rectangle(centre=(5, 5), height=2, width=2), Ellipse(centre=(5, 5), height=2, width=2)]
)
def test_a_shape_turned_by_half_a_turn_is_itself(shape: Shape) -> None:
    turned = shape.model_copy(update={"angle_degrees": 180.0})
    assert np.allclose(cover(shape.rings(), 10, 10), cover(turned.rings(), 10, 10), atol=1e-12)


@pytest.mark.parametrize("seed", range(6))
def test_the_centres_inside_are_those_that_scikit_image_finds(seed: int) -> None:
    ring = _star(seed, 9)
    inside = find_centres([ring], 24, 24)
    assert np.array_equal(inside, skimage.draw.polygon2mask((24, 24), ring))
    covered = cover([ring], 24, 24)
    assert not (inside & (covered == 0)).any()
    assert inside[covered == 1].all()


def test_a_shape_beyond_the_image_holds_the_centres_of_the_image_alone() -> None:
    wide = Rectangle(centre=(4, 4), height=100, width=100)
    assert find_centres(wide.rings(), 8, 8).all()
    away = Rectangle(centre=(4, -60), height=10, width=10)
    assert not find_centres(away.rings(), 8, 8).any()
