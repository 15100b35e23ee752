"""Interpolation in theta, block by block: exact for linear functions, and the halo's result."""

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.symmetry.theta_hats import theta_hats
from fieldviz.wedge.halo import halo_array
from fieldviz.wind.cone_flux import cone_integral

GRIDS = {
    "one block": {"shape": (2, 24, 8)},
    "blocks": {"shape": (2, 24, 8), "blocks": (2, 3, 2)},
    "levels": {"shape": (4, 32, 16), "levels": 2, "blocks": (1, 8, 2)},
    "uneven": {"shape": (2, 24, 8), "blocks": (1, 4, 1), "theta_reach": (0.7, 0.5)},
}


def summed(grid, function, theta):
    """What the blocks add up to along each of some rays, (n_rays, m), and the sum of weights."""
    r, phi = np.geomspace(1.01, 4.9, 5), np.linspace(0.01, 0.77, 3)
    rays = [(a, b) for a in r for b in phi]
    found, weights = np.zeros((len(rays), len(theta))), np.zeros((len(rays), len(theta)))
    for block in range(grid.n_blocks):
        middles = grid.cell_centres(block)[1]
        for columns, matrix in theta_hats(grid, block, theta):
            for n, (at_r, at_phi) in enumerate(rays):
                i = np.searchsorted(grid.r_edges[block], at_r) - 1
                k = np.searchsorted(grid.phi_edges[block], at_phi) - 1
                inside = 0 <= i < columns.shape[1] and 0 <= k < columns.shape[0]
                if inside and columns[k, i]:
                    found[n] += matrix @ function(middles)
                    weights[n] += matrix @ np.ones(len(middles))
    return found, weights


@pytest.mark.parametrize("name", GRIDS)
def test_weights_sum_to_one_and_linear_functions_are_exact(name):
    grid = fv.demo_disc(**GRIDS[name]).grid
    low, high = grid.theta_range
    outer = np.concatenate([np.diff(grid.theta_edges[:, :2]), np.diff(grid.theta_edges[:, -2:])])
    pad = 0.5 * outer.max() + 1e-9
    theta = np.linspace(low + pad, high - pad, 57)
    found, weights = summed(grid, lambda x: 3 - 2 * x, theta)
    np.testing.assert_allclose(weights, 1, rtol=1e-12)
    np.testing.assert_allclose(found, np.broadcast_to(3 - 2 * theta, found.shape), atol=1e-12)


def test_within_half_a_cell_of_a_wall_it_is_the_cell_and_beyond_nothing():
    grid = fv.demo_disc(shape=(2, 8, 4)).grid
    low, high = grid.theta_range
    found, weights = summed(grid, lambda x: x, np.array([low - 0.1, low, high, high + 0.1]))
    np.testing.assert_allclose(weights[0], [0, 1, 1, 0])
    middles = grid.cell_centres(0)[1]
    np.testing.assert_allclose(found[0, 1:3], middles[[0, -1]])


@pytest.mark.parametrize("name", GRIDS)
def test_fluxes_through_cones_are_those_of_the_halo(name):
    disc = fv.demo_disc(**GRIDS[name], side_ratio=0.6)
    result = fv.wind_symmetry(disc, thickness=0.1, fields=False)
    edges = np.array([1.0, 5.0])
    haloed = halo_array(disc.grid, disc.cell("density") * disc.cell("velocity_theta"))
    upper = -cone_integral(disc.grid, haloed, result.cones.upper, edges)[0]
    lower = cone_integral(disc.grid, haloed, result.cones.lower, edges)[0]
    assert result.outflow.upper == pytest.approx(upper, rel=1e-9)
    assert result.outflow.lower == pytest.approx(lower, rel=1e-9)
