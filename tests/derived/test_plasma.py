"""Plasma beta, Alfven speeds, Elsasser numbers and Mach surfaces against closed forms."""

from itertools import pairwise

import numpy as np
import pytest
from disc_changes import (
    assert_same,
    cell_fields,
    cut_up,
    mirrored,
    only,
    rescaled,
    rotated,
    stirred,
    with_field_times,
)
from hypothesis import given
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.derived.mach import mach_numbers, mach_surface, magnetosonic_speeds
from fieldviz.derived.plasma import alfven_speed, plasma, plasma_beta
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.demo.state import disc_state

DISC = fv.SaltmarshDisc()
FIELD = ("magnetic_r", "magnetic_theta", "magnetic_phi")


def poloidal_field(r, theta):
    """B_r and B_theta of the demo from psi = psi0(r g): derivatives of g by differences."""
    e = 1e-6
    g = DISC.footpoint_factor(theta)
    slope = (DISC.footpoint_factor(theta + e) - DISC.footpoint_factor(theta - e)) / (2 * e)
    density = DISC.radial_flux_density(r * g)
    return density * slope / (r * np.sin(theta)), -density * g / (r * np.sin(theta))


def exact_beta(r, theta):
    state = disc_state(DISC, r, theta)
    B_r, B_theta = poloidal_field(r, theta)
    return 2 * state.pressure / (B_r**2 + B_theta**2 + state.magnetic_phi**2)


def test_beta_of_the_demo_converges_to_the_closed_form():
    errors = []
    for n in (48, 96, 192):
        found = plasma(fv.demo_disc(shape=(2, n, n)))
        r, theta = (0.5 * (e[1:] + e[:-1]) for e in (found.r_edges, found.theta_edges))
        exact = exact_beta(r, theta[:, None])
        errors.append(np.median(np.abs(found.beta_total / exact - 1)))
        np.testing.assert_allclose(found.beta_mean, found.beta_total, rtol=1e-10)
    assert errors[-1] < 2e-3
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.8


def test_net_field_is_the_flux_of_each_ring_exactly():
    for disc in (
        fv.demo_disc(shape=(4, 32, 48), magnetic_turbulence=1.0),
        fv.demo_disc(shape=(4, 32, 24), levels=2),
    ):
        found = plasma(disc)
        area = np.diff(found.profile_edges**2) / 2 * disc.grid.period
        flux = [DISC.flux(*pair) for pair in pairwise(found.profile_edges)]
        np.testing.assert_allclose(found.net_field * area, flux, rtol=1e-10)


def test_net_field_from_cells_converges_and_beta_z_follows():
    errors = []
    for n in (48, 96, 192):
        disc = cell_fields(fv.demo_disc(shape=(2, n, n)))
        found = plasma(disc)
        r = 0.5 * (found.profile_edges[1:] + found.profile_edges[:-1])
        exact = DISC.radial_flux_density(r) / r
        errors.append(np.median(np.abs(found.net_field / exact - 1)))
        pressure = disc_state(DISC, r, np.full_like(r, np.pi / 2)).pressure
    np.testing.assert_allclose(np.median(found.beta_z * exact**2 / (2 * pressure)), 1, rtol=2e-3)
    assert errors[-1] < 2e-3
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.7


def uniform(shape=(4, 8, 6), mu0=1.0, **cells):
    edges = np.linspace(1, 2, shape[2] + 1), np.pi / 2 + np.linspace(-0.4, 0.4, shape[1] + 1)
    cells = {name: np.full(shape, value) for name, value in cells.items()}
    return fv.Snapshot.from_arrays(*edges, np.linspace(0, 1, shape[0] + 1), cells=cells, mu0=mu0)


def test_three_betas_of_a_field_that_alternates():
    """B_phi = 0.1 +- 0.3 in azimuth: <B^2> = 0.10, <B>^2 = 0.01, the net B_z apart."""
    disc = uniform(density=1.0, pressure=0.5, magnetic_r=0.0, magnetic_theta=-0.2, magnetic_phi=0.0)
    turn = np.array([0.4, -0.2, 0.4, -0.2])[:, None, None] * np.ones((4, 8, 6))
    found = plasma(disc.with_cells(magnetic_phi=turn[None]))
    np.testing.assert_allclose(found.beta_total, 1 / (0.10 + 0.04), rtol=1e-13)
    np.testing.assert_allclose(found.beta_mean, 1 / (0.01 + 0.04), rtol=1e-13)
    np.testing.assert_allclose(found.beta_z, 1 / 0.04, rtol=1e-13)
    np.testing.assert_allclose(found.net_field, 0.2, rtol=1e-13)
    np.testing.assert_allclose(found.alfven, np.sqrt(0.14), rtol=1e-13)
    np.testing.assert_allclose(found.alfven_poloidal, 0.2, rtol=1e-13)


