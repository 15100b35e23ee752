"""The flux function against closed forms."""

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.flux_function import flux_function
from fieldviz.errors import FieldvizError, MissingFieldError


def error(snapshot, r, theta, **disc):
    """Largest deviation from the closed form over the range of psi, constants apart."""
    truth = fv.SaltmarshDisc(**disc)
    exact = truth.flux_function(r, theta[:, None])
    found = flux_function(snapshot, r, theta)
    difference = found - (exact - truth.flux_function(np.array(1.0), np.array(np.pi / 2)))
    return np.abs(difference).max() / np.ptp(exact)


@pytest.mark.parametrize("levels", [1, 2])
def test_exact_at_edges_from_faces(levels):
    """Fluxes of the demo disc are differences of its psi: equal to rounding at coarse edges."""
    disc = fv.demo_disc(shape=(4, 32, 32), levels=levels, magnetic_turbulence=0.5)
    coarse = fv.demo_disc(shape=(4, 32, 32)).grid
    assert error(disc, coarse.r_edges[0], coarse.theta_edges[0]) < 1e-13


def test_second_order_between_edges_and_from_cells():
    r, theta = np.linspace(1.0, 5.0, 37), np.linspace(0.9, 2.2, 29)
    between, cells = [], []
    for n in (256, 512):
        disc = fv.demo_disc(shape=(1, n, n))
        between.append(error(disc, r, theta))
        names = ("magnetic_r", "magnetic_theta")
        only_cells = fv.Snapshot.from_grid(disc.grid, cells={k: disc.cell(k) for k in names})
        cells.append(error(only_cells, r, theta))
    assert between[0] / between[1] > 3
    assert cells[0] / cells[1] > 3
    assert cells[1] < 2e-3


def test_uniform_vertical_field():
    """B_z = 1: psi = r^2 sin^2(theta)/2, its fluxes exact on faces."""
    grid = fv.demo_disc(shape=(3, 16, 12)).grid
    r, theta, _ = grid.edges(0)
    psi = 0.5 * np.square(r * np.sin(theta)[:, None])
    width = np.diff(grid.phi_edges[0])[:, None, None]
    faces = {
        "magnetic_r": np.diff(psi, axis=0) * width / grid.area_r(0),
        "magnetic_theta": -np.diff(psi, axis=1) * width / grid.area_theta(0),
    }
    uniform = fv.Snapshot.from_grid(grid, faces={k: v[None] for k, v in faces.items()})
    np.testing.assert_allclose(flux_function(uniform, r, theta) + 0.5, psi, rtol=1e-13)


def test_reversed_field_turns_the_sign():
    r, theta = np.array([1.5, 3.0]), np.array([1.2, 1.9])
    there = flux_function(fv.demo_disc(shape=(2, 32, 32)), r, theta)
    back = flux_function(fv.demo_disc(shape=(2, 32, 32), reversed_field=True), r, theta)
    np.testing.assert_array_equal(there, -back)


def test_what_cannot_be_is_refused():
    disc = fv.demo_disc(shape=(2, 16, 16))
    with pytest.raises(FieldvizError, match="within 1 to 5"):
        flux_function(disc, np.array([0.5, 2]), np.array([1.5]))
    with pytest.raises(MissingFieldError, match="magnetic_r"):
        flux_function(fv.Snapshot.from_grid(disc.grid), np.array([2.0]), np.array([1.5]))
