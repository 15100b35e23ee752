"""Turbulent speeds against waves of known size."""

import numpy as np
import pytest
from disc_changes import (
    assert_same,
    cell_fields,
    cut_up,
    mirrored,
    numbers,
    only,
    refined_blocks,
    rescaled,
    rotated,
    stirred,
    with_field_times,
)

import fieldviz as fv
from fieldviz.derived.turbulence import turbulence
from fieldviz.errors import FieldvizError, MissingFieldError

PHI, R = np.linspace(0, 0.5, 17), np.geomspace(1, 2, 9)
THETA = np.pi / 2 + np.linspace(-0.4, 0.4, 33)


def waves(r, theta, phi):
    """Speeds of 0.1, 0.2 z/H and 0.3 c_s on a fast rotation; H/R = 0.1."""
    c = np.cos(8 * np.pi * phi)
    one = np.ones(np.broadcast_shapes(r.shape, theta.shape, phi.shape))
    sound = 0.1 / np.sqrt(r)
    return {
        "density": one,
        "pressure": sound**2 * one,
        "velocity_r": -1.0 + np.sqrt(2) * 0.1 * sound * c * one,
        "velocity_theta": np.sqrt(2) * 0.2 * np.cos(theta) / 0.1 * sound * c * one,
        "velocity_phi": 50.0 + np.sqrt(2) * 0.3 * sound * c * one,
    }


def wave_disc(theta=THETA):
    middles = [0.5 * (e[1:] + e[:-1]) for e in (R, theta, PHI)]
    cells = waves(middles[0], middles[1][:, None], middles[2][:, None, None])
    return fv.Snapshot.from_arrays(R, theta, PHI, cells=cells)


def test_waves_of_known_size():
    found = turbulence(wave_disc())
    np.testing.assert_allclose(found.sigma_r, 0.1, rtol=1e-12)
    np.testing.assert_allclose(found.sigma_phi, 0.3, rtol=1e-12)
    np.testing.assert_allclose(found.sigma_theta, 0.2 * np.abs(found.height), rtol=1e-12)
    np.testing.assert_allclose(found.profile_r[np.isfinite(found.profile_r)], 0.1, rtol=1e-12)
    assert "m = 0" in " ".join(found.notes)
    assert "time 0" in found.notes[0]
    assert found.sentence.startswith("within 0.5 H of the midplane sigma_r 0.1 c_s")


def test_profile_against_height_converges():
    errors = []
    for n in (64, 128, 256):
        found = turbulence(wave_disc(np.pi / 2 + np.linspace(-0.4, 0.4, n + 1)))
        full = np.abs(found.height_edges).max()
        used = np.abs(found.heights) < full - 0.5
        low, high = found.height_edges[:-1][used], found.height_edges[1:][used]
        # z/H = cos(theta)/h is even in volume: the mean of its square over a bin.
        exact = 0.2 * np.sqrt((high**3 - low**3) / 3 / (high - low))
        errors.append(np.max(np.abs(found.profile_theta[used] - exact)))
    assert errors[-1] < 0.01
    assert errors[0] > 2.5 * errors[-1]


def test_heights_are_z_over_the_local_scale_height():
    found = turbulence(wave_disc())
    theta = 0.5 * (found.theta_edges[1:] + found.theta_edges[:-1])
    np.testing.assert_allclose(found.height, np.cos(theta)[:, None] / 0.1 + 0 * found.sigma_r)
    assert np.array_equal(found.height_edges, -found.height_edges[::-1])
    given = turbulence(wave_disc(), thickness=0.2)
    np.testing.assert_allclose(given.height, found.height / 2)


def test_mean_and_weights_are_by_mass():
    disc = wave_disc()
    phi = 0.5 * (PHI[1:] + PHI[:-1])
    rho = 1 + 0.9 * np.cos(8 * np.pi * phi)
    shape = disc.cell("density").shape
    dense = disc.with_cells(
        density=rho[:, None, None] * np.ones(shape), pressure=np.full(shape, 0.01)
    )
    speed = disc.cell("velocity_r")[0, :, 3, 3]
    variance = np.average((speed - np.average(speed, weights=rho)) ** 2, weights=rho)
    found = turbulence(dense, thickness=0.1)
    assert found.sigma_r[3, 3] == pytest.approx(np.sqrt(variance / 0.01), rel=1e-12)


