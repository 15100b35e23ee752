"""Current density: units, walls, what flows along the field, and the dual loops through faces."""

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
    log_mesh,
    random_snapshot,
    snapshot_of,
)

import fieldviz as fv
from fieldviz.errors import MissingFieldError


def test_gaussian_fields_divide_by_four_pi():
    grid = MESHES["two levels"](16)
    formulas = (b_r, b_theta, b_phi)
    plain = fv.current_density(snapshot_of(grid, formulas))
    gaussian = fv.current_density(snapshot_of(grid, formulas, mu0=4 * np.pi))
    turned = fv.curl(snapshot_of(grid, formulas), "magnetic")
    np.testing.assert_array_equal(plain.phi, turned.phi)
    for name in ("r", "theta", "phi", "magnitude", "parallel"):
        np.testing.assert_allclose(
            4 * np.pi * getattr(gaussian, name), getattr(plain, name), rtol=1e-12, atol=1e-13
        )
    np.testing.assert_allclose(gaussian.alpha, plain.alpha, rtol=1e-12, atol=1e-13)


def test_magnitude_parallel_and_alpha_of_one_cell():
    snapshot = random_snapshot(block_grid(*log_mesh(8)))
    found = fv.current_density(snapshot)
    at = (0, 1, 4, 3)
    current = np.array([component[at] for component in (found.r, found.theta, found.phi)])
    field = np.array([snapshot.cell(name)[at] for name in NAMES])
    assert found.magnitude[at] == pytest.approx(np.linalg.norm(current), rel=1e-13)
    assert found.parallel[at] == pytest.approx(current @ field / np.linalg.norm(field), rel=1e-12)
    assert found.alpha[at] == pytest.approx(current @ field / (field @ field), rel=1e-12)


def test_reversing_the_field_reverses_the_current_and_keeps_alpha():
    snapshot = random_snapshot(MESHES["corner"](16))
    reversed_ = snapshot.with_cells(**{name: -snapshot.cell(name) for name in NAMES})
    here, there = fv.current_density(snapshot), fv.current_density(reversed_)
    np.testing.assert_array_equal(there.theta, -here.theta)
    np.testing.assert_array_equal(there.alpha, here.alpha)


def test_no_field_gives_nan_along_it():
    snapshot = random_snapshot(block_grid(*log_mesh(8)))
    empty = {name: snapshot.cell(name).copy() for name in NAMES}
    for values in empty.values():
        values[0, 1, 4, 3] = 0
    found = fv.current_density(snapshot.with_cells(**empty))
    assert np.isnan(found.alpha).sum() == np.isnan(found.parallel).sum() == 1
    assert np.isfinite(found.magnitude).all()


def test_cells_at_walls_are_marked_one_sided():
    grid = MESHES["two levels"](16)
    found = fv.current_density(snapshot_of(grid, (b_r, b_theta, b_phi)))
    for block in range(grid.n_blocks):
        r, theta, _ = grid.edges(block)
        at_r = (r[:-1] == grid.r_range[0]) | (r[1:] == grid.r_range[1])
        at_theta = (theta[:-1] == grid.theta_range[0]) | (theta[1:] == grid.theta_range[1])
        expected = np.broadcast_to(at_theta[:, None] | at_r, grid.block_shape)
        np.testing.assert_array_equal(found.one_sided[block], expected)
    assert 0 < found.one_sided.mean() < 1


def dual_loops_phi(faces, r, theta):
    """J_phi on inner edges: B.dl around the loop through the four neighbouring face centres."""
    r_c, theta_c = (0.5 * (edges[1:] + edges[:-1]) for edges in (r, theta))
    turned = np.diff(faces["magnetic_theta"] * r_c, axis=2)[:, 1:-1] * np.diff(theta_c)[:, None]
    fallen = np.diff(faces["magnetic_r"], axis=1)[:, :, 1:-1] * np.diff(r_c)
    area = np.diff(r_c**2) / 2 * np.diff(theta_c)[:, None]
    return (turned - fallen) / area


def test_face_fields_agree_with_the_mean_of_dual_loops_to_second_order():
    """Evans & Hawley 1988 (from memory) place the current on edges; its mean is the cell's."""
    differences = []
    for n in (16, 32):
        r, theta, phi = log_mesh(n)
        r_c, theta_c, phi_c = (0.5 * (edges[1:] + edges[:-1]) for edges in (r, theta, phi))

        def on(f, *axes):
            p, t, x = np.meshgrid(*axes, indexing="ij")
            return f(x, t, p)

        faces = {
            "magnetic_r": on(b_r, phi_c, theta_c, r),
            "magnetic_theta": on(b_theta, phi_c, theta, r_c),
            "magnetic_phi": on(b_phi, phi, theta_c, r_c),
        }
        found = fv.current_density(
            fv.Snapshot.from_arrays(r, theta, phi, faces=faces), form="cells"
        ).phi[0]
        edges = dual_loops_phi(faces, r, theta)
        mean = 0.25 * (
            edges[:, 1:, 1:] + edges[:, 1:, :-1] + edges[:, :-1, 1:] + edges[:, :-1, :-1]
        )
        differences.append(np.abs(found[:, 1:-1, 1:-1] - mean).max())
    assert differences[1] < 3e-3
    assert 3.5 < differences[0] / differences[1] < 4.5


def test_the_demo_disc_has_a_current_in_its_own_precision(small_disc):
    found = fv.current_density(small_disc(precision="single"))
    assert found.r.dtype == found.alpha.dtype == found.magnitude.dtype == np.float32
    assert np.isfinite(found.alpha).all()
    assert found.magnitude.max() > 0


def test_a_missing_component_names_the_work():
    grid = block_grid(*log_mesh(8))
    snapshot = snapshot_of(grid, (b_r, b_theta), NAMES[:2])
    with pytest.raises(MissingFieldError, match=r"Cannot work out the current density: .*_phi"):
        fv.current_density(snapshot)