def test_averages_are_ratios_of_means_and_not_means_of_ratios():
    disc = uniform(density=1.0, pressure=1.0, magnetic_r=1.0, magnetic_theta=0.0, magnetic_phi=0.0)
    turn = np.array([1.0, 2.0, 1.0, 2.0])[:, None, None] * np.ones((4, 8, 6))
    found = plasma(disc.with_cells(magnetic_r=turn[None]))
    np.testing.assert_allclose(found.beta_total, 2 / 2.5)  # the mean of beta is 1.25


def test_without_net_flux_beta_z_is_infinite_and_said():
    disc = uniform(density=1.0, pressure=1.0, magnetic_r=0.0, magnetic_theta=0.0, magnetic_phi=1.0)
    found = plasma(disc)
    assert np.isinf(found.beta_z).all()
    assert any("beta_z infinite" in note for note in found.notes)


def test_gaussian_fields():
    """B sqrt(4 pi) with mu0 = 4 pi is the same field."""
    disc = stirred(shape=(4, 32, 24))
    there = cell_fields(with_field_times(disc, np.sqrt(4 * np.pi)), mu0=4 * np.pi)
    leave = ("net_field",)
    assert_same(plasma(disc), plasma(there), leave_out=leave, rtol=1e-10)
    assert_same(mach_numbers(disc), mach_numbers(there), rtol=1e-10)


def test_elsasser_numbers_and_their_absence():
    disc = uniform(
        density=4.0,
        pressure=1.0,
        magnetic_r=0.0,
        magnetic_theta=0.2,
        magnetic_phi=0.0,
        diffusivity_ambipolar=0.005,
        diffusivity_ohmic=0.002,
    )
    found = plasma(disc)
    r, theta = (0.5 * (e[1:] + e[:-1]) for e in (found.r_edges, found.theta_edges))
    rotation = (r * np.sin(theta)[:, None]) ** -1.5
    np.testing.assert_allclose(found.ambipolar, 0.01 / (0.005 * rotation), rtol=1e-12)
    np.testing.assert_allclose(found.ohmic, 0.01 / (0.002 * rotation), rtol=1e-12)
    coefficient = plasma(disc, ambipolar_coefficient=True)  # eta = Q B^2
    np.testing.assert_allclose(coefficient.ambipolar, 0.01 / (0.005 * 0.04 * rotation), rtol=1e-12)
    np.testing.assert_allclose(coefficient.ohmic, found.ohmic, rtol=1e-12)
    bare = plasma(only(disc, "density", "pressure", *FIELD))
    assert bare.ambipolar is bare.ohmic is None
    assert sum("no diffusivity" in note for note in bare.notes) == 2


def test_what_must_change_nothing():
    disc = stirred()
    here, flow = plasma(disc), mach_numbers(disc)
    for changed, rtol in ((rotated(disc, 3), 1e-13), (cut_up(disc, (2, 4, 4)), 1e-10)):
        assert_same(here, plasma(changed), rtol=rtol, atol=1e-13)
        assert_same(flow, mach_numbers(changed), rtol=rtol, atol=1e-13)
    assert_same(
        here, plasma(with_field_times(disc, -1)), rtol=1e-14, but={"net_field": lambda x: -x}
    )
    assert_same(flow, mach_numbers(with_field_times(disc, -1)), rtol=1e-14)
    assert_same(
        here,
        plasma(rescaled(disc, 3.0)),
        rtol=1e-11,
        but={"net_field": lambda x: np.sqrt(3.0) * x},
    )
    assert_same(flow, mach_numbers(rescaled(disc, 3.0)), rtol=1e-11)
    back = plasma(mirrored(disc))
    np.testing.assert_allclose(back.beta_total[::-1], here.beta_total, rtol=1e-10)
    np.testing.assert_allclose(back.beta_z, here.beta_z, rtol=1e-10)
    np.testing.assert_allclose(mach_numbers(mirrored(disc)).fast[::-1], flow.fast, rtol=1e-10)


def test_one_azimuth_cell_and_two_levels():
    one = plasma(fv.demo_disc(shape=(1, 64, 64)))
    many = plasma(fv.demo_disc(shape=(4, 64, 64)))
    np.testing.assert_allclose(one.beta_total, many.beta_total, rtol=1e-11)
    levels = plasma(fv.demo_disc(shape=(2, 32, 32), levels=2))
    np.testing.assert_allclose(levels.beta_z, many.beta_z, rtol=1e-9)


