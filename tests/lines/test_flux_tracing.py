"""What is particular to following fluxes through faces."""

from __future__ import annotations

import numpy as np
import pytest
from line_fields import NAMES, cut, formula_snapshot, psi_snapshot, winding_disc

import fieldviz as fv
from fieldviz.errors import MissingFieldError
from fieldviz.wedge.geometry import centres


def trace(snapshot, seeds, **options):
    return fv.trace_lines(snapshot, "magnetic", seeds, interpolation="flux", **options)


def one_cell(flux_r, flux_theta, flux_phi):
    """One cell r^3 = 1..9, cos(theta) = -0.3..0.3, phi = 0..0.5 with given fluxes (low, high)."""
    edges = (np.array([1, 9.0]) ** (1 / 3), np.arccos([0.3, -0.3]), np.array([0, 0.5]))
    grid = fv.Snapshot.from_arrays(*edges).grid
    areas = (grid.area_r(0), grid.area_theta(0), grid.area_phi(0))
    faces = {
        name: np.reshape(flux, area.shape) / area
        for name, flux, area in zip(NAMES, (flux_r, flux_theta, flux_phi), areas, strict=True)
    }
    return fv.Snapshot.from_arrays(*edges, faces=faces)


def share(points):
    """Flow coordinates 0..1 of the cell: r^3, -cos(theta), phi."""
    r, theta, phi = np.transpose(points)
    return np.column_stack([(r**3 - 1) / 8, (0.3 - np.cos(theta)) / 0.6, phi / 0.5])


@pytest.mark.parametrize(
    ("f_r", "f_theta", "f_phi"),
    [
        ((1.0, 3.0), (0.5, 0.5), (4.0, 2.0)),
        ((2.0, 2.0), (-1.0, -2.0), (-0.5, 0.5)),
        ((-1.0, 2.0), (1.0, -1.0), (0.3, -0.7)),
    ],
)
def test_one_cell_against_its_exponentials(f_r, f_theta, f_phi):
    """xi' = F0 + (F1 - F0) xi has xi = (xi0 + F0/s) e^(s t) - F0/s, s = F1 - F0: elementary."""
    fluxes = [np.array(f) for f in (f_r, f_theta, f_phi)]
    assert sum(f[1] - f[0] for f in fluxes) == pytest.approx(0, abs=1e-12)
    start = np.array([0.6, 0.45, 0.3])
    seed = [(1 + 8 * start[0]) ** (1 / 3), np.arccos(0.3 - 0.6 * start[1]), 0.5 * start[2]]
    lines = trace(one_cell(*fluxes), [seed], direction="forward", most_cells=0.05, longest=0.2)
    found = share(lines.line(0))
    moving = [n for n in range(3) if fluxes[n][0] != fluxes[n][1]]
    rates = [fluxes[n][1] - fluxes[n][0] for n in moving]
    # Time from one coordinate must serve all others.
    n, s = moving[0], rates[0]
    rest = fluxes[n][0] / s
    time = np.log((found[:, n] + rest) / (start[n] + rest)) / s
    assert time[-1] > 0.01
    for axis in range(3):
        low, slope = fluxes[axis][0], np.diff(fluxes[axis])[0]
        wanted = start[axis] + low * time
        if slope:
            wanted = (start[axis] + low / slope) * np.exp(slope * time) - low / slope
        turned = found[:, axis] - wanted
        if axis == 2:
            turned -= np.round(turned)
        np.testing.assert_allclose(turned, 0, atol=1e-12)


def test_points_next_to_a_standstill():
    """Speed grows nine e-foldings across the cell; points still part it as asked."""
    fluxes = (np.array([-1.0, 2.0]), np.array([1.0, -1.0]), np.array([0.5, -0.5]))
    seed = [(1 + 8 * (1 / 3 + 1e-4)) ** (1 / 3), np.pi / 2, 0.25]
    lines = trace(one_cell(*fluxes), [seed], direction="forward", most_cells=0.5)
    assert lines.end_reason[0][1] == "outer wall"
    steps = np.diff(share(lines.line(0))[:, 0])
    assert (steps > 0).all()
    assert steps.max() < 0.5
    assert steps.sum() == pytest.approx(2 / 3 - 1e-4, rel=1e-9)
    r = 9 ** (1 / 3)
    assert lines.length[0] == pytest.approx(r - seed[0], rel=1e-6)


