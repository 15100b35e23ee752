"""Cells per H, quality factors, floors and NaN shares against closed forms."""

import numpy as np
import pytest
from disc_changes import (
    assert_same,
    cut_up,
    mirrored,
    only,
    refined_blocks,
    rescaled,
    rotated,
    stirred,
    with_field_times,
)

import fieldviz as fv
from fieldviz.derived.floors import find_floor
from fieldviz.derived.quality_factor import quality_word
from fieldviz.derived.resolution import resolution
from fieldviz.errors import FieldvizError, MissingFieldError

H = 0.1
GAS = ("density", "pressure")


def net_field_disc(cells_per_h=8, beta=1e4, n_phi=4, h=H, **constants):
    """Isothermal in theta, B_z of one beta at the midplane, B_phi three times as strong."""
    step = h / cells_per_h
    theta = np.pi / 2 + step * np.arange(-4 * cells_per_h, 4 * cells_per_h + 1)
    r_edges, phi = np.geomspace(1, 2, 33), np.linspace(0, 0.4, n_phi + 1)
    r, t = 0.5 * (r_edges[1:] + r_edges[:-1]), 0.5 * (theta[1:] + theta[:-1])[:, None]
    shape = (n_phi, len(t), len(r))
    density = r**-1.5 * np.exp(-0.5 * ((t - np.pi / 2) / h) ** 2)
    # The middles of the two cells at the midplane are half a step away from it.
    edge = np.exp(-0.5 * (0.5 / cells_per_h) ** 2)
    field = np.sqrt(2 * r**-2.5 * h**2 / beta) * np.ones(shape)
    cells = {
        "density": density / edge,
        "pressure": density / edge * h**2 / r,
        "magnetic_theta": -field,
        "magnetic_phi": 3 * field,
    }
    cells = {name: np.broadcast_to(values, shape) for name, values in cells.items()}
    return fv.Snapshot.from_arrays(r_edges, theta, phi, cells=cells, **constants)


def test_cells_per_scale_height_of_the_demo():
    """H/dr, h/dtheta and H/(R dphi) of a log-spaced mesh of 128 x 96 x 32, by hand."""
    (level,) = resolution(fv.demo_disc(shape=(32, 96, 128))).levels
    expected = {
        "r": 0.5 * H / np.tanh(np.log(5) / 256),
        "theta": H / (1.4 / 96),
        "phi": H / (np.pi / 4 / 32),
    }
    assert expected == pytest.approx({"r": 7.953, "theta": 6.857143, "phi": 4.074367}, rel=1e-4)
    for axis, value in expected.items():
        assert level.median[axis] == pytest.approx(value, rel=5e-5)
        assert level.least[axis] == pytest.approx(value, rel=5e-5)


def test_cells_per_scale_height_follow_the_local_thickness():
    """P/rho the same everywhere: h ~ sqrt(r), so the least is at the inner edge."""
    disc = net_field_disc()
    even = disc.with_cells(pressure=0.01 * disc.cell("density"))
    (level,) = resolution(even).levels
    r = 0.5 * (disc.grid.r_edges[0, 1:] + disc.grid.r_edges[0, :-1])
    assert level.least["theta"] == pytest.approx(8 * np.sqrt(r[0]), rel=1e-9)
    assert level.median["theta"] == pytest.approx(8 * np.median(np.sqrt(r)), rel=1e-9)


def test_each_level_has_its_own_count():
    def gas(r, theta, phi):
        density = r**-1.5 * np.exp(-0.5 * ((theta - np.pi / 2) / H) ** 2) + 0 * phi
        return {"density": density, "pressure": density * H**2 / r}

    edges = (np.linspace(0, 0.4, 9), np.pi / 2 + np.linspace(-0.4, 0.4, 65), np.geomspace(1, 2, 17))
    found = resolution(refined_blocks(edges, gas, lambda k, j, i: i == 0))
    coarse, fine = found.levels
    assert (coarse.level, fine.level) == (0, 1)
    assert (coarse.n_blocks, fine.n_blocks) == (4, 32)
    assert (coarse.n_midplane, fine.n_midplane) == (4, 16)
    assert coarse.median["theta"] == pytest.approx(8, rel=1e-3)
    assert fine.median["theta"] == pytest.approx(16, rel=1e-3)
    assert fine.median["phi"] == pytest.approx(2 * coarse.median["phi"], rel=1e-3)


