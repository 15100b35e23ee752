"""The scene outflow: streamlines on both sides, disc, Alfven surface, and what is missing."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.description import OutflowView, scene_from_toml, scene_named, scene_to_toml
from fieldviz.scenes.furniture import data_mask
from fieldviz.scenes.render import compose, paint
from fieldviz.scenes.stage import Quality, photograph
from fieldviz.scenes.theme import THEMES
from fieldviz.scenes.wind_lines import wind_lines

SIZE = (400, 225)
QUICK = Quality(1, 3)
NODES = 40_000


@lru_cache
def disc(**options):
    return fv.demo_disc(**({"shape": (4, 32, 48)} | options))


@lru_cache
def drawn(snapshot, theme="dark", scene=None, size=SIZE):
    composition = compose(snapshot, scene or OutflowView(line_count=48), THEMES[theme], NODES)
    image, page = paint(composition, "t", THEMES[theme], size, QUICK)
    return composition, image, page


def cells_of(snapshot, *names):
    edges = snapshot.grid.edges(0)
    return fv.Snapshot.from_arrays(*edges, cells={n: snapshot.cell(n)[0] for n in names})


VELOCITY = ("velocity_r", "velocity_theta", "velocity_phi")


@pytest.mark.parametrize("theme", ["dark", "light"])
def test_disc_lines_and_critical_surface_are_seen_with_contrast(theme):
    composition, image, page = drawn(disc(), theme)
    mask = data_mask(image, 0)[38:165]
    assert 0.1 < mask.mean() < 0.7
    luminance = (image[38:165] @ [0.2126, 0.7152, 0.0722])[mask]
    assert np.percentile(luminance, 95) - np.percentile(luminance, 5) > 90
    assert page.faults() == []
    bare = replace(composition, legends=[])
    whole, _ = paint(bare, "t", THEMES[theme], SIZE, QUICK)
    for name in ("streamlines", "Alfven surface"):
        clear = replace(composition.layer(name).material, opacity=1e-6, scalars=None)
        layers = [replace(x, material=clear) if x.name == name else x for x in bare.layers]
        other, _ = paint(replace(bare, layers=layers), "t", THEMES[theme], SIZE, QUICK)
        changed = np.abs(whole.astype(int) - other).max(axis=2) > 8
        assert np.count_nonzero(changed) > 0.002 * changed.size, name


@pytest.mark.parametrize(("wind", "sides"), [("even", (True, True)), ("one-sided", (True, False))])
def test_lines_leave_on_the_sides_that_lose_mass(wind, sides):
    lines = wind_lines(disc(wind=wind), 48, None, 0.0, None)
    ends = np.array([place[-1, 1] - place[0, 1] for place in lines.places])
    starts = np.array([place[0, 1] for place in lines.places])
    assert (np.any(starts < np.pi / 2), np.any(starts > np.pi / 2)) == sides
    # Away from the midplane: northward above, southward below.
    assert np.all(np.sign(ends) == np.sign(starts - np.pi / 2))
    assert lines.share_above == pytest.approx(1.0 if sides == (True, False) else 0.5, abs=0.01)
    assert ("no streamline below: no mass leaves there" in lines.notes) == (not sides[1])


def test_speeds_are_over_the_kepler_speed_at_the_start():
    # A flow of constant speed along r: the ratio is that speed over 1/sqrt(R_start).
    snapshot = disc()
    flow = {name: np.zeros_like(snapshot.cell(name)) for name in VELOCITY}
    flow["velocity_r"] += 0.3
    flow["velocity_theta"] += 0.2 * np.sign(snapshot.grid.cell_centres(0)[1] - np.pi / 2)[:, None]
    lines = wind_lines(snapshot.with_cells(**flow), 24, 4.0, 0.0, None)
    assert len(lines.places) >= 8
    for place, speed in zip(lines.places, lines.speeds, strict=True):
        kepler = (place[0, 0] * np.sin(place[0, 1])) ** -0.5
        np.testing.assert_allclose(speed, np.hypot(0.3, 0.2) / kepler, rtol=2e-3)


def test_whole_wedges_fill_the_ring_and_the_rest_stays_empty():
    lines = wind_lines(disc(period=0.6), 40, None, 0.3, None)
    starts = np.array([place[0, 2] for place in lines.places])
    assert starts.min() >= 0.3
    assert starts.max() <= 0.3 + 2 * np.pi
    assert len(lines.places) % 10 == 0


@pytest.mark.parametrize(
    "options",
    [
        {"thickness": 0.05, "shape": (4, 64, 48)},
        {"period": 2 * np.pi, "shape": (16, 32, 48)},
        {"levels": 2},
    ],
    ids=str,
)
def test_foreign_discs_make_tidy_pictures(options):
    composition, image, page = drawn(disc(**options), size=(400, 225))
    assert page.faults() == []
    assert composition.drawn["lines"] >= 16
    assert 0.05 < data_mask(image, 0)[38:165].mean() < 0.8


@pytest.mark.parametrize("size", [(300, 300), (270, 480)])
def test_labels_touch_neither_each_other_nor_the_data(size, monkeypatch):
    bare = []

    def noting(*arguments):
        bare.append(photograph(*arguments))
        return bare[-1]

    monkeypatch.setattr("fieldviz.scenes.render.photograph", noting)
    _, _, page = drawn.__wrapped__(disc(), size=size)
    assert page.faults() == []
    occupied = data_mask(bare[0], 0)
    for placed in page.texts:
        box = placed.box
        rows = slice(int(box.top), int(np.ceil(box.bottom)))
        columns = slice(int(box.left), int(np.ceil(box.right)))
        assert not occupied[rows, columns].any(), placed.text


@pytest.mark.parametrize(
    ("names", "words", "absent"),
    [
        (("density", *VELOCITY), "no magnetic field in this snapshot", "Alfven surface"),
        (VELOCITY, "no density: lines are spread evenly, no disc", "disc surface"),
    ],
)
def test_what_is_missing_is_named_on_the_picture(names, words, absent):
    composition, image, page = drawn(cells_of(disc(), *names))
    shown = " ".join(placed.text for placed in page.texts)
    assert words in shown
    assert absent not in [layer.name for layer in composition.layers]
    assert composition.layer("streamlines").mesh.n_points
    assert data_mask(image, 0)[38:150].mean() > 0.02


def test_a_disc_without_a_wind_is_drawn_and_said():
    snapshot = disc()
    still = {name: np.zeros_like(snapshot.cell(name)) for name in VELOCITY}
    composition, image, _ = drawn(snapshot.with_cells(**still))
    assert "no streamline: no mass leaves on either side" in composition.caption
    assert composition.subtitle == "no streamline leaves the disc"
    assert data_mask(image, 0)[38:150].mean() > 0.05
    nothing = cells_of(snapshot.with_cells(**still), *VELOCITY)
    with pytest.raises(fv.FieldvizError, match="Cannot draw the outflow: expected streamlines"):
        compose(nothing, scene_named("outflow"), THEMES["dark"], NODES)


def test_without_velocity_one_clear_line():
    with pytest.raises(fv.FieldvizError, match="Cannot draw the outflow") as caught:
        compose(cells_of(disc(), "density"), scene_named("outflow"), THEMES["dark"], NODES)
    assert "\n" not in str(caught.value)


def test_settings_survive_toml():
    scene = OutflowView(critical=False, launch_height=3.0)
    assert scene_from_toml(scene_to_toml(scene)) == scene
    with pytest.raises(fv.FieldvizError, match="critical to be true or false"):
        scene_from_toml('scene = "outflow"\n[settings]\ncritical = 1\n')
