"""The flux function against closed forms."""

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.flux_function import _compromise, flux_function, flux_function_at
from fieldviz.errors import FieldvizError, MissingFieldError


def error(snapshot, r, theta, **disc):
    """Largest deviation from the closed form over the range of psi, constants apart."""
    truth = fv.SaltmarshDisc(**disc)
    exact = truth.flux_function(r, theta[:, None])
    found = flux_function_at(snapshot, r, theta)
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
    np.testing.assert_allclose(flux_function_at(uniform, r, theta) + 0.5, psi, rtol=1e-13)


def test_reversed_field_turns_the_sign():
    r, theta = np.array([1.5, 3.0]), np.array([1.2, 1.9])
    there = flux_function_at(fv.demo_disc(shape=(2, 32, 32)), r, theta)
    back = flux_function_at(fv.demo_disc(shape=(2, 32, 32), reversed_field=True), r, theta)
    np.testing.assert_array_equal(there, -back)


def test_what_cannot_be_is_refused():
    disc = fv.demo_disc(shape=(2, 16, 16))
    with pytest.raises(FieldvizError, match="within 1 to 5"):
        flux_function_at(disc, np.array([0.5, 2]), np.array([1.5]))
    with pytest.raises(MissingFieldError, match="magnetic_r"):
        flux_function_at(fv.Snapshot.from_grid(disc.grid), np.array([2.0]), np.array([1.5]))


def cells_only(disc):
    names = ("magnetic_r", "magnetic_theta")
    return fv.Snapshot.from_grid(disc.grid, cells={name: disc.cell(name) for name in names})


@pytest.mark.parametrize(
    ("precision", "levels", "limit"),
    [("double", 1, 1e-12), ("double", 2, 1e-12), ("double", 3, 1e-12), ("single", 2, 3e-6)],
)
def test_paths_agree_for_face_data(precision, levels, limit):
    disc = fv.demo_disc(
        shape=(4, 16, 16), levels=levels, magnetic_turbulence=0.5, precision=precision
    )
    found = flux_function(disc)
    assert found.source == "faces"
    assert 0 < found.path_mismatch < limit
    assert found.psi.shape == (len(found.theta), len(found.r))
    np.testing.assert_array_equal(found.psi, flux_function_at(disc, found.r, found.theta))


@pytest.mark.parametrize("name", ["magnetic_r", "magnetic_theta"])
def test_flux_that_is_lost_in_one_face_is_the_mismatch(name):
    disc = fv.demo_disc(shape=(4, 16, 16), reversed_field=True)
    faces = {key: disc.faces[key].copy() for key in disc.faces}
    area = disc.grid.area_r(0) if name == "magnetic_r" else disc.grid.area_theta(0)
    lost = 1e-4
    faces[name][0, 2, 7, 5] += lost * disc.grid.period / area[2, 7, 5]
    found = flux_function(fv.Snapshot.from_grid(disc.grid, faces=faces))
    assert found.path_mismatch == pytest.approx(lost / np.abs(found.psi).max(), rel=1e-8)


def test_least_squares_against_a_dense_solution():
    """The same sum of squares, area times the square of the difference in B, by `lstsq`."""
    random = np.random.default_rng(3)
    r, theta = np.array([1.0, 1.3, 1.5, 2.2, 2.3]), np.array([0.4, 0.9, 1.2, 2.0])
    along_theta = random.normal(size=(3, 5))
    along_r = random.normal(size=(4, 4))
    # Two paths with just these steps.
    down = np.vstack([np.zeros(5), np.cumsum(along_theta, axis=0)])
    out = np.hstack([np.zeros((4, 1)), np.cumsum(along_r, axis=1)])
    found = _compromise(down[:, :1] + out, down + out[:1], r, theta)
    rows, wanted = [], []
    for j, i in np.ndindex(4, 5):
        areas = (
            r[i] ** 2 * (np.cos(theta[j]) - np.cos(theta[(j + 1) % 4])),
            np.sin(theta[j]) * (r[(i + 1) % 5] ** 2 - r[i] ** 2) / 2,
        )
        steps = ((1, 0, along_theta), (0, 1, along_r))
        for (dj, di, flux), area in zip(steps, areas, strict=True):
            if j + dj < 4 and i + di < 5:
                row = np.zeros((4, 5))
                row[j + dj, i + di], row[j, i] = 1, -1
                rows.append(row.ravel() / np.sqrt(area))
                wanted.append(flux[j, i] / np.sqrt(area))
    best = np.linalg.lstsq(np.array(rows), np.array(wanted), rcond=None)[0].reshape(4, 5)
    np.testing.assert_allclose(found - found[0, 0], best - best[0, 0], rtol=1e-9, atol=1e-12)


def test_mismatch_of_cell_values_is_a_truncation_error():
    """Second order in the cell size, and psi is nearer to the truth than the paths are apart."""
    mismatch = []
    for n in (256, 512):
        disc = fv.demo_disc(shape=(1, n, n))
        found = flux_function(cells_only(disc))
        exact = fv.SaltmarshDisc().flux_function(found.r, found.theta[:, None])
        exact = exact - exact[len(exact) // 2, 0]
        error = np.abs(found.psi - exact).max() / np.abs(found.psi).max()
        assert found.source == "cells"
        assert any("truncation" in note for note in found.notes)
        assert error < found.path_mismatch
        mismatch.append(found.path_mismatch)
    assert 3 < mismatch[0] / mismatch[1] < 4.5


def test_cell_values_across_levels_and_on_the_axis():
    disc = fv.demo_disc(shape=(2, 64, 64), levels=2)
    coarse = disc.grid.theta_edges[0], disc.grid.r_edges[0]
    faces = flux_function_at(disc, coarse[1], coarse[0])
    cells = flux_function_at(cells_only(disc), coarse[1], coarse[0])
    assert np.abs(cells - faces).max() < 0.02 * np.abs(faces).max()
    r, theta = np.linspace(1, 2, 33), np.linspace(0, np.pi, 65)
    middle = 0.5 * (theta[1:] + theta[:-1])[None, :, None]
    ones = np.ones((2, 64, 32))
    uniform = fv.Snapshot.from_arrays(
        r,
        theta,
        np.linspace(0, 2 * np.pi, 3),
        cells={"magnetic_r": np.cos(middle) * ones, "magnetic_theta": -np.sin(middle) * ones},
    )
    psi = flux_function_at(uniform, r, theta) + 0.5
    np.testing.assert_allclose(psi, 0.5 * np.square(r * np.sin(theta)[:, None]), atol=2e-3)


def test_no_flux_and_holes_give_no_mismatch_but_a_reason():
    disc = fv.demo_disc(shape=(2, 16, 16))
    empty = {name: 0 * disc.faces[name] for name in ("magnetic_r", "magnetic_theta")}
    found = flux_function(fv.Snapshot.from_grid(disc.grid, faces=empty))
    assert np.isnan(found.path_mismatch)
    assert "there is no poloidal flux to compare paths by" in found.notes
    holed = cells_only(disc)
    holed.cells["magnetic_r"][0, 1, 5, 5] = np.nan
    found = flux_function(holed)
    assert np.isnan(found.path_mismatch)
    assert np.isnan(found.psi).all()
    assert any("nodes have no number" in note for note in found.notes)