def test_a_level_away_from_the_midplane_has_no_count():
    coarse, fine = resolution(fv.demo_disc(shape=(2, 32, 32), levels=2)).levels
    assert coarse.n_midplane == 0
    assert np.isnan(coarse.median["theta"])
    assert fine.n_midplane > 0
    assert np.isfinite(fine.median["theta"])


@pytest.mark.parametrize(("cells", "beta"), [(8, 1e4), (16, 1e3), (8, 10)])
def test_net_quality_factor_is_that_of_the_formula(cells, beta):
    """Q_z = 2 pi sqrt(2/beta_z) N."""
    found = resolution(net_field_disc(cells, beta))
    np.testing.assert_allclose(found.q_theta.net, 2 * np.pi * np.sqrt(2 / beta) * cells, rtol=1e-9)


def test_background_of_the_demo():
    """The demo's background field alone at 96 cells over 1.4 rad: Q_theta 0.60931."""
    disc = fv.demo_disc(shape=(2, 96, 64))
    r = 0.5 * (disc.grid.r_edges[0, 1:] + disc.grid.r_edges[0, :-1])
    field = fv.SaltmarshDisc().background_field * r**-1.25
    shape = disc.grid.block_shape
    theta = 0.5 * (disc.grid.theta_edges[0, 1:] + disc.grid.theta_edges[0, :-1])
    density = r**-1.5 * np.ones((1, len(theta), 1))
    cells = {"density": density, "pressure": density * H**2 / r, "magnetic_theta": -field}
    plain = fv.Snapshot.from_arrays(
        disc.grid.r_edges[0],
        disc.grid.theta_edges[0],
        disc.grid.phi_edges[0],
        cells={name: np.broadcast_to(values, shape) for name, values in cells.items()},
    )
    found = resolution(plain)
    np.testing.assert_allclose(found.q_theta.net, 0.6093096600902902, rtol=1e-9)
    # With an even density the band says the same.
    np.testing.assert_allclose(found.q_theta.actual, 0.6093096600902902, rtol=1e-9)
    assert found.q_phi is None
    assert found.word is None


def test_actual_field_counts_fluctuations_and_the_density_of_the_band():
    """rho = exp(-x^2/2): its mean within 2 H is 0.598 of the midplane's, to h^2."""
    disc = net_field_disc(16, 1e3)
    found = resolution(disc)
    x = (np.arange(32) + 0.5) / 16
    mean = np.average(np.exp(-0.5 * x**2), weights=np.cos(H * x)) / np.exp(-0.5 / 32**2)
    expected = 2 * np.pi * np.sqrt(2 / 1e3) * 16 / np.sqrt(mean)
    np.testing.assert_allclose(found.q_theta.actual, expected, rtol=1e-4)
    turn = np.array([1.0, -1, 3, -3])[:, None, None]
    stirred_field = resolution(disc.with_cells(magnetic_theta=turn * disc.cell("magnetic_theta")))
    np.testing.assert_allclose(stirred_field.q_theta.actual, np.sqrt(5) * expected, rtol=1e-4)
    np.testing.assert_allclose(stirred_field.q_theta.net, 0, atol=1e-12)


def test_along_phi_the_cell_is_r_sin_theta_dphi():
    found = resolution(net_field_disc(8, 1e3))
    ratio = found.q_phi.actual / found.q_theta.actual
    # 3 times the field; cells of 0.1 rad against 0.0125, times <sin theta> of the band.
    angle = 0.2
    sine = (angle / 2 + np.sin(2 * angle) / 4) / np.sin(angle)
    np.testing.assert_allclose(ratio, 3 * 0.0125 / (0.1 * sine), rtol=1e-3)
    np.testing.assert_allclose(found.q_phi.net, found.q_phi.actual, rtol=1e-12)


