"""Stresses against closed forms, and against the torque of the wind's symmetry."""

import numpy as np
import pytest
from disc_changes import (
    assert_same,
    cell_fields,
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
from fieldviz.derived.stresses import stresses
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.demo.state import disc_state

PHI, R = np.linspace(0, 0.5, 17), np.geomspace(1, 2, 9)
THETA = np.pi / 2 + np.linspace(-0.6, 0.6, 25)
H = 0.1


def waves(r, theta, phi):
    """Every stress known: constants plus cos(m phi), a whole number of waves over the period."""
    c = np.cos(8 * np.pi * phi)
    one = np.ones(np.broadcast_shapes(r.shape, theta.shape, phi.shape))
    kepler = (r * np.sin(theta)) ** -0.5
    return {
        "density": 2.0 * one,
        "pressure": 2.0 * H**2 / r * one,
        "velocity_r": 0.3 + 0.02 * c * one,
        "velocity_theta": -0.1 + 0.05 * c * one,
        "velocity_phi": kepler + 0.01 + 0.04 * c * one,
        "magnetic_r": 0.03 - 0.02 * c * one,
        "magnetic_theta": 0.05 + 0.01 * c * one,
        "magnetic_phi": -0.04 + 0.06 * c * one,
    }


def wave_disc(**constants):
    middles = [0.5 * (e[1:] + e[:-1]) for e in (R, THETA, PHI)]
    cells = waves(middles[0], middles[1][:, None], middles[2][:, None, None])
    return fv.Snapshot.from_arrays(R, THETA, PHI, cells=cells, **constants)


def test_every_part_of_known_waves():
    found = stresses(wave_disc())
    np.testing.assert_allclose(found.band.maxwell_mean, 0.03 * 0.04, rtol=1e-12)
    np.testing.assert_allclose(found.band.maxwell_turbulent, 0.02 * 0.06 / 2, rtol=1e-12)
    np.testing.assert_allclose(found.band.reynolds, 2 * 0.02 * 0.04 / 2, rtol=1e-12)
    np.testing.assert_allclose(found.band.maxwell, 0.0018, rtol=1e-12)
    np.testing.assert_allclose(found.band.alpha, 0.0026 / (0.02 / found.r), rtol=1e-12)
    upper, lower = found.wind
    for side, sign in ((upper, -1), (lower, 1)):
        np.testing.assert_allclose(side.reynolds, sign * 2 * 0.05 * 0.04 / 2, rtol=1e-12)
        np.testing.assert_allclose(side.maxwell_mean, sign * 0.05 * 0.04, rtol=1e-12)
        np.testing.assert_allclose(side.maxwell_turbulent, -sign * 0.01 * 0.06 / 2, rtol=1e-12)
    np.testing.assert_allclose(found.alpha_wind[0], found.alpha_wind[1])
    np.testing.assert_allclose(
        found.alpha_wind[1], (0.002 + 0.002 - 0.0003) / (0.02 / found.r), rtol=1e-12
    )


def test_total_alpha_is_the_ratio_of_integrals():
    found = stresses(wave_disc())
    volume = np.diff(R**3)
    pressure = 0.02 / (0.5 * (R[1:] + R[:-1]))
    assert found.alpha == pytest.approx(
        0.0026 * volume.sum() / (pressure * volume).sum(), rel=1e-12
    )
    assert found.alpha == pytest.approx(found.alpha_maxwell + found.alpha_reynolds)
    assert "T = alpha P" in found.sentence
    assert any("T = 1.5 alpha P" in note for note in found.notes)


def test_kepler_rotation_adds_the_drift():
    found = stresses(wave_disc(), rotation="kepler")
    np.testing.assert_allclose(found.band.reynolds, 2 * (0.0004 + 0.3 * 0.01), rtol=1e-12)
    np.testing.assert_allclose(found.wind[1].reynolds, 2 * (0.001 - 0.1 * 0.01), atol=1e-15)
    assert any("sqrt(GM/R)" in note for note in found.notes)


def test_gaussian_fields_are_divided_by_4_pi():
    here, there = stresses(wave_disc()), stresses(wave_disc(mu0=4 * np.pi))
    np.testing.assert_allclose(there.band.maxwell, here.band.maxwell / (4 * np.pi))
    np.testing.assert_allclose(there.band.reynolds, here.band.reynolds)


@pytest.mark.parametrize("where", [(0, None, None), (None, 0, None), (None, None, 1), (0, 1, 0)])
def test_levels_change_little(where):
    def refine(*place):
        return all(w is None or w == p for w, p in zip(where, place, strict=True))

    edges = (np.linspace(0, 0.5, 33), np.pi / 2 + np.linspace(-0.6, 0.6, 49), R)
    snapshot = refined_blocks(edges, waves, refine)
    assert snapshot.grid.levels == [0, 1]
    found = stresses(snapshot)
    np.testing.assert_allclose(found.band.maxwell, 0.0018, rtol=1e-3)
    np.testing.assert_allclose(found.band.reynolds, 8e-4, rtol=2e-3)


def test_mass_weighting_by_hand():
    """Density that goes with v_r: <rho v_r dv_phi> with dv_phi from the mass-weighted mean."""
    disc = wave_disc()
    phi = 0.5 * (PHI[1:] + PHI[:-1])
    wave = np.cos(8 * np.pi * phi + 0.7)
    rho = 2 + wave
    disc = disc.with_cells(density=rho[:, None, None] * np.ones(disc.cell("density").shape))
    found = stresses(disc, thickness=0.1)
    c = np.cos(8 * np.pi * phi)
    v_r, v_phi = 0.3 + 0.02 * c, 0.04 * c
    expected = np.mean(rho * v_r * (v_phi - np.average(v_phi, weights=rho)))
    np.testing.assert_allclose(found.band.reynolds, expected, rtol=1e-11)


def test_bands_of_other_heights_and_the_midplane_pressure():
    """P of a Gaussian in theta: int over the band over its value at the midplane."""
    theta = np.pi / 2 + np.linspace(-0.6, 0.6, 481)
    t = 0.5 * (theta[1:] + theta[:-1])[:, None]
    shape = (1, 480, 2)
    bell = np.broadcast_to(np.exp(-0.5 * ((t - np.pi / 2) / 0.1) ** 2), shape)
    cells = {
        "density": bell,
        "pressure": 0.01 * bell,
        "magnetic_r": np.full(shape, 0.1),
        "magnetic_phi": np.full(shape, -0.1),
    }
    disc = fv.Snapshot.from_arrays([0.99, 1, 1.01], theta, [0, 1], cells=cells)
    x = np.linspace(-0.2, 0.2, 20001)
    mean = np.trapezoid(np.exp(-50 * x**2) * np.cos(x), x) / np.trapezoid(np.cos(x), x)
    kept = stresses(disc, thickness=0.1)
    assert kept.alpha_maxwell == pytest.approx(1 / mean, rel=1e-4)
    middle = stresses(disc, thickness=0.1, relative_to="midplane")
    assert middle.alpha_maxwell == pytest.approx(1, rel=1e-4)
    everything = stresses(disc, thickness=0.1, height=None)
    x = np.linspace(-0.6, 0.6, 20001)
    mean = np.trapezoid(np.exp(-50 * x**2) * np.cos(x), x) / np.trapezoid(np.cos(x), x)
    assert everything.alpha_maxwell == pytest.approx(1 / mean, rel=1e-4)


def test_wind_stress_of_the_demo_converges_to_its_closed_form():
    """-T_thetaphi = B_theta B_phi above; B_theta = -psi0'(R_f) g/(r sin theta)."""
    disc = fv.SaltmarshDisc()
    errors = []
    for n in (48, 96, 192):
        found = stresses(fv.demo_disc(shape=(2, n, 2 * n)), thickness=0.1)
        upper, lower = found.wind
        r, theta = found.r, upper.theta
        g = float(disc.footpoint_factor(theta))
        B_theta = -disc.radial_flux_density(r * g) * g / (r * np.sin(theta))
        exact = B_theta * disc_state(disc, r, np.asarray(theta)).magnetic_phi
        errors.append(abs(upper.maxwell.sum() / exact.sum() - 1))
        np.testing.assert_allclose(lower.maxwell, upper.maxwell, rtol=1e-9)
        assert upper.extracting == lower.extracting == 1.0
    assert errors[-1] < 0.006
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.8
    # Sheets are 0.25 H wide and lean: by radius the error is larger.
    assert np.mean(np.abs(upper.maxwell - exact)) < 0.05 * np.mean(np.abs(exact))


@pytest.mark.parametrize("wind", ["even", "odd", "one-sided"])
def test_the_wind_stress_adds_up_to_the_torque_of_the_symmetry(wind):
    """The same integral over the same cones by other code: int R T dA."""
    disc = fv.demo_disc(shape=(4, 64, 96), wind=wind)
    torque = fv.wind_symmetry(disc, thickness=0.1).torque
    for cone, expected in zip(
        stresses(disc, thickness=0.1).wind, (torque.upper, torque.lower), strict=True
    ):
        r_edges = disc.grid.r_edges[0]
        r = 0.5 * (r_edges[1:] + r_edges[:-1])
        area = np.diff(r_edges**2) / 2 * np.sin(cone.theta) * disc.grid.period
        found = np.sum(cone.maxwell * r * np.sin(cone.theta) * area)
        assert found == pytest.approx(expected, rel=2e-3, abs=1e-9)


def test_odd_winds_extract_on_one_side_only():
    upper, lower = stresses(fv.demo_disc(shape=(2, 64, 96), wind="odd")).wind
    assert upper.extracting == 1.0
    assert lower.extracting == 0.0


def test_alpha_of_the_demo_converges():
    alphas = [stresses(fv.demo_disc(shape=(1, n, n))).alpha_maxwell for n in (48, 96, 192, 384)]
    errors = np.abs(np.array(alphas[:3]) - alphas[3])
    assert errors[2] < 0.02 * alphas[3]
    assert np.log2(errors[0] / errors[1]) > 1.5


def test_what_must_change_nothing():
    disc = stirred()
    here = stresses(disc)
    assert_same(here, stresses(rotated(disc, 3)), rtol=1e-11, atol=1e-13)
    assert_same(here, stresses(cut_up(disc, (2, 4, 4))), rtol=1e-9, atol=1e-12)
    assert_same(here, stresses(with_field_times(disc, -1)), rtol=1e-13)
    back = stresses(mirrored(disc))
    assert back.alpha == pytest.approx(here.alpha, rel=1e-11)
    np.testing.assert_allclose(back.wind[1].total, here.wind[0].total, rtol=1e-8, atol=1e-18)
    np.testing.assert_allclose(back.alpha_wind[0], here.alpha_wind[1], rtol=1e-8, atol=1e-16)
    scaled = stresses(rescaled(disc, 7.0))
    for name in ("alpha", "alpha_maxwell", "alpha_reynolds"):
        assert getattr(scaled, name) == pytest.approx(getattr(here, name), rel=1e-12)
    np.testing.assert_allclose(scaled.alpha_wind, here.alpha_wind, rtol=1e-10, atol=1e-18)
    np.testing.assert_allclose(scaled.band.maxwell, 7 * here.band.maxwell, rtol=1e-11)


def test_alpha_is_unchanged_by_rotation_to_1e_13():
    disc = stirred()
    for count in (1, 5):
        assert stresses(rotated(disc, count)).alpha == pytest.approx(
            stresses(disc).alpha, rel=1e-13
        )


def test_one_azimuth_cell_has_no_deviations_and_they_are_not_zero():
    disc = cell_fields(fv.demo_disc(shape=(1, 64, 48)))
    found = stresses(disc)
    assert found.band.reynolds is found.band.maxwell_turbulent is found.alpha is None
    assert found.alpha_wind == (None, None)
    assert found.alpha_maxwell > 0
    assert any("one cell in azimuth" in note for note in found.notes)
    assert stresses(disc, rotation="kepler").alpha is not None


def test_what_is_missing_is_said():
    disc = stirred(shape=(4, 48, 24))
    gas = ("density", "pressure", "velocity_r", "velocity_theta", "velocity_phi")
    found = stresses(only(disc, *gas))
    assert found.band.maxwell is found.alpha_maxwell is found.alpha is None
    assert found.alpha_reynolds == pytest.approx(stresses(disc).alpha_reynolds, rel=1e-12)
    assert found.wind[0].total is found.wind[0].extracting is None
    assert any("Maxwell stresses that need magnetic_r" in note for note in found.notes)
    field = ("magnetic_r", "magnetic_theta", "magnetic_phi")
    found = stresses(only(disc, "density", *field))
    assert found.alpha_maxwell is found.midplane_pressure is None
    assert found.band.maxwell is not None
    assert found.band.reynolds is None
    assert any("no alpha" in note for note in found.notes)
    assert found.sentence.startswith("no alpha")
    with pytest.raises(MissingFieldError, match="density"):
        stresses(only(disc, "pressure", *field))


def test_nan_cells_are_counted():
    disc = stirred(shape=(4, 48, 24))
    spoilt = disc.cell("magnetic_phi").copy()
    spoilt[0, 2, 24, 3] = np.nan
    found = stresses(disc.with_cells(magnetic_phi=spoilt))
    assert np.isfinite(found.alpha)
    assert any(note.startswith("1 cells") for note in found.notes)


def test_wrong_choices_are_refused():
    disc = stirred(shape=(2, 32, 16))
    for wrong, match in (
        ({"height": -1}, "height in H"),
        ({"cone_height": 0}, "cone_height"),
        ({"rotation": "solid"}, "mean, kepler"),
        ({"relative_to": "sun"}, "band or midplane"),
        ({"thickness": 3}, "H/R of 0 to 1"),
    ):
        with pytest.raises(FieldvizError, match=match):
            stresses(disc, **wrong)
