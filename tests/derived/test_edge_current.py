"""Currents on edges: orders at walls, jumps and on any spacing, conservation, borders of blocks."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parent))

from calculus_fields import (
    MESHES,
    NAMES,
    b_phi,
    b_r,
    b_theta,
    block_grid,
    curl_of,
    filled,
    log_mesh,
)

import fieldviz as fv
from fieldviz.derived.edge_current import edge_current
from fieldviz.errors import FieldvizError, MissingFieldError

FIELD = (b_r, b_theta, b_phi)


def middles(edges):
    return 0.5 * (edges[..., 1:] + edges[..., :-1])


def points(grid, own, *, faces):
    """r, theta, phi of the faces across, or of the edges along, the axis `own` (r 0, phi 2)."""
    lines = [grid.r_edges, grid.theta_edges, grid.phi_edges]
    r, theta, phi = (line if (n == own) == faces else middles(line) for n, line in enumerate(lines))
    return r[:, None, None, :], theta[:, None, :, None], phi[:, :, None, None]


def sampled(grid, own, formula, *, faces):
    r, theta, phi = points(grid, own, faces=faces)
    return formula(r, theta, phi) + 0.0 * (r + theta + phi)


def on_faces(grid, formulas=FIELD, **constants):
    faces = {
        n: sampled(grid, a, f, faces=True)
        for a, (n, f) in enumerate(zip(NAMES, formulas, strict=True))
    }
    return fv.Snapshot.from_grid(grid, faces=faces, **constants)


def random_faces(grid, seed=0):
    random = np.random.default_rng(seed)
    faces = {}
    for axis, name in enumerate(NAMES):
        shape = [grid.n_blocks, *grid.block_shape]
        shape[3 - axis] += 1
        faces[name] = random.normal(size=shape)
    return fv.Snapshot.from_grid(grid, faces=faces)


def components(current):
    return current.r, current.theta, current.phi


def errors(grid):
    found = edge_current(on_faces(grid))
    truth = [sampled(grid, n, f, faces=False) for n, f in enumerate(curl_of(*FIELD))]
    return found, [a - b for a, b in zip(components(found), truth, strict=True)]


def largest_and_rms(arrays):
    return np.array([[np.abs(a).max(), np.sqrt(np.mean(a * a))] for a in arrays])


@pytest.mark.parametrize("mesh", MESHES)
def test_second_order_everywhere(mesh):
    """Walls, seam and level jumps included, also where the error is largest."""
    coarse, fine = (largest_and_rms(errors(MESHES[mesh](n))[1]) for n in (24, 48))
    orders = np.log2(coarse / fine)
    assert orders[:, 0].min() > 1.65
    assert orders[:, 1].min() > 1.9


@pytest.mark.parametrize("mesh", ["stretched", "two levels"])
def test_second_order_on_the_walls(mesh):
    on_wall = []
    for n in (32, 64):
        found, difference = errors(MESHES[mesh](n))
        assert all(mask.any() and not mask.all() for mask in found.one_sided)
        on_wall.append(
            largest_and_rms([d[m] for d, m in zip(difference, found.one_sided, strict=True)])
        )
    assert np.log2(on_wall[0] / on_wall[1]).min() > 1.7


def test_one_sided_edges_are_those_on_walls():
    grid = MESHES["two levels"](16)
    found = edge_current(on_faces(grid))
    for own, mask in enumerate(found.one_sided):
        r, theta, _ = points(grid, own, faces=False)
        expected = np.isin(r, grid.r_range) | np.isin(theta, grid.theta_range)
        np.testing.assert_array_equal(mask, np.broadcast_to(expected, mask.shape))


def test_no_current_is_left_in_a_closed_surface():
    """The loops around each inner vertex close: the sum of J A over them is zero to rounding."""
    grid = block_grid(*log_mesh(12))
    found = edge_current(random_faces(grid))
    r, theta, phi = (middles(e[0]) for e in (grid.r_edges, grid.theta_edges, grid.phi_edges))
    dphi, caps = np.diff(phi)[:, None, None], -np.diff(np.cos(theta))[:, None]
    rings = 0.5 * np.diff(r * r)
    through_r = found.r[0, 1:-1, 1:-1] * r * r * caps * dphi
    through_theta = found.theta[0, 1:-1, :, 1:-1] * rings * np.sin(theta)[:, None] * dphi
    through_phi = found.phi[0, :, 1:-1, 1:-1] * rings * np.diff(theta)[:, None]
    left = np.diff(through_r, axis=2) + np.diff(through_theta, axis=1)
    left += np.diff(through_phi, axis=0)
    assert np.abs(left).max() < 1e-13 * np.abs(through_r).max()


def test_blocks_agree_on_the_edges_they_share_and_with_one_block():
    whole, cut = (block_grid(*log_mesh(12), counts) for counts in ((1, 1, 1), (2, 2, 3)))
    alone, parts = (edge_current(on_faces(grid)) for grid in (whole, cut))
    for own in range(3):
        expected = {}
        for grid, found in ((whole, alone), (cut, parts)):
            values = components(found)[own]
            places = np.stack(np.broadcast_arrays(*points(grid, own, faces=False)), axis=-1)
            for place, value in zip(places.reshape(-1, 3).round(9), values.ravel(), strict=True):
                first = expected.setdefault(tuple(place), value)
                assert value == pytest.approx(first, abs=1e-12)


def test_the_seam_is_an_edge_like_any_other():
    snapshot = random_faces(block_grid(*log_mesh(12), (2, 1, 1)))
    faces = {name: snapshot.faces[name].copy() for name in NAMES}
    # Blocks keep their shared faces twice: both must hold the same numbers.
    faces["magnetic_phi"][1, -1] = faces["magnetic_phi"][0, 0]
    faces["magnetic_phi"][1, 0] = faces["magnetic_phi"][0, -1]
    closed = edge_current(fv.Snapshot.from_grid(snapshot.grid, faces=faces))
    for values in (closed.r, closed.theta):
        np.testing.assert_allclose(values[0, 0], values[1, -1], rtol=1e-10)
        np.testing.assert_allclose(values[0, -1], values[1, 0], rtol=1e-10)
    turned = {name: values[::-1] for name, values in faces.items()}
    around = edge_current(fv.Snapshot.from_grid(snapshot.grid, faces=turned))
    np.testing.assert_allclose(around.theta, closed.theta[::-1], rtol=1e-10)


def test_cell_values_stay_second_order_at_level_jumps_where_slopes_do_not():
    worst = {"edges": [], "cells": []}
    for n in (24, 48):
        grid = MESHES["two levels"](n)
        truth = filled(grid, curl_of(*FIELD)[0])
        for form, kept in worst.items():
            found = fv.current_density(on_faces(grid), form=form)
            kept.append(np.abs(found.r - truth).max())
    orders = {form: np.log2(coarse / fine) for form, (coarse, fine) in worst.items()}
    assert orders["edges"] > 1.8
    assert orders["cells"] < 1.4
    assert worst["edges"][1] < 0.4 * worst["cells"][1]


def test_current_density_takes_edges_where_the_field_is_on_faces_alone():
    snapshot = on_faces(block_grid(*log_mesh(8)))
    found = fv.current_density(snapshot)
    assert found.form == "edges"
    assert any("wall" in note for note in found.notes)
    for mean, value in zip(edge_current(snapshot).cell_means(), components(found), strict=True):
        # The same sums in another order.
        np.testing.assert_allclose(value, mean, rtol=1e-12, atol=1e-14)
    stored = snapshot.with_cells(**{name: snapshot.cell(name) for name in NAMES})
    assert fv.current_density(stored).form == "cells"
    np.testing.assert_array_equal(
        fv.current_density(stored).theta, fv.current_density(snapshot, form="cells").theta
    )
    with pytest.raises(FieldvizError, match="form to be one of auto, edges, cells, got 'best'"):
        fv.current_density(snapshot, form="best")


def test_units_sign_and_precision(small_disc):
    disc = small_disc(precision="single")
    plain = edge_current(disc)
    assert plain.phi.dtype == np.float32
    assert np.abs(plain.phi).max() > 0
    faces = {name: -disc.faces[name] for name in NAMES}
    other = edge_current(fv.Snapshot.from_grid(disc.grid, faces=faces, mu0=4 * np.pi))
    for a, b in zip(components(plain), components(other), strict=True):
        np.testing.assert_allclose(b, -a / (4 * np.pi), rtol=1e-6)


def test_one_azimuth_cell_has_no_slope_along_phi():
    r, theta, _ = log_mesh(12)
    grid = block_grid(r, theta, np.array([0.0, 0.3]))
    found = edge_current(random_faces(grid))
    faces = found.snapshot.faces
    b_phi_only = {name: 0 * faces[name] for name in NAMES} | {"magnetic_phi": faces["magnetic_phi"]}
    alone = edge_current(fv.Snapshot.from_grid(grid, faces=b_phi_only))
    np.testing.assert_allclose(found.r, alone.r, rtol=1e-12)
    np.testing.assert_allclose(found.theta, alone.theta, rtol=1e-12)


@pytest.mark.parametrize("blocks", [(1, 1, 1), (2, 2, 1)])
def test_the_axis_has_the_current_of_the_loop_around_it(blocks):
    """B_phi = r sin(theta): J_z = 2, along +r at the north pole and along -r at the south."""
    grid = block_grid(
        np.linspace(1, 2, 9), np.linspace(0, np.pi, 33), np.linspace(0, 2 * np.pi, 9), blocks
    )
    zero = lambda r, t, p: 0 * r  # noqa: E731
    found = edge_current(on_faces(grid, (zero, zero, lambda r, t, p: r * np.sin(t))))
    expected = sampled(grid, 0, lambda r, t, p: 2 * np.cos(t), faces=False)
    assert np.abs(found.r - expected).max() < 6e-3  # the loop around the axis errs by (pi/64)^2/2
    assert np.isfinite(found.theta).all()
    assert any("axis" in note for note in found.notes)
    assert fv.current_density(found.snapshot).form == "cells"


def test_a_hole_in_the_data_spoils_only_what_reaches_it():
    snapshot = on_faces(block_grid(*log_mesh(12)))
    faces = {name: snapshot.faces[name].copy() for name in NAMES}
    faces["magnetic_phi"][0, 2, 5, 6] = np.nan
    found = edge_current(fv.Snapshot.from_grid(snapshot.grid, faces=faces))
    assert np.argwhere(np.isnan(found.r)).tolist() == [[0, 2, 5, 6], [0, 2, 6, 6]]
    assert np.argwhere(np.isnan(found.theta)).tolist() == [[0, 2, 5, 6], [0, 2, 5, 7]]
    assert np.isfinite(found.phi).all()
    assert "4 edges have no number" in found.notes


def test_cell_values_alone_are_refused(small_disc):
    disc = small_disc()
    cells = fv.Snapshot.from_grid(disc.grid, cells={name: disc.cell(name) for name in NAMES})
    with pytest.raises(MissingFieldError, match=r"on faces, got .*; use current_density"):
        edge_current(cells)
