"""Snapshots for tests of lines: formulas, discs, and the same cells cut, turned or mirrored."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.wedge import geometry
from fieldviz.wedge.geometry import centres

NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
BOTH = pytest.mark.parametrize("interpolation", ["linear", "flux"])
R = np.geomspace(1.0, 4.0, 17)
THETA = np.pi / 2 + np.linspace(-0.7, 0.6, 17)
PHI = np.linspace(-0.3, 0.5, 9)
PERIOD = 0.75  # an exact twelfth of it is a binary number


def formula_snapshot(b_r, b_theta, b_phi, *, r=R, theta=THETA, phi=PHI, dtype=float):
    """Cells and faces from numbers or functions (r, theta, phi), at their centres."""
    shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
    cells, faces = {}, {}
    for axis, (name, value) in enumerate(zip(NAMES, (b_r, b_theta, b_phi), strict=True)):
        for kept, at_faces in ((cells, False), (faces, True)):
            where = [
                edges if at_faces and number == axis else centres(edges)
                for number, edges in enumerate((r, theta, phi))
            ]
            full = list(shape)
            full[2 - axis] += at_faces
            at = (where[0][None, None, :], where[1][None, :, None], where[2][:, None, None])
            values = value(*at) if callable(value) else value
            kept[name] = np.broadcast_to(values, full).astype(dtype)
    return fv.Snapshot.from_arrays(r, theta, phi, cells=cells, faces=faces)


def vertical(strength=1.0, **grid):
    """Uniform B_z."""
    return formula_snapshot(
        lambda r, t, p: strength * np.cos(t) + 0 * r + 0 * p,
        lambda r, t, p: -strength * np.sin(t) + 0 * r + 0 * p,
        0.0,
        **grid,
    )


def psi_snapshot(psi, *, r, theta, phi, toroidal=0.0):
    """Faces without divergence from a flux function (r, theta), and a constant B_phi."""
    nodes, step = psi(r, theta[:, None]), np.diff(phi)[:, None, None]
    faces = {
        "magnetic_r": np.diff(nodes, axis=0) * step / geometry.area_r(r, theta, phi),
        "magnetic_theta": -np.diff(nodes, axis=1) * step / geometry.area_theta(r, theta, phi),
        "magnetic_phi": np.full((len(phi), len(theta) - 1, len(r) - 1), float(toroidal)),
    }
    return fv.Snapshot.from_arrays(r, theta, phi, faces=faces)


def winding_disc(seed=1, turbulence=3.0, toroidal=0.02):
    """A turbulent disc of 12 x 24 x 24 cells whose lines cross the azimuth's seam many times."""
    disc = fv.demo_disc(
        shape=(12, 24, 24), period=PERIOD, seed=seed, magnetic_turbulence=turbulence
    )
    faces = dict(disc.faces)
    faces["magnetic_phi"] = faces["magnetic_phi"] + toroidal
    return fv.Snapshot.from_grid(disc.grid, faces=faces)


def random_seeds(snapshot, count, seed=0):
    """Seeds all over the wedge, some a few periods away."""
    rng = np.random.default_rng(seed)
    ranges = (snapshot.grid.r_range, snapshot.grid.theta_range, snapshot.grid.phi_range)
    points = np.column_stack([rng.uniform(*span, count) for span in ranges])
    points[:, 2] += snapshot.grid.period * rng.integers(-2, 3, count)
    return points


def cut(snapshot, counts):
    """The same faces of a one-block snapshot in `counts` blocks along phi, theta, r."""
    sizes = [n // c for n, c in zip(snapshot.grid.block_shape, counts, strict=True)]
    edges = snapshot.grid.edges(0)
    blocks = []
    for place in np.ndindex(*counts):
        ends = [slice(n * s, (n + 1) * s) for n, s in zip(place, sizes, strict=True)]
        nodes = [slice(part.start, part.stop + 1) for part in ends]
        faces = {}
        for axis, name in enumerate(NAMES):
            part = list(ends)
            part[2 - axis] = nodes[2 - axis]
            faces[name] = snapshot.faces[name][0][tuple(part)]
        own = [line[node] for line, node in zip(edges, reversed(nodes), strict=True)]
        blocks.append(fv.Block(*own, faces=faces))
    return fv.Snapshot.from_blocks(blocks)


def with_faces(snapshot, change):
    """The same grid with changed face arrays: change(name, array)."""
    return fv.Snapshot.from_grid(
        snapshot.grid, faces={name: change(name, snapshot.faces[name]) for name in NAMES}
    )


def assert_same_lines(a, b):
    """Equal to the bit."""
    for part in ("offsets", "seed_index", "end_code", "spherical", "length"):
        np.testing.assert_array_equal(getattr(a, part), getattr(b, part), err_msg=part)
