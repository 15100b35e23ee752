"""The scene mirror-check: what the fans show, the verdict on the page, and what is missing."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.composition import ColourBar
from fieldviz.scenes.description import MirrorCheck, scene_named
from fieldviz.scenes.furniture import data_mask
from fieldviz.scenes.panels import Fan, _fan_colours
from fieldviz.scenes.recipe import read_recipe
from fieldviz.scenes.render import compose, paint
from fieldviz.scenes.stage import background, quality_named
from fieldviz.scenes.theme import THEMES

SIZE = (640, 360)
QUICK = quality_named("preview")
VELOCITY = ("velocity_r", "velocity_theta", "velocity_phi")


@lru_cache
def disc(**options):
    return fv.demo_disc(**({"shape": (4, 32, 48)} | options))


@lru_cache
def composed(snapshot, theme="dark", **settings):
    return compose(snapshot, MirrorCheck(**settings), THEMES[theme])


def painted(snapshot, theme="dark", size=SIZE):
    return paint(composed(snapshot, theme), "t", THEMES[theme], size, QUICK)


def cells_of(snapshot, *names):
    edges = snapshot.grid.edges(0)
    return fv.Snapshot.from_arrays(*edges, cells={n: snapshot.cell(n)[0] for n in names})


# ---- numbers in the fans ------------------------------------------------------------------------


def test_an_even_disc_has_equal_sides_and_no_difference():
    for row in composed(disc()).rows:
        size = np.abs(row.left.values).max()
        assert size > 0
        np.testing.assert_allclose(row.left.values, row.right.values, atol=2e-5 * size)
        assert np.abs(row.difference.values).max() < 2e-5 * size


def test_the_sides_are_the_azimuth_means_with_the_mirror_signs():
    # v_r/v_K = theta and B_phi R^b = theta, whatever phi: known on both sides of the midplane.
    snapshot = disc()
    r, theta, _ = snapshot.grid.cell_centres(0)
    R = r * np.sin(theta)[:, None]
    turn = np.array([0.5, -0.5, 0.25, -0.25])[:, None, None]
    cells = {
        "velocity_r": theta[:, None] / np.sqrt(R) + turn,
        "magnetic_phi": theta[:, None] / R + 0 * turn,
    }
    made = cells_of(snapshot.with_cells(**{n: a[None] for n, a in cells.items()}), *cells)
    speed, field = composed(made, field_exponent=1.0).rows
    angle = speed.left.angle[1:-1]
    for row, sign in ((speed, 1), (field, -1)):
        up, down = np.pi / 2 - angle, sign * (np.pi / 2 + angle)
        near = {"rtol": 0, "atol": 4e-3}
        assert row.left.leftward
        assert not row.right.leftward
        np.testing.assert_allclose(row.left.values[1:-1], up[:, None] + 0 * row.left.r, **near)
        np.testing.assert_allclose(row.right.values[1:-1], down[:, None] + 0 * row.left.r, **near)
        np.testing.assert_allclose(
            row.difference.values, row.left.values - row.right.values, rtol=1e-12
        )


def test_an_uneven_wedge_is_compared_as_far_as_both_sides_reach():
    composition = composed(disc(theta_reach=(0.7, 0.5)))
    assert composition.rows[0].left.angle[-1] == pytest.approx(0.5)
    assert "up to 28.6° on both sides" in composition.caption[0]
    with pytest.raises(fv.FieldvizError, match="both sides of the midplane"):
        composed(_upper_side_only())


def _upper_side_only():
    r, theta, phi = disc().grid.edges(0)
    half = theta[:17]
    cells = {n: disc().cell(n)[0][:, :16] for n in ("density", *VELOCITY)}
    return fv.Snapshot.from_arrays(r, half, phi, cells=cells)


# ---- the verdict --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("wind", "title"),
    [("even", "even wind"), ("odd", "odd wind"), ("one-sided", "one-sided upper")],
)
def test_the_verdict_is_the_headline(wind, title):
    snapshot = disc(wind=wind, shape=(4, 96, 64))
    composition = composed(snapshot)
    verdict = fv.wind_symmetry(snapshot)
    assert composition.title == f"Mirror check: {title}"
    assert composition.subtitle in verdict.sentence
    words = " ".join(composition.findings)
    for pair in verdict.pairs:
        assert f"{pair.name} " in words or f"{pair.name}:" in words
        assert pair.word in words


def test_angles_stand_on_the_page_with_their_errors():
    snapshot = disc(shape=(16, 48, 48))
    rng = np.random.default_rng(4)
    noisy = snapshot.cell("velocity_theta")
    noisy = noisy + 0.1 * np.abs(noisy).max() * rng.standard_normal(noisy.shape)
    snapshot = snapshot.with_cells(velocity_theta=noisy)
    pair = fv.wind_symmetry(snapshot).outflow
    assert pair.angle_error is not None
    assert pair.angle_error > 0.05
    _, page = painted(snapshot)
    shown = " ".join(placed.text for placed in page.texts)
    angle = f"{pair.angle:+.1f}".replace("-", "\N{MINUS SIGN}")
    assert f"outflow {angle}° ± {pair.angle_error:.1f}°: {pair.word}" in shown
    score = fv.wind_symmetry(snapshot).field_scores["magnetic_phi"].score
    assert f"{50 * (1 + score):.1f} % even" in shown


# ---- the page -----------------------------------------------------------------------------------


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_panels_are_seen_with_contrast(theme):
    image, page = painted(disc(wind="one-sided"), theme)
    mask = np.abs(image.astype(int) - background(THEMES[theme], SIZE)).max(axis=2) > 6
    assert 0.1 < mask[60:300].mean() < 0.8
    luminance = (image @ [0.2126, 0.7152, 0.0722])[60:300][mask[60:300]]
    assert np.percentile(luminance, 95) - np.percentile(luminance, 5) > 90
    assert page.faults() == []


@pytest.mark.parametrize("size", [(480, 270), (360, 360), (300, 540), (700, 260)])
@pytest.mark.parametrize("reach", [0.7, 1.45])
def test_labels_touch_neither_each_other_nor_the_data(size, reach):
    composition = composed(_reaching(reach))
    _, page = paint(composition, "t", THEMES["dark"], size, QUICK)
    assert page.faults() == []
    bare = data_only(composition, size)
    for placed in page.texts:
        box = placed.box
        rows = slice(int(box.top), int(np.ceil(box.bottom)))
        columns = slice(int(box.left), int(np.ceil(box.right)))
        assert not bare[rows, columns].any(), placed.text


def test_a_page_too_small_is_refused_and_a_small_one_says_what_it_leaves_out():
    with pytest.raises(fv.FieldvizError, match="take a larger size"):
        painted(disc(), size=(320, 180))
    for size, missing in (((480, 270), "colour bars"), ((400, 225), r"$B_\phi$")):
        _, page = painted(disc(), size=size)
        assert f"no room for {missing}" in " ".join(placed.text for placed in page.texts)
        assert page.faults() == []


@lru_cache
def _reaching(reach):
    """Smooth fields on a wedge that may reach almost to the axis."""
    edges = (
        np.geomspace(1, 5, 33),
        np.linspace(np.pi / 2 - reach, np.pi / 2 + reach, 33),
        np.linspace(0, 0.5, 5),
    )
    theta = 0.5 * (edges[1][1:] + edges[1][:-1])[:, None]
    height = np.abs(np.cos(theta)) * np.ones((4, 32, 32))
    cells = {
        "density": np.exp(-((height / 0.1) ** 2)) + 1e-3,
        "velocity_r": height,
        "velocity_theta": -0.3 * np.cos(theta) + 0 * height,
        "velocity_phi": 1 + 0 * height,
        "magnetic_phi": np.cos(theta) + 0 * height,
    }
    return fv.Snapshot.from_arrays(*edges, cells=cells)


def data_only(composition, size):
    """Pixels that fans change, texts and lines left out."""
    from fieldviz.scenes import panels

    seen = background(THEMES["dark"], size)
    before = seen.copy()
    original = panels._blend

    def noting(image, *arguments):
        original(seen, *arguments)

    panels._blend = noting
    try:
        paint(composition, "t", THEMES["dark"], size, QUICK)
    finally:
        panels._blend = original
    return np.abs(seen.astype(int) - before).max(axis=2) > 2


def test_back_to_back_fans_are_mirror_images_with_values_in_place():
    r, angle = np.geomspace(1, 5, 40), np.linspace(0, 0.7, 30)
    values = np.cos(3 * angle)[:, None] + np.log(r)
    theme = THEMES["light"]
    bar = ColourBar("q", theme.colour_map("speed"), (0.0, 3.0), [])
    x, z = np.linspace(-0.5, 5.5, 121), np.linspace(-0.5, 4.0, 91)
    colours, inside = _fan_colours(Fan(r, angle, values, ()), bar, theme, x, z)
    mirrored = _fan_colours(Fan(r, angle, values, (), leftward=True), bar, theme, -x, z)
    np.testing.assert_array_equal(mirrored[0], colours)
    np.testing.assert_array_equal(mirrored[1], inside)
    place = np.hypot(x, z[:, None]), np.arctan2(z[:, None], x)
    within = (place[0] >= 1) & (place[0] <= 5) & (place[1] >= 0) & (place[1] <= 0.7)
    np.testing.assert_array_equal(inside > 0, within)
    wanted = bar.colour_map((np.cos(3 * place[1][within]) + np.log(place[0][within])) / 3)[:, :3]
    assert np.abs(colours[within] - wanted).max() < 0.05


@pytest.mark.parametrize(
    "options",
    [
        {"thickness": 0.05, "shape": (4, 96, 48)},
        {"period": 2 * np.pi, "shape": (8, 48, 48)},
        {"levels": 2},
        {"reversed_field": True},
        {"shape": (1, 48, 48)},
    ],
    ids=str,
)
def test_foreign_discs_make_tidy_pages(options):
    image, page = painted(disc(**options), "light")
    assert page.faults() == []
    assert data_mask(image, 0)[60:300].mean() > 0.1


# ---- what is missing ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("names", "words", "count"),
    [
        (("density", *VELOCITY), ("no azimuthal field in this snapshot",), 1),
        (("magnetic_phi",), ("no radial velocity in this snapshot", "no verdict on the wind"), 1),
        ((*VELOCITY, "magnetic_phi"), ("the snapshot lacks density", "no score"), 2),
    ],
)
def test_what_is_missing_is_named_on_the_page(names, words, count):
    snapshot = cells_of(disc(), *names)
    assert len(composed(snapshot).rows) == count
    _, page = painted(snapshot)
    shown = " ".join(placed.text for placed in page.texts)
    for phrase in words:
        assert phrase in shown
    assert page.faults() == []


def test_neither_quantity_gives_one_clear_line():
    with pytest.raises(fv.FieldvizError, match="expected velocity_r or magnetic_phi") as caught:
        composed(cells_of(disc(), "density"))
    assert "\n" not in str(caught.value)


def test_rings_without_a_number_stay_blank_and_are_counted():
    snapshot = disc()
    v_r = snapshot.cell("velocity_r").copy()
    v_r[0, :, 10:12, 20:22] = np.nan
    composition = composed(cells_of(snapshot.with_cells(velocity_r=v_r), "velocity_r"))
    assert "4 places without a number left out" in composition.caption
    assert np.isnan(composition.rows[0].left.values).any()
    image, _ = paint(composition, "t", THEMES["dark"], SIZE, QUICK)
    assert data_mask(image, 0)[60:300].mean() > 0.05


def test_render_writes_the_picture_with_its_recipe(tmp_path):
    path = tmp_path / "mirror.png"
    fv.render(disc(), "mirror-check", path, size=SIZE, quality="preview")
    recipe = read_recipe(path)
    assert recipe["scene"] == "mirror-check"
    assert recipe["drawn"]["word"] == fv.wind_symmetry(disc()).word
    assert scene_named("mirror-check") == MirrorCheck()
