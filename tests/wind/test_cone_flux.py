"""Integrals over cones against closed forms."""

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.wedge.halo import halo_array
from fieldviz.wind.cone_flux import cone_integral
from fieldviz.wind.surfaces import matched_cones


def uniform(levels):
    return fv.demo_disc(shape=(4, 16, 16), levels=levels).grid


@pytest.mark.parametrize("levels", [1, 2])
def test_area_of_a_cone(levels):
    """Flux density 1: the area sin(theta) (r2^2 - r1^2)/2 dphi, to rounding, band by band."""
    grid = uniform(levels)
    ones = halo_array(grid, np.ones((grid.n_blocks, *grid.block_shape)))
    bands = np.array([1.0, 1.37, 2.9, 5.0])
    for theta in (np.pi / 2 - 0.4, np.pi / 2, np.pi / 2 + 0.6123):
        exact = np.sin(theta) * np.diff(bands**2) / 2 * np.pi / 4
        np.testing.assert_allclose(cone_integral(grid, ones, theta, bands), exact, rtol=1e-12)


@pytest.mark.parametrize("levels", [1, 2])
def test_linear_in_theta_is_exact(levels):
    grid = uniform(levels)
    values = np.stack(
        [
            np.broadcast_to(grid.cell_centres(b)[1][:, None], grid.block_shape)
            for b in range(grid.n_blocks)
        ]
    )
    theta = 1.234
    found = cone_integral(grid, halo_array(grid, values), theta, np.array([1.0, 5.0]))
    assert found[0] == pytest.approx(theta * np.sin(theta) * 12 * np.pi / 4, rel=1e-12)


def test_bands_add_up():
    disc = fv.demo_disc(shape=(4, 32, 32), magnetic_turbulence=0.4)
    haloed = halo_array(disc.grid, disc.cell("magnetic_theta"))
    parts = cone_integral(disc.grid, haloed, 1.3, np.geomspace(1, 5, 8))
    whole = cone_integral(disc.grid, haloed, 1.3, np.array([1.0, 5.0]))
    assert parts.sum() == pytest.approx(whole[0], rel=1e-12)


def test_midplane_flux_of_the_disc():
    disc = fv.SaltmarshDisc()
    snapshot = fv.demo_disc(shape=(2, 128, 256))
    haloed = halo_array(snapshot.grid, snapshot.cell("magnetic_theta"))
    found = -cone_integral(snapshot.grid, haloed, np.pi / 2, np.array([1.0, 5.0]))[0]
    assert found == pytest.approx(disc.flux(1, 5), rel=2e-3)


def test_cones_are_clipped_to_the_grid():
    disc = fv.demo_disc(shape=(2, 32, 16))
    cones = matched_cones(disc, 0.1, 9.0)
    assert cones.clipped
    assert cones.angle == pytest.approx(0.63)
    assert cones.upper + cones.lower == pytest.approx(np.pi)
    assert not matched_cones(disc, 0.1, 4.0).clipped