def test_a_band_of_radii_is_used_and_said():
    disc = wave_disc()
    speed = disc.cell("velocity_r").copy()
    speed[..., 4:] = -1.0
    disc = disc.with_cells(velocity_r=speed)
    inner = turbulence(disc, r_band=(1, R[4]))
    outer = turbulence(disc, r_band=(R[4], 2))
    np.testing.assert_allclose(inner.profile_r[np.isfinite(inner.profile_r)], 0.1)
    np.testing.assert_allclose(outer.profile_r[np.isfinite(outer.profile_r)], 0, atol=1e-12)
    assert "r = 1 to 1.414" in inner.notes[0]


def test_the_demo_is_as_turbulent_as_asked():
    """0.1 c_s rms of all three components within 2 H, on another mesh than it was scaled with."""
    disc = fv.demo_disc(shape=(24, 64, 64), velocity_turbulence=0.1)
    found = turbulence(disc)
    near = np.abs(found.height) < 2
    square = found.sigma_r**2 + found.sigma_theta**2 + found.sigma_phi**2
    assert np.sqrt(square[near].mean()) == pytest.approx(0.1, rel=0.1)


@pytest.mark.parametrize("axis", range(3))
def test_two_levels(axis):
    edges = (np.linspace(0, 0.5, 33), np.pi / 2 + np.linspace(-0.4, 0.4, 33), R)
    disc = refined_blocks(edges, waves, lambda *place: place[axis] == 0)
    assert disc.grid.levels == [0, 1]
    found = turbulence(disc)
    np.testing.assert_allclose(found.sigma_r, 0.1, rtol=0.05)
    np.testing.assert_allclose(found.sigma_phi, 0.3, rtol=0.05)


def test_what_must_change_nothing():
    disc = stirred()
    here = turbulence(disc)
    assert_same(here, turbulence(rotated(disc, 3)), rtol=1e-13, atol=1e-13)
    assert_same(here, turbulence(cut_up(disc, (2, 4, 4))), rtol=1e-9, atol=1e-12)
    assert_same(here, turbulence(with_field_times(disc, -1)), rtol=0)
    assert_same(here, turbulence(rescaled(disc, 5.0)), rtol=1e-11, atol=1e-12)
    back = numbers(turbulence(mirrored(disc)))
    for name, values in numbers(here).items():
        if name.startswith(("sigma", "sound")):
            np.testing.assert_allclose(back[name][::-1], values, rtol=1e-9, atol=1e-13)
        if name.startswith("profile"):
            np.testing.assert_allclose(back[name][::-1], values, rtol=1e-9, atol=1e-13)


def test_one_azimuth_cell_has_none():
    found = turbulence(cell_fields(fv.demo_disc(shape=(1, 32, 24))))
    assert found.sigma_r is found.sigma_phi is found.profile_theta is None
    assert any("one cell in azimuth" in note for note in found.notes)
    assert found.sentence == "no turbulent speeds: see the notes"


def test_what_is_missing_is_said():
    disc = stirred(shape=(4, 32, 24))
    found = turbulence(only(disc, "density", "pressure", "velocity_r"))
    assert found.sigma_theta is found.sigma_phi is None
    assert found.sigma_r is not None
    assert any("velocity_theta, velocity_phi" in note for note in found.notes)
    found = turbulence(only(disc, "density", "velocity_r"))
    assert found.sigma_r is found.sound_speed is None
    assert any("no pressure" in note for note in found.notes)
    with pytest.raises(MissingFieldError, match="density"):
        turbulence(only(disc, "pressure"))


def test_nan_is_counted_and_wrong_choices_are_refused():
    disc = stirred(shape=(4, 32, 24))
    speed = disc.cell("velocity_r").copy()
    speed[0, 1, 2, 3] = np.inf
    found = turbulence(disc.with_cells(velocity_r=speed))
    assert np.isfinite(found.sigma_r).all()
    assert any(note.startswith("1 cells") for note in found.notes)
    with pytest.raises(FieldvizError, match="within 1 to 5"):
        turbulence(disc, r_band=(0.5, 2))
    with pytest.raises(FieldvizError, match="height_step"):
        turbulence(disc, height_step=0)