def test_what_is_missing_is_said():
    disc = stirred(shape=(4, 32, 24))
    found = plasma(only(disc, "density", "pressure"))
    for name in ("beta_total", "beta_mean", "net_field", "beta_z", "alfven", "ohmic"):
        assert getattr(found, name) is None
    assert sum(note.startswith("what needs magnetic") for note in found.notes) == 3
    found = plasma(only(disc, *FIELD))
    assert found.beta_total is found.alfven is None
    assert found.net_field is not None
    assert found.sentence == "no plasma beta: see the notes"
    flow = mach_numbers(only(disc, "density", "velocity_r", "velocity_theta"))
    assert flow.sonic is flow.alfven is flow.fast is flow.slow is None
    assert flow.speed.shape == (32, 24)
    with pytest.raises(FieldvizError, match="need pressure are absent"):
        mach_surface(flow, "sonic")
    with pytest.raises(MissingFieldError, match="velocity_theta"):
        mach_numbers(only(disc, "density", "velocity_r"))
    with pytest.raises(FieldvizError, match="with gamma"):
        mach_numbers(disc, adiabatic=True)
    with pytest.raises(FieldvizError, match="sonic, alfven, fast, slow"):
        mach_surface(mach_numbers(disc), "thermal")


def test_a_wedge_above_the_midplane_has_no_net_field():
    theta, shape = np.linspace(0.8, 1.3, 9), (2, 8, 4)
    cells = dict.fromkeys(("density", "pressure", *FIELD), np.ones(shape))
    found = plasma(fv.Snapshot.from_arrays(np.linspace(1, 2, 5), theta, [0, 0.1, 0.2], cells=cells))
    assert found.beta_z is found.net_field is None
    assert any("does not hold theta = pi/2" in note for note in found.notes)
    np.testing.assert_allclose(found.beta_total, 2 / 3)


def test_a_face_without_a_number_spoils_only_its_surroundings():
    disc = fv.demo_disc(shape=(4, 32, 24))
    faces = {name: disc.faces[name].copy() for name in FIELD}
    faces["magnetic_theta"][0, 1, 16, 5] = np.nan
    cells = {name: disc.cell(name) for name in ("density", "pressure")}
    found = plasma(fv.Snapshot.from_grid(disc.grid, cells=cells, faces=faces))
    assert np.isfinite(found.net_field).all()
    np.testing.assert_allclose(found.net_field[:5], plasma(disc).net_field[:5], rtol=1e-9)
    assert any(note.startswith("2 cells") for note in found.notes)


# ---- cell by cell -----------------------------------------------------------------------------

speeds = st.floats(1e-3, 1e3)


@given(speeds, speeds, st.floats(0, 1))
def test_magnetosonic_speeds_solve_their_equation(sound, alfven, share):
    """V^4 - (c^2 + v_A^2) V^2 + c^2 v_Ap^2 = 0, and slow <= Alfven and sound <= fast."""
    c2, a2 = sound**2, alfven**2
    p2 = share * a2
    fast, slow = magnetosonic_speeds(c2, a2, p2)
    assert fast**2 + slow**2 == pytest.approx(c2 + a2, rel=1e-7)
    assert (fast * slow) ** 2 == pytest.approx(c2 * p2, rel=1e-9)
    assert slow <= min(sound, np.sqrt(p2)) * (1 + 1e-9)
    assert fast >= max(sound, np.sqrt(p2)) * (1 - 1e-9)


def test_magnetosonic_limits():
    fast, slow = magnetosonic_speeds(4.0, 0.0, 0.0)
    assert (fast, slow) == (2.0, 0.0)
    fast, slow = magnetosonic_speeds(4.0, 9.0, 9.0)  # along the field
    assert (fast, slow) == pytest.approx((3.0, 2.0))
    fast, slow = magnetosonic_speeds(4.0, 9.0, 0.0)  # across it
    assert (fast, slow) == pytest.approx((np.sqrt(13), 0.0))
    _, slow = magnetosonic_speeds(1.0, 1e-20, 1e-20)  # weak field keeps its digits
    assert slow == pytest.approx(1e-10, rel=1e-12)


def test_scalars_without_field():
    assert np.isinf(plasma_beta(1.0, 0.0))
    assert alfven_speed(0.0, 1.0) == 0
    assert np.isnan(plasma_beta(np.nan, 1.0))


# ---- surfaces ---------------------------------------------------------------------------------


def test_alfven_number_of_the_demo_wind():
    """M_A = |k|/sqrt(rho) where all of the gas is wind (cos > 0.42)."""
    errors = []
    for n in (64, 128, 256):
        found = mach_numbers(fv.demo_disc(shape=(1, n, n)))
        r, theta = (0.5 * (e[1:] + e[:-1]) for e in (found.r_edges, found.theta_edges))
        theta = theta[:, None]
        foot = DISC.footpoint(r, theta)
        load = DISC.loss_density(foot) / DISC.radial_flux_density(foot)
        exact = load / np.sqrt(disc_state(DISC, r, theta).density)
        wind = np.broadcast_to(np.cos(theta) > 0.43, exact.shape)
        errors.append(np.median(np.abs(found.alfven / exact - 1)[wind]))
    assert errors[-1] < 2e-3
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.7


