"""Whole pictures: what is seen where, and that labels keep clear."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest
from matplotlib.colors import rgb_to_hsv
from PIL import Image

import fieldviz as fv
from fieldviz.scenes.description import AzimuthCut, FluxSheets, scene_from_toml, scene_named
from fieldviz.scenes.furniture import data_mask
from fieldviz.scenes.recipe import RECIPE_KEY, read_recipe
from fieldviz.scenes.render import compose, paint
from fieldviz.scenes.stage import Quality, photograph
from fieldviz.scenes.theme import THEMES
from fieldviz.scenes.wording import time_text

SIZE = (640, 360)
QUICK = Quality(1, 3)
NODES = 120_000
SCENES = ("azimuth-cut", "flux-sheets")


@lru_cache
def disc(**options):
    return fv.demo_disc(**({"shape": (4, 32, 96)} | options))


@lru_cache
def composed(scene="flux-sheets", theme="dark", **options):
    return compose(disc(**options), scene_named(scene), THEMES[theme], NODES)


@lru_cache
def painted(scene="flux-sheets", theme="dark", without=(), size=SIZE, **options):
    composition = composed(scene, theme, **options).without(*without)
    if without:
        composition = replace(composition, legends=[])
    snapshot = disc(**options)
    return paint(composition, time_text(snapshot), THEMES[theme], size, QUICK)


def hues(image, where):
    """Hue (0 to 1) of the pixels that have a clear colour."""
    hue, saturation, value = np.moveaxis(rgb_to_hsv(image[where] / 255.0), -1, 0)
    return hue[(saturation > 0.25) & (value > 0.15)]


def middle(image):
    """The part of the page where only data are."""
    return image[60:290, 120:520]


# ---- structure and colour -----------------------------------------------------------------------


@pytest.mark.parametrize("theme", ["dark", "light"])
@pytest.mark.parametrize("scene", SCENES)
def test_the_picture_shows_data_with_contrast(scene, theme):
    image, page = painted(scene, theme)
    assert image.shape == (360, 640, 3)
    assert image.dtype == np.uint8
    share = data_mask(image, 0)[60:290].mean()
    assert 0.12 < share < 0.8
    luminance = middle(image) @ [0.2126, 0.7152, 0.0722]
    assert np.percentile(luminance, 95) - np.percentile(luminance, 5) > 90
    assert len(page.texts) >= 8


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_sheets_have_the_sheet_colours_and_cut_faces_the_density_colours(theme):
    image, _ = painted("flux-sheets", theme)
    colours = hues(image, data_mask(image, 0))
    warm = np.mean((colours < 0.16) | (colours > 0.95))
    blue = np.mean((colours > 0.52) & (colours < 0.72))
    assert warm > 0.5
    assert blue > 0.05


@pytest.mark.parametrize("theme", ["dark", "light"])
@pytest.mark.parametrize("layer", ["outer sheets", "inner sheets", "disc surface", "cut faces"])
def test_every_layer_of_the_flux_sheets_is_seen(theme, layer):
    composition = replace(composed("flux-sheets", theme), legends=[])
    images = []
    for shown in (composition, replace(composition, layers=_emptied(composition, layer))):
        image, _ = paint(shown, "t", THEMES[theme], SIZE, QUICK)
        images.append(image.astype(int))
    changed = np.abs(images[0] - images[1]).max(axis=2) > 8
    # Taking a layer away must change the picture where there were data.
    assert np.count_nonzero(changed) > 0.005 * changed.size


def _emptied(composition, name):
    """The same layers, the named one invisible but still framed."""
    return [
        replace(layer, material=replace(layer.material, opacity=1e-6, scalars=None, rgba=False))
        if layer.name == name
        else layer
        for layer in composition.layers
    ]


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_the_legend_shows_the_inner_sheets_as_they_look(theme):
    composition = composed("flux-sheets", theme)
    image, page = painted("flux-sheets", theme)
    hidden = replace(composition, layers=_emptied(composition, "inner sheets"), legends=[])
    other, _ = paint(hidden, "t", THEMES[theme], SIZE, QUICK)
    changed = np.abs(image.astype(int) - other).max(axis=2) > 30
    changed[290:] = False
    changed[:45] = False
    on_screen = image[changed]
    inner = next(t for t in page.texts if t.text == composition.legends[-1].entries[1][2])
    x, y = int(inner.box.left), int((inner.box.top + inner.box.bottom) / 2)
    swatch = image[y - 2 : y + 3, x - 20 : x - 6].reshape(-1, 3)
    # Every colour of the swatch occurs among the lit, veiled colours of the picture.
    for colour in swatch[::5].astype(int):
        distance = np.abs(on_screen - colour).max(axis=1)
        assert np.mean(distance < 30) > 0.01


def test_the_midplane_carries_the_sheets_and_the_wall_its_lines():
    image, _ = painted("azimuth-cut")
    part = middle(image).astype(int)
    red, green, blue = np.moveaxis(part, -1, 0)
    glowing = (red > 190) & (green > 60) & (blue < 0.75 * red)
    assert np.count_nonzero(glowing) > 150
    bare, _ = painted("azimuth-cut", without=("field lines",))
    changed = np.abs(middle(bare).astype(int) - part).max(axis=2) > 40
    assert np.count_nonzero(changed) > 300


# ---- foreign snapshots --------------------------------------------------------------------------

FOREIGN = [
    {"period": 0.6},
    {"period": 2 * np.pi, "shape": (24, 32, 96)},
    {"shape": (1, 32, 96)},
    {"theta_reach": (0.7, 0.5)},
    {"shape": (4, 64, 128), "thickness": 0.03},
    {"thickness": 0.2},
    {"shape": (4, 32, 48), "levels": 2},
    {"wind": "odd"},
    {"theta_reach": (0.15, 0.15)},
]


@pytest.mark.parametrize("options", FOREIGN, ids=str)
@pytest.mark.parametrize("scene", SCENES)
def test_any_snapshot_makes_a_tidy_picture(scene, options):
    image, page = painted(scene, size=(480, 270), **options)
    assert page.faults() == []
    assert 0.05 < data_mask(image, 0)[50:200].mean() < 0.8


@pytest.mark.parametrize("size", [(640, 360), (480, 480), (360, 640), (800, 300)])
@pytest.mark.parametrize("scene", SCENES)
def test_labels_touch_neither_each_other_nor_the_data(scene, size, monkeypatch):
    bare = []

    def noting(*arguments):
        bare.append(photograph(*arguments))
        return bare[-1]

    monkeypatch.setattr("fieldviz.scenes.render.photograph", noting)
    image, page = paint(composed(scene), time_text(disc()), THEMES["dark"], size, QUICK)
    assert image.shape[:2] == size[::-1]
    assert page.faults() == []
    occupied = data_mask(bare[0], 0)
    for placed in page.texts:
        box = placed.box
        rows = slice(int(box.top), int(np.ceil(box.bottom)))
        columns = slice(int(box.left), int(np.ceil(box.right)))
        assert not occupied[rows, columns].any(), placed.text


@pytest.mark.parametrize("scene", SCENES)
def test_a_reversed_field_gives_the_same_picture_and_says_so(scene):
    up, _ = painted(scene)
    down, page = painted(scene, reversed_field=True)
    shown = " ".join(placed.text for placed in page.texts)
    assert "-B_z" in shown
    assert "points down" in shown
    first, second = composed(scene), composed(scene, reversed_field=True)
    for layer, other in zip(first.layers, second.layers, strict=True):
        assert layer.mesh.n_points == pytest.approx(other.mesh.n_points, rel=0.02)
    assert hues(up, data_mask(up, 0)).mean() == pytest.approx(
        hues(down, data_mask(down, 0)).mean(), abs=0.03
    )


def test_the_ring_is_open_in_front():
    composition = composed("flux-sheets")
    points = np.asarray(composition.layer("outer sheets").mesh.points)
    away = np.mod(np.arctan2(points[:, 1], points[:, 0]) - composition.azimuth + np.pi, 2 * np.pi)
    assert np.abs(away - np.pi).min() > np.radians(45 - 6 - 2)
    assert "repeated 6" in composition.caption[0]


# ---- what is missing ----------------------------------------------------------------------------


def cells_of(snapshot, *names):
    edges = snapshot.grid.edges(0)
    return fv.Snapshot.from_arrays(*edges, cells={n: snapshot.cell(n)[0] for n in names})


def test_flux_sheets_need_field_and_density():
    bare = cells_of(disc(), "density", "pressure")
    with pytest.raises(fv.FieldvizError, match="magnetic_r"):
        fv.render(bare, "flux-sheets", size=SIZE, quality="preview")


@pytest.mark.parametrize(
    ("names", "word"),
    [
        (("density",), "no magnetic field"),
        (("magnetic_r", "magnetic_theta"), "no density"),
        (("density", "magnetic_r", "magnetic_theta"), None),
    ],
)
def test_the_cut_draws_what_there_is_and_names_what_is_missing(names, word):
    composition = compose(cells_of(disc(), *names), AzimuthCut(), THEMES["dark"], NODES)
    image, page = paint(composition, "t", THEMES["dark"], SIZE, QUICK)
    caption = " ".join(composition.caption)
    assert ("in this snapshot" in caption) == (word is not None)
    assert word is None or word in caption
    assert page.faults() == []
    assert data_mask(image, 0).mean() > 0.05


def test_a_snapshot_of_neither_is_refused():
    with pytest.raises(fv.FieldvizError, match="expected density, or magnetic_r"):
        compose(cells_of(disc(), "pressure"), AzimuthCut(), THEMES["dark"], NODES)


def test_a_level_that_is_never_reached_is_named():
    scene = FluxSheets(inner_level=1e6)
    composition = compose(disc(), scene, THEMES["dark"], NODES)
    assert "no inner sheets in these data" in composition.caption
    image, _ = paint(composition, "t", THEMES["dark"], SIZE, QUICK)
    assert data_mask(image, 0).any()


@pytest.mark.parametrize("scene", SCENES)
def test_cells_without_a_number_are_left_out_and_counted(scene):
    snapshot = disc()
    density = snapshot.cell("density").copy()
    density[0, 1, 14:17, 40:45] = np.nan
    broken = snapshot.with_cells(density=density)
    composition = compose(broken, scene_named(scene), THEMES["dark"], NODES)
    assert "15 cells without a number left out" in composition.caption
    image, _ = paint(composition, "t", THEMES["dark"], SIZE, QUICK)
    assert data_mask(image, 0).mean() > 0.05


# ---- render, recipe, refusals -------------------------------------------------------------------


def test_a_picture_carries_its_recipe(tmp_path):
    snapshot = replace(disc(), source="/some/where/wedge_0004.h5", time=4.0)
    scene = AzimuthCut(line_count=9, density_limits=(-4.0, 0.0))
    path = tmp_path / "cut.png"
    image = fv.render(snapshot, scene, path, theme="light", size=SIZE, quality="preview")
    with Image.open(path) as picture:
        np.testing.assert_array_equal(np.asarray(picture), image)
        text = picture.text[RECIPE_KEY]
    recipe = read_recipe(path)
    assert recipe["fieldviz"] == fv.__version__
    assert recipe["snapshot"]["file"] == "wedge_0004.h5"
    assert "/some" not in text
    assert recipe["snapshot"]["time"] == 4.0
    assert recipe["picture"] == {"size": [640, 360], "theme": "light", "quality": "preview"}
    assert scene_from_toml(text) == scene
    assert recipe["drawn"]["density_limits"] == [-4.0, 0.0]
    assert [p.name for p in tmp_path.iterdir()] == ["cut.png"]
    again = fv.render(snapshot, scene_from_toml(text), theme="light", size=SIZE, quality="preview")
    np.testing.assert_array_equal(again, image)


def test_files_without_a_recipe_are_refused(tmp_path):
    plain = tmp_path / "plain.png"
    Image.new("RGB", (8, 8)).save(plain)
    (tmp_path / "text.png").write_text("no picture")
    for name in ("plain.png", "text.png", "absent.png"):
        with pytest.raises(fv.FieldvizError, match="Cannot read the recipe"):
            read_recipe(tmp_path / name)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"scene": "flux-sheats"}, "did you mean 'flux-sheets'"),
        ({"theme": "drak"}, "use 'dark'"),
        ({"quality": "best"}, "still or preview"),
        ({"size": (10, 10)}, "expected a size"),
        ({"scene": "azimuth-cut", "description": FluxSheets()}, "description"),
        ({"path": "picture.jpg"}, r"ends in \.png"),
    ],
)
def test_wrong_calls_are_named(arguments, words):
    arguments = {"size": SIZE, "quality": "preview"} | arguments
    with pytest.raises(fv.FieldvizError, match=words):
        fv.render(disc(), **arguments)


def test_time_is_given_in_both_units():
    snapshot = replace(disc(), time=4.0, units=fv.UnitScales(time=fv.Unit(0.159, "yr")))
    assert time_text(snapshot) == r"$t = 4.00\ \Omega_0^{-1}$ = 0.636 yr"
    assert time_text(replace(disc(), time=4.0, gm=4.0)) == r"$t = 8.00\ \Omega_0^{-1}$"