def test_share_of_the_volume_above_the_threshold():
    """Field only at r < r_mid, strong enough everywhere there."""
    disc = net_field_disc(8, 10)
    r_edges = disc.grid.r_edges[0]
    field = disc.cell("magnetic_theta").copy()
    field[..., 16:] = 0
    found = resolution(disc.with_cells(magnetic_theta=field)).q_theta
    inner = (r_edges[16] ** 3 - r_edges[0] ** 3) / (r_edges[-1] ** 3 - r_edges[0] ** 3)
    assert found.share_resolved == pytest.approx(inner, rel=1e-12)
    assert resolution(disc).q_theta.share_resolved == 1.0
    assert resolution(net_field_disc(8, 1e6)).q_theta.share_resolved == 0.0
    assert found.threshold == 10


def test_share_of_the_volume_is_of_the_band_only():
    """Field only beyond 2 H: no cell of the band has any."""
    disc = net_field_disc(8, 10)
    theta = 0.5 * (disc.grid.theta_edges[0, 1:] + disc.grid.theta_edges[0, :-1])
    outside = np.abs(theta - np.pi / 2) > 0.2
    away = disc.with_cells(magnetic_theta=outside[:, None] * disc.cell("magnetic_theta"))
    assert resolution(away).q_theta.share_resolved == 0.0
    assert resolution(away, height=3.0).q_theta.share_resolved > 0.2


def test_net_quality_factor_takes_the_cells_at_the_midplane_of_a_stretched_mesh():
    mesh = fv.demo_disc(shape=(1, 64, 8), midplane_stretch=0.8)
    theta = mesh.grid.theta_edges[0]
    step = theta[33] - theta[32]
    assert step < 0.3 * (theta[1] - theta[0])
    r = 0.5 * (mesh.grid.r_edges[0, 1:] + mesh.grid.r_edges[0, :-1])
    one = np.ones((1, 64, 8))
    density = r**-1.5 * one
    pressure = density * H**2 / r
    cells = {
        "density": density,
        "pressure": pressure,
        "magnetic_theta": np.sqrt(2 * pressure / 100),
    }
    disc = fv.Snapshot.from_arrays(mesh.grid.r_edges[0], theta, mesh.grid.phi_edges[0], cells=cells)
    found = resolution(disc).q_theta
    expected = 2 * np.pi * np.sqrt(2 / 100) * H / step
    np.testing.assert_allclose(found.net, expected, rtol=1e-9)
    # Cells of the band are larger in the mean.
    assert (found.actual < 0.95 * expected).all()


def test_rotation_of_a_heavier_star_and_gaussian_fields():
    here = resolution(net_field_disc(8, 1e3))
    heavy = resolution(net_field_disc(8, 1e3, gm=4.0), thickness=H)
    np.testing.assert_allclose(heavy.q_theta.actual, here.q_theta.actual / 2, rtol=1e-4)
    gaussian = resolution(net_field_disc(8, 1e3, mu0=4 * np.pi))
    np.testing.assert_allclose(
        gaussian.q_phi.actual, here.q_phi.actual / np.sqrt(4 * np.pi), rtol=1e-12
    )
    assert gaussian.q_theta.share_resolved <= here.q_theta.share_resolved


@pytest.mark.parametrize(
    ("q", "word"),
    [
        ((5.9, 100), "unresolved"),
        ((100, 5.9), "unresolved"),
        ((10, 20), "resolved"),
        ((9.9, 20), "marginal"),
        ((8, 32), "resolved"),  # a product of 256
        ((7, 30), "marginal"),
        ((10, None), "resolved"),
        ((9.9, None), "marginal"),
        ((5, None), "unresolved"),
        ((np.nan, 20), ""),
        ((20, np.nan), ""),
    ],
)
def test_words(q, word):
    assert quality_word(*q) == word


def test_words_of_a_snapshot():
    found = resolution(net_field_disc(8, 1e4))
    assert found.word == "unresolved"
    assert found.sentence.startswith("unresolved: cells per H")
    assert set(found.words) == {"unresolved"}
    strong = resolution(net_field_disc(16, 10, n_phi=32))
    assert strong.word == "resolved"
    text = " ".join(strong.notes)
    for part in ("ideal MHD", "sqrt(16/15)", "rule of thumb", "2.84 for 32 cells"):
        assert part in text


