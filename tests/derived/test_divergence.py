"""div B: zero by construction, seen where it is put in, second order for cell values."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.divergence import divergence_error, face_limit


def edges(n=12, n_phi=6):
    return (
        np.geomspace(1, 3, n + 1),
        np.linspace(1.0, 2.0, n + 1),
        np.linspace(0, np.pi / 3, n_phi + 1),
    )


def solenoidal_faces(r, theta, phi, seed=0, dtype="f8"):
    """Face fluxes from a random vector potential integrated along edges: div B = 0 exactly."""
    random = np.random.default_rng(seed)
    n_phi, n_theta, n_r = len(phi) - 1, len(theta) - 1, len(r) - 1
    along_r = random.normal(size=(n_phi + 1, n_theta + 1, n_r))
    along_theta = random.normal(size=(n_phi + 1, n_theta, n_r + 1))
    along_phi = random.normal(size=(n_phi, n_theta + 1, n_r + 1))
    flux_r = np.diff(along_phi, axis=1) - np.diff(along_theta, axis=0)
    flux_theta = np.diff(along_r, axis=0) - np.diff(along_phi, axis=2)
    flux_phi = np.diff(along_theta, axis=2) - np.diff(along_r, axis=1)
    grid = fv.Snapshot.from_arrays(r, theta, phi).grid
    return {
        "magnetic_r": (flux_r / grid.area_r(0)).astype(dtype),
        "magnetic_theta": (flux_theta / grid.area_theta(0)).astype(dtype),
        "magnetic_phi": (flux_phi / grid.area_phi(0)).astype(dtype),
    }


@pytest.mark.parametrize(("dtype", "below"), [("f8", 1e-14), ("f4", 1e-6)])
def test_a_curl_has_no_divergence(dtype, below):
    grid = edges()
    found = divergence_error(
        fv.Snapshot.from_arrays(*grid, faces=solenoidal_faces(*grid, dtype=dtype))
    )
    assert 0 < found.face < below
    assert not found.too_large
    assert found.face_precision == np.dtype(dtype).itemsize


@pytest.mark.parametrize(("dtype", "change"), [("f8", 1e-9), ("f4", 1e-2)])
def test_one_wrong_face_is_seen(dtype, change):
    grid = edges()
    faces = solenoidal_faces(*grid, dtype=dtype)
    faces["magnetic_theta"][3, 4, 5] *= 1 + change
    found = divergence_error(fv.Snapshot.from_arrays(*grid, faces=faces))
    assert found.too_large
    assert 1e-3 * change < found.face < change


def test_the_worst_block_is_named():
    r, theta, phi = edges()
    blocks = []
    for n, (start, stop) in enumerate(((0, 6), (6, 12))):
        part = (r[start : stop + 1], theta, phi)
        faces = solenoidal_faces(*part, seed=n)
        if n == 1:
            faces["magnetic_r"][0, 0, 3] += 0.1
        blocks.append(fv.Block(*part, faces=faces))
    found = divergence_error(fv.Snapshot.from_blocks(blocks))
    assert found.face_worst_block == 1
    assert found.too_large


def potential_field(n, n_phi=None):
    """Gradient of a harmonic function, r^-3 sin^2 cos(2 phi): no divergence anywhere."""
    r, theta, phi = edges(n, n_phi or n)
    rc, tc, pc = (0.5 * (a[1:] + a[:-1]) for a in (r, theta, phi))
    P, T, R = np.meshgrid(pc, tc, rc, indexing="ij")
    cells = {
        "magnetic_r": -3 * R**-4 * np.sin(T) ** 2 * np.cos(2 * P),
        "magnetic_theta": R**-4 * 2 * np.sin(T) * np.cos(T) * np.cos(2 * P),
        "magnetic_phi": -2 * R**-4 * np.sin(T) * np.sin(2 * P),
    }
    return fv.Snapshot.from_arrays(r, theta, phi, cells=cells)


def test_cell_values_show_truncation_error_only():
    coarse, fine = (divergence_error(potential_field(n)) for n in (16, 32))
    assert coarse.face is None
    # |div B| falls by 4 and the cell side by 2.
    assert 6.5 < coarse.cell / fine.cell < 9.5
    assert fine.cell < fine.cell_largest < 0.05


def test_a_radial_field_that_spreads_has_the_known_divergence():
    r, theta, phi = edges(40, 8)
    shape = (8, 40, 40)
    cells = {name: np.zeros(shape) for name in ("magnetic_r", "magnetic_theta", "magnetic_phi")}
    cells["magnetic_r"] += 1.0  # div = 2 / r
    snapshot = fv.Snapshot.from_arrays(r, theta, phi, cells=cells)
    rc = 0.5 * (r[1:] + r[:-1])
    T = 0.5 * (theta[1:] + theta[:-1])
    side = np.minimum(np.diff(r), rc * np.diff(theta)[0])
    side = np.minimum(side[None], rc * np.sin(T)[:, None] * np.diff(phi)[0])
    wanted = (2 / rc * side)[1:-1, 1:-1]
    found = divergence_error(snapshot)
    assert found.cell == pytest.approx(np.sqrt((wanted**2).mean()), rel=1e-3)
    assert found.cell_largest == pytest.approx(wanted.max(), rel=1e-3)


def test_one_azimuth_cell_has_no_derivative_along_phi():
    r, theta, phi = edges(16, 1)
    cells = {name: np.zeros((1, 16, 16)) for name in ("magnetic_r", "magnetic_theta")}
    cells["magnetic_phi"] = np.random.default_rng(0).normal(size=(1, 16, 16))
    found = divergence_error(fv.Snapshot.from_arrays(r, theta, phi, cells=cells))
    assert found.cell == 0.0


def test_what_is_missing_gives_none():
    grid = edges(8, 2)
    assert divergence_error(fv.Snapshot.from_arrays(*grid)).face is None
    two_azimuths = {f"magnetic_{a}": np.ones((2, 8, 8)) for a in ("r", "theta", "phi")}
    found = divergence_error(fv.Snapshot.from_arrays(*grid, cells=two_azimuths))
    assert found.cell is None
    assert found.cell_worst_block is None


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_cells_that_are_not_finite_are_counted_and_left_out(bad):
    grid = edges()
    faces = solenoidal_faces(*grid)
    faces["magnetic_r"][2, 2, 2] = bad
    found = divergence_error(fv.Snapshot.from_arrays(*grid, faces=faces))
    assert found.n_skipped == 2
    assert not found.too_large


def test_the_axis_makes_no_trouble():
    r, _, phi = edges(12, 6)
    theta = np.linspace(0, np.pi, 13)
    shape = (6, 12, 12)
    _, T, _ = np.meshgrid(*(0.5 * (a[1:] + a[:-1]) for a in (phi, theta, r)), indexing="ij")
    cells = {
        "magnetic_r": np.cos(T),
        "magnetic_theta": -np.sin(T),
        "magnetic_phi": np.zeros(shape),
    }
    found = divergence_error(fv.Snapshot.from_arrays(r, theta, phi, cells=cells))
    assert np.isfinite(found.cell_largest)
    assert found.cell < 0.05


def test_a_snapshot_in_a_file_is_measured_alike(tmp_path):
    grid = edges()
    snapshot = fv.Snapshot.from_arrays(*grid, faces=solenoidal_faces(*grid))
    fv.write_snapshot(tmp_path / "fen.h5", snapshot)
    assert divergence_error(fv.read_snapshot(tmp_path / "fen.h5")) == divergence_error(snapshot)


def test_limits_follow_the_precision():
    assert face_limit(2) > face_limit(4) == 1e-5 > face_limit(8) == 1e-12
