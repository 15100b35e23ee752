"""Lines of the scene flux-sheets: where they start, where they may be, what they show."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.description import FluxSheets
from fieldviz.scenes.flux_sheets import compose_flux_sheets
from fieldviz.scenes.theme import theme_named


def composed(snapshot, **settings):
    return compose_flux_sheets(snapshot, FluxSheets(**settings), theme_named("dark"), 300_000)


@pytest.fixture(scope="module")
def disc():
    return fv.demo_disc(shape=(8, 64, 128), precision="single")


def test_every_sheet_carries_lines_within_what_is_shown(disc):
    picture = composed(disc, line_count=60, line_height_limit=0.6)
    wanted = fv.SaltmarshDisc().sheet_radii()
    np.testing.assert_allclose(picture.drawn["sheet_radii"], wanted, rtol=0.02)
    assert 50 <= picture.drawn["lines"] <= 70
    x, y, z = np.asarray(picture.layer("field lines").mesh.points).T
    R = np.hypot(x, y)
    assert (np.abs(z) <= 0.6 * R + 0.05).all()
    # The front quarter, azimuths 270 to 360 degrees, is taken away.
    phi = np.mod(np.arctan2(y, x), 2 * np.pi)
    assert not ((phi > 1.5 * np.pi + 0.05) & (phi < 2 * np.pi - 0.05)).any()


def test_the_azimuthal_part_reverses_across_the_midplane(disc):
    mesh = composed(disc).layer("field lines").mesh
    pitch, z = np.asarray(mesh["pitch"]), np.asarray(mesh.points)[:, 2]
    assert np.median(pitch[z > 0.3]) < -0.3
    assert np.median(pitch[z < -0.3]) > 0.3
    assert np.abs(pitch).max() <= 1


def test_lines_can_be_left_out(disc):
    picture = composed(disc, line_count=0)
    assert "field lines" not in [layer.name for layer in picture.layers]
    assert not any("line" in phrase for phrase in picture.caption)


def test_without_the_azimuthal_field_the_caption_says_so(disc):
    cells = {n: disc.cell(n) for n in ("density", "magnetic_r", "magnetic_theta")}
    picture = composed(fv.Snapshot.from_grid(disc.grid, cells=cells))
    assert any("no field lines" in phrase for phrase in picture.caption)


def test_a_reversed_field_has_lines_at_the_same_places(disc):
    turned = fv.demo_disc(shape=(8, 64, 128), precision="single", reversed_field=True)
    a, b = composed(disc), composed(turned)
    np.testing.assert_allclose(a.drawn["sheet_radii"], b.drawn["sheet_radii"])
    assert a.drawn["lines"] == b.drawn["lines"]