def test_one_azimuth_cell():
    found = resolution(net_field_disc(16, 10, n_phi=1))
    assert found.q_phi is None
    assert np.isnan(found.levels[0].median["phi"])
    assert found.word == "resolved"
    assert any("theta decides alone" in note for note in found.notes)
    assert "phi" not in found.sentence


def test_what_must_change_nothing():
    disc = stirred()
    here = resolution(disc)
    assert_same(here, resolution(rotated(disc, 3)), rtol=1e-13, atol=1e-13)
    assert_same(here, resolution(with_field_times(disc, -1)), rtol=1e-14)
    assert_same(here, resolution(cut_up(disc, (2, 4, 4))), rtol=1e-11, leave_out=("levels",))
    assert_same(here, resolution(mirrored(disc)), rtol=1e-11)
    scaled = resolution(rescaled(disc, 3.0))
    assert_same(here, scaled, rtol=1e-11)
    assert scaled.word == here.word


def test_blocks_do_not_change_the_counts():
    disc = stirred()
    (here,), (there,) = resolution(disc).levels, resolution(cut_up(disc, (2, 4, 4))).levels
    assert there.median == pytest.approx(here.median, rel=1e-12)
    assert there.least == pytest.approx(here.least, rel=1e-12)
    assert there.n_midplane == 2 * 2 * 4  # blocks that touch it from both sides


def test_what_is_missing_is_said():
    disc = stirred(shape=(4, 32, 24))
    found = resolution(only(disc, *GAS))
    assert found.q_theta is found.q_phi is found.word is found.words is None
    assert any("magnetic_theta: no such field" in note for note in found.notes)
    found = resolution(only(disc, "density"))
    assert found.pressure_floor is None
    assert found.levels[0].median["theta"] > 0
    with pytest.raises(MissingFieldError, match="density"):
        resolution(only(disc, "pressure"))
    with pytest.raises(FieldvizError, match="height in H"):
        resolution(disc, height=0)
    with pytest.raises(FieldvizError, match="floor of density"):
        resolution(disc, density_floor=-1)


def floored(disc, level):
    return disc.with_cells(density=np.maximum(disc.cell("density"), level))


def test_a_floor_is_found_and_its_share_of_volume():
    disc = net_field_disc()
    level = float(np.quantile(disc.cell("density"), 0.25))
    low = floored(disc, level)
    found = find_floor(low, "density")
    at = low.cell("density")[0] <= 1.01 * level
    volumes = disc.grid.volumes(0)
    assert found.value == level
    assert not found.given
    assert found.share_of_cells == pytest.approx(at.mean())
    assert found.share_of_volume == pytest.approx(volumes[at].sum() / volumes.sum())
    assert "density floor" in resolution(low).notes[-2]
    parts = find_floor(cut_up(low, (2, 4, 4)), "density")
    assert parts.share_of_volume == pytest.approx(found.share_of_volume)


def test_a_smooth_density_has_no_floor_and_a_given_one_is_believed():
    disc = net_field_disc()
    found = find_floor(disc, "density")
    assert found.value is None
    assert "no floor of the density found" in found.notes[0]
    given = find_floor(disc, "density", 1e-9)
    assert given.value == 1e-9
    assert given.share_of_volume == 0
    even = find_floor(disc.with_cells(density=np.ones_like(disc.cell("density"))), "density")
    assert even.value is None
    assert "the same everywhere" in even.notes[0]
    assert find_floor(disc, "temperature") is None


def test_nan_is_counted_field_by_field_and_does_not_spread():
    disc = net_field_disc()
    field = disc.cell("magnetic_phi").copy()
    field[0, 0, :2, :4] = np.nan
    found = resolution(disc.with_cells(magnetic_phi=field))
    assert found.nan_shares["magnetic_phi"] == pytest.approx(8 / field.size)
    assert found.nan_shares["density"] == 0
    assert np.isfinite(found.q_phi.actual).all()
    assert any(note.startswith("NaN or infinite cells: magnetic_phi") for note in found.notes)
