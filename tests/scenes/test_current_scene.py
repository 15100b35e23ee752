"""The scene current-sheet: where the surface lies, what colours it, and what is missing."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.description import CurrentSheetView
from fieldviz.scenes.furniture import data_mask
from fieldviz.scenes.render import compose, paint
from fieldviz.scenes.stage import Quality, photograph
from fieldviz.scenes.theme import THEMES

SIZE = (400, 225)
QUICK = Quality(1, 3)
NODES = 40_000
MAGNETIC = ("magnetic_r", "magnetic_theta", "magnetic_phi")


@lru_cache
def disc(**options):
    return fv.demo_disc(**({"shape": (4, 48, 48)} | options))


@lru_cache
def composed(snapshot, theme="dark", **settings):
    scene = CurrentSheetView(**({"line_count": 20} | settings))
    return compose(snapshot, scene, THEMES[theme], NODES)


def painted(composition, theme="dark", size=SIZE):
    return paint(composition, "t", THEMES[theme], size, QUICK)


def cells_of(snapshot, *names):
    edges = snapshot.grid.edges(0)
    return fv.Snapshot.from_arrays(*edges, cells={n: snapshot.cell(n)[0] for n in names})


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_every_layer_is_seen_with_contrast(theme):
    composition = composed(disc(), theme)
    image, page = painted(composition, theme)
    mask = data_mask(image, 0)[35:165]
    assert 0.1 < mask.mean() < 0.7
    luminance = (image[35:165] @ [0.2126, 0.7152, 0.0722])[mask]
    assert np.percentile(luminance, 95) - np.percentile(luminance, 5) > 90
    assert page.faults() == []
    bare = replace(composition, legends=[])
    whole, _ = painted(bare, theme)
    for name in ("magnetic midplane", "field lines"):
        clear = replace(composition.layer(name).material, opacity=1e-6, scalars=None)
        layers = [replace(x, material=clear) if x.name == name else x for x in bare.layers]
        other, _ = painted(replace(bare, layers=layers), theme)
        changed = np.abs(whole.astype(int) - other).max(axis=2) > 8
        assert np.count_nonzero(changed) > 0.003 * changed.size, name


def test_the_surface_lies_where_the_field_turns_round():
    # The demo reverses B_phi at cos(theta) = shift: 1.2 H above the midplane.
    composition = composed(disc(shape=(4, 64, 48), midplane_shift=0.12))
    points = np.asarray(composition.layer("magnetic midplane").mesh.points)
    cosine = points[:, 2] / np.linalg.norm(points, axis=1)
    assert np.median(cosine) == pytest.approx(0.12, abs=0.01)
    assert np.abs(cosine - 0.12).max() < 0.03
    shown = " ".join(composition.caption)
    assert "surface at +1.20 H" in shown


def test_the_current_is_that_of_the_snapshot():
    snapshot = disc()
    composition = composed(snapshot, current_exponent=0.0, height_limit=0.4)
    section = composition.layer("sections").mesh
    points = np.asarray(section.points, dtype=float)
    r = np.linalg.norm(points, axis=1)
    inside = (r > 1.2) & (r < 4.5)
    theta = np.arccos(points[:, 2] / r)
    phi = np.mod(np.arctan2(points[:, 1], points[:, 0]), snapshot.grid.period)
    places = np.stack([r, theta, phi], axis=-1)[inside]
    strength = fv.current_density(snapshot).magnitude
    there = fv.sample(snapshot.with_cells(j=strength), places, ("j",))[0]["j"]
    drawn = np.asarray(section.point_data["current"])[inside]
    assert np.corrcoef(drawn, there)[0, 1] > 0.97
    assert drawn.mean() == pytest.approx(there.mean(), rel=0.05)


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_sections_have_exactly_the_colours_of_the_bar(theme):
    composition = replace(composed(disc(), theme), legends=[])
    names = ("magnetic midplane", "wall outline", "field lines")
    image, _ = painted(composition.without(*names), theme)
    bar = np.rint(255 * THEMES[theme].colour_map("current")(np.arange(256))[:, :3])
    mask = data_mask(image, 0)
    mask[:45], mask[165:] = False, False
    colours = image[mask].astype(int)
    away = np.abs(colours[:, None] - bar).max(axis=2).min(axis=1)
    assert len(colours) > 1000
    assert np.percentile(away, 90) <= 2


@pytest.mark.parametrize(
    "options",
    [
        {"thickness": 0.05, "shape": (4, 96, 48)},
        {"period": 2 * np.pi, "shape": (16, 32, 48)},
        {"levels": 2},
        {"reversed_field": True},
        {"shape": (1, 48, 48)},
    ],
    ids=str,
)
def test_foreign_discs_make_tidy_pictures(options):
    composition = composed(disc(**options))
    assert composition.layer("magnetic midplane").mesh.n_points > 100
    image, page = painted(composition)
    assert page.faults() == []
    assert 0.05 < data_mask(image, 0)[35:165].mean() < 0.8


@pytest.mark.parametrize("size", [(300, 300), (270, 480)])
def test_labels_touch_neither_each_other_nor_the_data(size, monkeypatch):
    bare = []

    def noting(*arguments):
        bare.append(photograph(*arguments))
        return bare[-1]

    monkeypatch.setattr("fieldviz.scenes.render.photograph", noting)
    _, page = painted(composed(disc()), size=size)
    assert page.faults() == []
    occupied = data_mask(bare[0], 0)
    for placed in page.texts:
        box = placed.box
        rows = slice(int(box.top), int(np.ceil(box.bottom)))
        columns = slice(int(box.left), int(np.ceil(box.right)))
        assert not occupied[rows, columns].any(), placed.text


def test_no_reversal_leaves_the_sections_and_says_so():
    composition = composed(disc(wind="one-sided"))
    assert not composition.layer("magnetic midplane").mesh.n_points
    assert "does not change sign" in composition.subtitle
    assert any(phrase.startswith("no surface:") for phrase in composition.caption)
    image, _ = painted(composition)
    assert data_mask(image, 0)[35:165].mean() > 0.05


def test_columns_without_a_reversal_leave_holes():
    snapshot = disc()
    B_phi = snapshot.cell("magnetic_phi").copy()
    B_phi[..., 20:34] = np.abs(B_phi[..., 20:34]) + 1e-3
    composition = composed(snapshot.with_cells(magnetic_phi=B_phi))
    mesh = composition.layer("magnetic midplane").mesh
    used = np.unique(mesh.regular_faces)
    r = np.linalg.norm(np.asarray(mesh.points)[used], axis=1)
    middles = snapshot.grid.cell_centres(0)[0]
    # Smoothing over 1 H in r reaches a little into the gap from either side.
    assert not ((r > middles[24]) & (r < middles[30])).any()
    assert (r < middles[18]).any()
    assert (r > middles[36]).any()


def test_what_is_missing_is_named_on_the_picture():
    composition = composed(cells_of(disc(), *MAGNETIC))
    _, page = painted(composition)
    shown = " ".join(placed.text for placed in page.texts)
    assert "no density in this snapshot" in shown
    assert composition.layer("sections").mesh.n_points


def test_without_a_field_one_clear_line():
    with pytest.raises(fv.FieldvizError, match="Cannot draw the current sheet") as caught:
        composed(cells_of(disc(), "density", "magnetic_r"))
    assert "magnetic_theta, magnetic_phi" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_whole_ring_has_no_sections():
    composition = composed(disc(), shown_azimuth=360.0)
    assert not composition.layer("sections").mesh.n_points
    assert "no sections" not in " ".join(composition.caption)
