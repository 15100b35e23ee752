"""The display grid: second order, periodic, any blocks and levels."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.display_grid import Window, make_display_grid
from fieldviz.scenes.finite_cells import finite_field
from fieldviz.scenes.from_data import (
    field_scale,
    power_law_exponent,
    sheet_levels,
    vertical_field,
)
from fieldviz.scenes.surfaces import contour, face

PERIOD = 0.6
WHOLE = Window(phi_span=1.5)


def wave(phi, theta, r):
    return np.log(r) * np.cos(theta) + 0.5 * np.sin(2 * np.pi * phi / PERIOD) * np.sin(2 * theta)


def snapshot_of(function, n: int) -> fv.Snapshot:
    edges = (
        np.geomspace(1, 4, 2 * n + 1),
        np.linspace(1.0, 2.1, 2 * n + 1),
        np.linspace(0.2, 0.2 + PERIOD, n + 1),
    )
    r, theta, phi = (0.5 * (e[1:] + e[:-1]) for e in edges)
    values = function(phi[:, None, None], theta[:, None], r)
    return fv.Snapshot.from_arrays(*edges, cells={"wave": values})


def test_nodes_are_second_order_beyond_the_wedge_too():
    errors = []
    for n in (12, 24, 48):
        grid = make_display_grid(snapshot_of(wave, n), ("wave",), WHOLE)
        exact = wave(grid.phi[:, None, None], grid.theta[:, None], grid.r)
        errors.append(np.abs(grid.fields["wave"] - exact).max())
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert errors[-1] < 2e-3
    assert orders.min() > 1.8


def test_repeats_of_the_wedge_join_without_a_step():
    grid = make_display_grid(snapshot_of(wave, 12), ("wave",), Window(phi_span=3 * PERIOD))
    steps = np.abs(np.diff(grid.fields["wave"], axis=0)).max(axis=(1, 2))
    inside = grid.phi[1:] < PERIOD
    assert steps[~inside].max() < 1.05 * steps[inside].max()


@pytest.mark.parametrize(
    "options",
    [
        {"shape": (8, 64, 80), "levels": 2},
        {"shape": (1, 48, 64)},
        {"shape": (8, 32, 64), "theta_reach": (0.7, 0.5)},
        {"shape": (4, 32, 64), "blocks": (1, 2, 2)},
    ],
)
def test_any_snapshot_fills_every_node(options):
    snapshot = fv.demo_disc(**options)
    grid = make_display_grid(snapshot, ("density", "magnetic_theta"), WHOLE)
    assert all(np.isfinite(values).all() for values in grid.fields.values())
    assert grid.theta[grid.midplane_row] == pytest.approx(np.pi / 2, abs=1e-15)
    assert (grid.r[0], grid.r[-1]) == snapshot.grid.r_range
    assert (np.diff(grid.theta) > 0).all()


def test_the_budget_is_kept():
    grid = make_display_grid(snapshot_of(wave, 24), ("wave",), WHOLE, budget=50_000)
    assert np.prod(grid.shape) < 60_000


def test_density_stays_positive_where_it_falls_steeply():
    snapshot = fv.demo_disc(shape=(4, 32, 48), thickness=0.03)
    grid = make_display_grid(snapshot, ("density",), WHOLE)
    assert grid.fields["density"].min() > 0


def test_cells_without_a_number_are_counted_and_hidden():
    snapshot = fv.demo_disc(shape=(8, 32, 64))
    density = snapshot.cell("density").copy()
    density[0, 2:4, 14:18, 30:34] = np.nan
    grid = make_display_grid(snapshot.with_cells(density=density), ("density",), WHOLE)
    assert grid.cells_left_out == 32
    assert 0 < np.count_nonzero(grid.hidden) < 0.02 * grid.hidden.size
    full = face(grid.part(), "theta", grid.midplane_row)
    whole = grid.shape[0] - 1, grid.shape[2] - 1
    assert full.n_cells < 2 * whole[0] * whole[1]


def test_gaps_take_their_neighbours_value():
    cells = np.arange(24.0).reshape(1, 2, 3, 4)
    cells[0, 0, 0, 1] = np.nan
    filled, missing = finite_field(cells)
    assert missing.sum() == 1
    assert filled[0, 0, 0, 1] in {0.0, 2.0, 5.0, 13.0}
    with pytest.raises(fv.FieldvizError, match="expected numbers"):
        finite_field(np.full((1, 2, 2, 2), np.nan))


# ---- what is taken from the data ----------------------------------------------------------------


def test_exponent_of_a_power_law_with_peaks_and_noise():
    rng = np.random.default_rng(5)
    R = np.geomspace(1, 8, 300)
    peaks = 1 + 6 * np.exp(-0.5 * ((R - 2) / 0.05) ** 2) + 9 * np.exp(-0.5 * ((R - 5) / 0.1) ** 2)
    for exponent in (0.0, 0.75, 1.25, 2.5):
        values = R**-exponent * peaks * (1 + 0.1 * rng.standard_normal(R.size))
        assert power_law_exponent(R, values) == exponent
    assert power_law_exponent(R, -np.ones_like(R)) == 0.0


@pytest.mark.parametrize("reversed_field", [False, True])
def test_scale_of_the_demo_field_and_its_sign(reversed_field):
    snapshot = fv.demo_disc(shape=(8, 64, 128), reversed_field=reversed_field)
    grid = make_display_grid(snapshot, ("magnetic_r", "magnetic_theta"), WHOLE)
    scale = field_scale(grid.r, vertical_field(grid)[:, grid.midplane_row])
    assert scale.exponent == fv.SaltmarshDisc().field_slope
    assert scale.sign == (-1 if reversed_field else 1)
    outer, inner = sheet_levels(scale.profile)
    assert np.median(scale.profile) < outer < inner < scale.profile.max()


def test_every_sheet_of_the_demo_reaches_the_inner_level():
    disc = fv.SaltmarshDisc()
    snapshot = fv.demo_disc(shape=(4, 64, 192))
    grid = make_display_grid(snapshot, ("magnetic_r", "magnetic_theta"), WHOLE)
    scale = field_scale(grid.r, vertical_field(grid)[:, grid.midplane_row])
    inner = sheet_levels(scale.profile)[1]
    high = grid.r[scale.profile[0] > inner]
    for radius in disc.sheet_radii():
        assert np.abs(high - radius).min() < 0.02 * radius


def test_a_field_without_peaks_has_no_sheets():
    for profile in (np.full((4, 50), 2.0), np.zeros((4, 50))):
        outer, inner = sheet_levels(profile)
        assert profile.max() < outer < inner


# ---- surfaces -----------------------------------------------------------------------------------


def test_a_contour_lies_where_the_field_has_its_value_and_faces_outward():
    def radius(phi, theta, r):
        return r + 0 * theta + 0 * phi

    grid = make_display_grid(snapshot_of(radius, 12), ("wave",), Window(phi_span=1.0))
    surface = contour(grid, "wave", 2.0)
    points = np.asarray(surface.points)
    assert np.abs(np.linalg.norm(points, axis=1) - 2.0).max() < 2e-3
    # Normals point to smaller values: to the star.
    assert ((points / 2.0) * np.asarray(surface.point_data["Normals"])).sum(axis=1).max() < -0.999
    assert contour(grid, "wave", 99.0).n_points == 0
    assert face(grid, "phi", -1, (), ("wave", 99.0)).n_points == 0


def test_a_clipped_face_ends_at_its_level():
    def radius(phi, theta, r):
        return r + 0 * theta + 0 * phi

    grid = make_display_grid(snapshot_of(radius, 12), ("wave",), Window(phi_span=1.0))
    surface = face(grid, "phi", 0, ("wave",), ("wave", 2.5))
    distance = np.linalg.norm(np.asarray(surface.points), axis=1)
    assert distance.min() == pytest.approx(2.5, abs=3e-3)
    assert distance.max() == pytest.approx(4.0, abs=1e-6)