def test_points_are_no_further_apart_than_asked():
    """In shares of a cell."""
    disc = winding_disc()
    rng = np.random.default_rng(0)
    seeds = np.column_stack(
        [rng.uniform(1.1, 4.9, 40), rng.uniform(1, 2.1, 40), rng.uniform(0, 0.75, 40)]
    )
    for most in (0.1, 0.5):
        lines = trace(disc, seeds, most_cells=most, longest=8.0)
        r_cubes = disc.grid.r_edges[0] ** 3
        number = np.interp(lines.spherical[:, 0] ** 3, r_cubes, np.arange(len(r_cubes)))
        inside = np.ones(len(number) - 1, dtype=bool)
        inside[lines.offsets[1:-1] - 1] = False
        steps = np.abs(np.diff(number))[inside]
        assert np.quantile(steps, 0.9999) < 1.8 * most
        assert steps.max() <= 1.0


def test_arc_length_is_that_of_the_points():
    """Against the polygon of ten times as many points."""
    disc = winding_disc()
    seeds = np.column_stack(
        [np.linspace(1.2, 4.5, 10), np.linspace(1, 2.1, 10), np.linspace(0, 0.7, 10)]
    )
    lines = trace(disc, seeds, most_cells=0.02, longest=2.0)
    steps = np.linalg.norm(np.diff(lines.points, axis=0), axis=1)
    polygon = [steps[a : b - 1].sum() for a, b in zip(lines.offsets[:-1], lines.offsets[1:])]  # noqa: B905
    coarse = trace(disc, seeds, longest=2.0)
    np.testing.assert_allclose(coarse.length, polygon, rtol=2e-4)
    np.testing.assert_allclose(lines.length, polygon, rtol=2e-4)


def test_poloidal_and_full_keep_the_same_flux_surface():
    """Adding any B_phi independent of phi leaves r(theta) of the line as it is."""
    edges = {
        "r": np.geomspace(1, 4, 25),
        "theta": np.linspace(1, 2.1, 25),
        "phi": np.linspace(0, 0.6, 7),
    }
    psi = lambda r, t: (r * np.sin(t)) ** 1.5  # noqa: E731
    plain, wound = (psi_snapshot(psi, **edges, toroidal=t) for t in (0.0, 5.0))
    seeds = [[2.0, 1.5, 0.1], [3.1, 1.3, 0.4]]
    a = trace(plain, seeds)
    b = trace(wound, seeds)
    flat = trace(wound, seeds, poloidal=True)
    np.testing.assert_array_equal(a.spherical, flat.spherical)
    np.testing.assert_allclose(
        a.footpoints.position[..., :2], b.footpoints.position[..., :2], rtol=1e-12
    )
    assert np.abs(b.twist).min() > 0.6


def test_level_jump_is_crossed_at_the_same_place():
    """Points stay continuous: no step is longer than a cell of the coarse level."""
    disc = fv.demo_disc(shape=(4, 32, 32), levels=3, magnetic_turbulence=1.0)
    seeds = np.column_stack([np.linspace(1.2, 4.6, 20), np.full(20, 1.57), np.linspace(0, 0.7, 20)])
    lines = trace(disc, seeds)
    inside = np.ones(len(lines.spherical) - 1, dtype=bool)
    inside[lines.offsets[1:-1] - 1] = False
    steps = np.abs(np.diff(lines.spherical, axis=0))[inside] / np.array([1, 1, 1])
    radius = lines.spherical[:-1][inside][:, 0]
    assert (steps[:, 0] / radius).max() < np.log(5) / 32 * 1.05
    assert steps[:, 1].max() < 1.4 / 32 * 1.05
    assert steps[:, 2].max() < np.pi / 4 / 4 * 1.05


def test_cells_alone_are_refused():
    snapshot = formula_snapshot(1.0, 0.0, 0.0)
    cells = fv.Snapshot.from_grid(snapshot.grid, cells=dict(snapshot.cells))
    with pytest.raises(MissingFieldError, match="without magnetic_r, magnetic_theta, magnetic_phi"):
        trace(cells, [[2.0, 1.5, 0.1]])
    partial = fv.Snapshot.from_grid(
        snapshot.grid,
        cells=dict(snapshot.cells),
        faces={n: snapshot.faces[n] for n in NAMES[:2]},
    )
    with pytest.raises(MissingFieldError, match="without magnetic_phi on faces; use"):
        trace(partial, [[2.0, 1.5, 0.1]])


def test_blocks_of_one_cell():
    """Every cell its own block: still to the bit, as no interpolation looks beyond a cell."""
    disc = winding_disc()
    assert centres(disc.grid.r_edges[0]).size == 24
    seeds = [[2.0, 1.4, 0.1], [3.0, 1.8, 0.6]]
    whole = trace(disc, seeds, longest=5.0)
    cells = trace(cut(disc, (12, 24, 24)), seeds, longest=5.0)
    np.testing.assert_array_equal(whole.spherical, cells.spherical)
