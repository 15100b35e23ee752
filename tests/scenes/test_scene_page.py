"""Camera, page and wording: what they promise about pixels."""

from __future__ import annotations

import numpy as np
import pytest
import pyvista as pv

from fieldviz.scenes.camera import PixelBox, framed
from fieldviz.scenes.page import Page
from fieldviz.scenes.stage import Layer, Material, Quality, background, photograph
from fieldviz.scenes.theme import THEMES
from fieldviz.scenes.wording import (
    decade_ticks,
    even_ticks,
    number_text,
    power_text,
    radius_ticks,
    scaled,
)

SIZE = (640, 360)
QUICK = Quality(1, 4)


def ball(centre, radius=0.2):
    mesh = pv.Sphere(radius=radius, center=centre, theta_resolution=40, phi_resolution=40)
    return Layer("ball", mesh, Material((1.0, 1.0, 1.0), lit=False))


def test_framed_points_fill_the_area_and_stay_inside():
    rng = np.random.default_rng(3)
    points = rng.uniform([-3, -2, -1], [5, 2, 1.5], (500, 3))
    area = PixelBox(40, 60, 600, 300)
    camera = framed(points, 0.4, 0.5, area, SIZE)
    seen = camera.pixels(points, SIZE)
    assert seen[:, 0].min() >= area.left - 0.5
    assert seen[:, 0].max() <= area.right + 0.5
    assert seen[:, 1].min() >= area.top - 0.5
    assert seen[:, 1].max() <= area.bottom + 0.5
    filled = np.ptp(seen, axis=0) / (area.width, area.height)
    assert filled.max() == pytest.approx(1.0, abs=2e-3)


@pytest.mark.parametrize("place", [(0.0, 0.0, 0.0), (3.0, -1.0, 0.5), (-2.0, 1.5, -0.8)])
def test_pixels_are_where_the_photograph_shows_them(place):
    cloud = np.array([[-4, -2, -1], [4, 2, 1.0]])
    camera = framed(cloud, -1.0, 0.4, PixelBox(20, 20, 620, 340), SIZE)
    image = photograph([ball(place)], camera, THEMES["dark"], SIZE, QUICK)
    rows, columns = np.nonzero(image.min(axis=2) > 200)
    expected = camera.pixels(np.array(place), SIZE)[0]
    assert [columns.mean() + 0.5, rows.mean() + 0.5] == pytest.approx(expected, abs=1.0)
    across = 2 * 0.2 * camera.pixels_per_length(np.array(place), SIZE)
    assert np.ptp(columns) + 1 == pytest.approx(across, abs=2.0)


def test_what_is_behind_a_translucent_ball_shines_through():
    cloud = np.array([[0, -3, -1.5], [0, 3, 1.5], [0, -3, 1.5], [0, 3, -1.5]])
    camera = framed(cloud, 0.0, 0.0, PixelBox(0, 0, 640, 360), SIZE)
    red = Material((1.0, 0.0, 0.0), opacity=0.4, lit=False)
    veil = Layer("veil", ball((0.9, 0.0, 0.0), 0.8).mesh, red)
    solid = Layer("solid", ball((-0.9, 0.0, 0.0), 0.3).mesh, Material((0.0, 1.0, 0.0), lit=False))
    image = photograph([veil, solid], camera, THEMES["dark"], SIZE, QUICK).astype(int)
    (x, y), (x_side, y_side) = camera.pixels(np.array([[0, 0, 0], [0, 0.55, 0]]), SIZE).astype(int)
    # Two walls of opacity 0.4 leave 0.36 of what is behind.
    assert image[y, x] == pytest.approx([255 * 0.64, 255 * 0.36, 0], abs=4)
    assert image[y_side, x_side, 0] == pytest.approx(255 * 0.64 + 0.36 * 13, abs=6)


def test_the_background_is_whole_around_the_data():
    camera = framed(np.array([[-4, -2, -1], [4, 2, 1.0]]), 0, 0.3, PixelBox(0, 0, 640, 360), SIZE)
    image = photograph([ball((0, 0, 0))], camera, THEMES["dark"], SIZE, QUICK).astype(int)
    empty = background(THEMES["dark"], SIZE).astype(int)
    data = image.min(axis=2) > 40
    assert data.any()
    ring = np.abs(image - empty).max(axis=2) > 2
    assert np.count_nonzero(ring & ~data) < 0.2 * np.count_nonzero(data)
    assert (photograph([], camera, THEMES["light"], SIZE, QUICK) == 255).all()


def test_extents_are_where_the_ink_is():
    page = Page(SIZE, THEMES["dark"])
    box = page.text(60, 100, r"Hxg $B_z\,R^{5/4}$", 60)
    drawn = page.over(np.zeros((360, 640, 3), dtype=np.uint8))
    rows, columns = np.nonzero(drawn.max(axis=2) > 60)
    assert box.left - 2 <= columns.min()
    assert columns.max() <= box.right + 2
    assert box.top - 2 <= rows.min()
    assert rows.max() <= box.bottom + 2
    assert columns.max() - columns.min() > 0.8 * box.width


def test_faults_are_found():
    page = Page(SIZE, THEMES["light"])
    page.text(100, 100, "one")
    assert page.faults() == []
    page.text(105, 102, "two")
    page.text(630, 200, "three goes out")
    assert len(page.faults()) == 2
    assert not page.is_free(PixelBox(90, 90, 120, 110))
    occupied = np.zeros((360, 640), dtype=bool)
    occupied[250, 250] = True
    assert not page.is_free(PixelBox(240, 240, 260, 260), occupied)
    assert page.is_free(PixelBox(260, 240, 280, 260), occupied)


@pytest.mark.parametrize(("low", "high"), [(-6.3, 0.2), (-2.05, -0.01), (-30, 2), (0.1, 0.9)])
def test_decade_ticks_are_inside_and_not_too_many(low, high):
    ticks = decade_ticks(low, high)
    assert 2 <= len(ticks) <= 8
    assert all(low <= at <= high for at, _ in ticks)


def test_numbers_and_powers_in_words():
    assert power_text("R", 1.25) == r"\,R^{5/4}"
    assert power_text("R", 0) == ""
    assert power_text("R", -0.5) == r"\,R^{-1/2}"
    assert number_text(-0.02) == "\N{MINUS SIGN}0.02"
    assert scaled(0.0072) == (1e-3, r"$10^{-3}$ code units")
    assert scaled(3.2) == (1.0, "code units")
    assert [at for at, _ in even_ticks(0, 1)] == pytest.approx([0, 0.2, 0.4, 0.6, 0.8, 1.0])
    assert radius_ticks(1, 5).tolist() == [1, 2, 3, 4, 5]
