"""The flux function against the demo disc's closed form, and the lines made from it."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.field_lines import poloidal_lines, tubes
from fieldviz.scenes.poloidal_flux import (
    averaged_poloidal_field,
    equal_flux_levels,
    poloidal_flux,
)


def share_of_error(wind: str, shape: tuple[int, int, int], **options) -> float:
    snapshot = fv.demo_disc(shape=shape, wind=wind, **options)
    r, theta_edges, B_r, B_theta = averaged_poloidal_field(snapshot)
    psi = poloidal_flux(r, theta_edges, B_r, B_theta)
    exact = fv.SaltmarshDisc(wind=wind, **options).flux_function(r, theta_edges[:, None])
    error = psi - exact
    return float(np.abs(error - error.mean()).max() / np.ptp(exact))


@pytest.mark.parametrize("wind", ["even", "odd"])
def test_psi_agrees_with_the_closed_form_to_second_order(wind):
    errors = [share_of_error(wind, shape) for shape in ((4, 48, 128), (4, 96, 256))]
    assert errors[1] < 3.5e-3
    assert np.log2(errors[0] / errors[1]) > 1.7


def test_psi_of_a_reversed_field_is_reversed():
    assert share_of_error("even", (4, 96, 192), reversed_field=True) < 4e-3


def test_turbulence_that_averages_out_leaves_psi_alone():
    calm = fv.demo_disc(shape=(16, 48, 96))
    wild = fv.demo_disc(shape=(16, 48, 96), magnetic_turbulence=0.5)
    psi = [poloidal_flux(*averaged_poloidal_field(disc)) for disc in (calm, wild)]
    assert np.abs(psi[1] - psi[0]).max() < 2e-3 * np.ptp(psi[0])


@pytest.mark.parametrize("options", [{}, {"wind": "odd"}, {"levels": 2, "shape": (4, 64, 80)}])
def test_lines_keep_their_flux(options):
    options = {"shape": (4, 64, 160)} | options
    snapshot = fv.demo_disc(**options)
    disc = fv.SaltmarshDisc(wind=options.get("wind", "even"))
    lines = poloidal_lines(snapshot, None, 12)
    assert len(lines) >= 12
    whole = np.ptp(disc.flux_function(*np.meshgrid(np.linspace(1, 5, 60), [0.88, 1.57, 2.26])))
    drift = [np.ptp(disc.flux_function(*line.T)) / whole for line in lines]
    # The step between neighbours is 1/12 of the whole.
    assert max(drift) < 0.06
    assert np.median(drift) < 0.012


def test_levels_have_equal_steps_and_stay_inside():
    levels = equal_flux_levels(np.array([[-1.0, 3.0]]), 4)
    np.testing.assert_allclose(levels, [-0.5, 0.5, 1.5, 2.5])


def test_tubes_stand_in_their_plane():
    line = np.column_stack([np.linspace(1, 2, 9), np.full(9, 1.2)])
    mesh = tubes([line], 0.7, 0.01)
    x, y, _ = np.asarray(mesh.points).T
    across = -x * np.sin(0.7) + y * np.cos(0.7)
    assert 0.004 < np.abs(across).max() <= 0.0101
    assert tubes([], 0.7, 0.01).n_points == 0