def flow_of(speed, n=64):
    """v_r = speed(cos theta), c_s = 0.1."""
    theta = np.pi / 2 + np.linspace(-0.6, 0.6, n + 1)
    t = 0.5 * (theta[1:] + theta[:-1])[:, None]
    one = np.ones((1, n, 3))
    cells = {
        "density": one,
        "pressure": 0.01 * one,
        "velocity_r": speed(np.cos(t)) * one,
        "velocity_theta": 0 * one,
    }
    return fv.Snapshot.from_arrays([1, 1.1, 1.2, 1.3], theta, [0, 0.1], cells=cells)


@pytest.mark.parametrize("n", [16, 32, 64, 128])
def test_one_crossing_on_each_side_within_the_bound_of_linear_interpolation(n):
    """M = 9 c^2: off by at most M''/(8 M') dtheta^2 = 3/8 dtheta^2 at c = 1/3, to leading order."""
    found = mach_numbers(flow_of(lambda c: 0.9 * c * c, n))
    for sign, surface in zip((1, -1), mach_surface(found, "sonic"), strict=True):
        assert (surface.count == 1).all()
        assert surface.rising.all()
        assert (surface.outermost == 0).all()
        assert np.abs(np.cos(surface.theta) - sign / 3).max() < 0.45 * (1.2 / n) ** 2


def test_a_folded_surface_gives_every_sheet():
    """M = 1 at |z| = 0.1, 0.2, 0.3 r going up; on the other side at 0.2 only."""

    def speed(c):
        up = 0.1 + 200 * (c - 0.1) * (c - 0.2) * (c - 0.3)
        return np.where(c > 0, np.maximum(up, 0.01), 0.1 + 0.5 * (-c - 0.2))

    upper, lower = mach_surface(mach_numbers(flow_of(speed, 512)), "sonic")
    assert (upper.count == 3).all()
    np.testing.assert_allclose(np.cos(upper.theta), [[0.1] * 3, [0.2] * 3, [0.3] * 3], atol=1e-3)
    assert upper.rising[:, 0].tolist() == [True, False, True]
    assert (upper.outermost == 2).all()
    np.testing.assert_allclose(upper.outermost_theta, np.arccos(0.3), atol=1e-3)
    np.testing.assert_allclose(upper.height[1], 0.2 * upper.r, rtol=5e-3)
    assert (lower.count == 1).all()
    np.testing.assert_allclose(np.cos(lower.theta), -0.2, atol=1e-3)
    assert lower.rising.all()


def test_no_crossing_is_nan_and_not_the_wall():
    upper, _ = mach_surface(mach_numbers(flow_of(lambda c: 0.01 + 0 * c)), "sonic")
    assert upper.theta.shape == (0, 3)
    assert (upper.outermost == -1).all()
    assert np.isnan(upper.outermost_theta).all()


def test_adiabatic_sound_is_faster():
    disc = flow_of(lambda c: 0.1 + 0 * c)
    cells = {name: disc.cell(name) for name in disc.cell_names}
    warm = fv.Snapshot.from_grid(disc.grid, cells=cells, gamma=1.44)
    np.testing.assert_allclose(mach_numbers(warm).sonic, 1.0, rtol=1e-12)
    np.testing.assert_allclose(mach_numbers(warm, adiabatic=True).sonic, 1 / 1.2, rtol=1e-12)


def test_surfaces_are_found_on_two_levels_and_mirror():
    levels = mach_surface(mach_numbers(fv.demo_disc(shape=(2, 48, 48), levels=2)), "slow")
    one = mach_surface(mach_numbers(fv.demo_disc(shape=(2, 96, 96))), "slow")
    for a, b in zip(levels, one, strict=True):
        close = np.abs(a.theta[0] - b.theta[0])
        assert np.median(close) < 0.005
    disc = stirred()
    here = mach_surface(mach_numbers(disc), "fast")
    back = mach_surface(mach_numbers(mirrored(disc)), "fast")
    np.testing.assert_allclose(np.pi - back[1].theta, here[0].theta, rtol=1e-9)
    assert np.array_equal(back[1].rising, here[0].rising)


def test_the_field_may_be_taken_with_its_fluctuations():
    disc = stirred()
    mean, all_of_it = mach_numbers(disc), mach_numbers(disc, mean_field=False)
    assert (all_of_it.alfven <= mean.alfven * (1 + 1e-12)).all()
    near = (np.abs(mean.height / mean.mesh.r) < 0.1) & (mean.speed > 0)
    assert np.median(all_of_it.alfven[near] / mean.alfven[near]) < 0.9
