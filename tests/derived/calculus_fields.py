"""Meshes and fields for tests of vector calculus; truths by the complex step, not by differences.

The derivative of an analytic f is Im f(x + ih)/h, exact to rounding for tiny h (Squire & Trapp
1998, from memory).
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "wedge"))

from wedge_builders import block_grid, cut, filled, grid_of

import fieldviz as fv

NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
PERIOD = 0.8
STEP = 1e-30


def log_mesh(n):
    return np.geomspace(1, 4, n + 1), np.pi / 2 + np.linspace(-0.7, 0.6, n + 1), ring(n // 2)


def ring(n):
    return np.linspace(-0.3, -0.3 + PERIOD, n + 1)


def stretched_mesh(n):
    u = np.linspace(0, 1, n + 1)
    return 1 + u + u**2, np.pi / 2 + 0.5 * np.tan(np.linspace(-0.8, 0.8, n + 1)), ring(n // 2)


def uniform_mesh(n):
    return np.linspace(1, 3, n + 1), np.linspace(0.8, 2.2, n + 1), ring(n // 2)


MESHES = {
    "uniform": lambda n: block_grid(*uniform_mesh(n)),
    "log r": lambda n: block_grid(*log_mesh(n), (2, 2, 2)),
    "stretched": lambda n: block_grid(*stretched_mesh(n), (1, 2, 2)),
    "two levels": lambda n: block_grid(*log_mesh(n), (2, 4, 2), [((2.0, 1.6, 0.0), 1)]),
    "three levels": lambda n: block_grid(
        *log_mesh(n), (2, 4, 4), [((2.5, 1.6, 0.0), 2), ((1.0, 1.0, 0.4), 1)]
    ),
    # Level jumps across a wall in theta, in r and over the azimuth's seam.
    "corner": lambda n: block_grid(*log_mesh(n), (2, 2, 2), [((1.0, 0.9, -0.29), 1)]),
}


def scalar(r, theta, phi):
    wave = 1 + 0.5 * np.cos(2 * np.pi * phi / PERIOD)
    return np.sin(2 * r) * np.cos(1.3 * theta) * wave


def b_r(r, theta, phi):
    return np.cos(r) * np.sin(1.7 * theta) + np.sin(2 * np.pi * phi / PERIOD) / r


def b_theta(r, theta, phi):
    return r**-1.5 * np.cos(theta) * (1 + 0.3 * np.sin(2 * np.pi * phi / PERIOD))


def b_phi(r, theta, phi):
    return np.exp(-r / 2) * np.sin(theta) ** 3 * np.cos(2 * np.pi * phi / PERIOD)


def d(formula, axis):
    """The derivative of a formula of (r, theta, phi) along one axis."""

    def derivative(*point):
        moved = [x + (1j * STEP if n == axis else 0) for n, x in enumerate(point)]
        return np.imag(formula(*moved)) / STEP

    return derivative


def gradient_of(f):
    return (
        d(f, 0),
        lambda r, t, p: d(f, 1)(r, t, p) / r,
        lambda r, t, p: d(f, 2)(r, t, p) / (r * np.sin(t)),
    )


def divergence_of(f_r, f_theta, f_phi):
    def divergence(r, t, p):
        s = r * np.sin(t)
        return (
            d(lambda r, t, p: r**2 * f_r(r, t, p), 0)(r, t, p) / r**2
            + d(lambda r, t, p: np.sin(t) * f_theta(r, t, p), 1)(r, t, p) / s
            + d(f_phi, 2)(r, t, p) / s
        )

    return divergence


def curl_of(f_r, f_theta, f_phi):
    def along_r(r, t, p):
        turned = d(lambda r, t, p: np.sin(t) * f_phi(r, t, p), 1)(r, t, p)
        return (turned - d(f_theta, 2)(r, t, p)) / (r * np.sin(t))

    def along_theta(r, t, p):
        turned = d(lambda r, t, p: r * f_phi(r, t, p), 0)(r, t, p)
        return d(f_r, 2)(r, t, p) / (r * np.sin(t)) - turned / r

    def along_phi(r, t, p):
        turned = d(lambda r, t, p: r * f_theta(r, t, p), 0)(r, t, p)
        return (turned - d(f_r, 1)(r, t, p)) / r

    return along_r, along_theta, along_phi


def snapshot_of(grid, formulas, names=NAMES, **constants):
    cells = {name: filled(grid, f) for name, f in zip(names, formulas, strict=True)}
    return fv.Snapshot.from_grid(grid, cells=cells, **constants)


def random_snapshot(grid, seed=0, dtype="f8"):
    random = np.random.default_rng(seed)
    shape = (grid.n_blocks, *grid.block_shape)
    return fv.Snapshot.from_grid(
        grid, cells={name: random.normal(size=shape).astype(dtype) for name in NAMES}
    )


def split(grid, arrays, counts):
    """The grid with every block cut into counts (phi, theta, r) parts, and its arrays."""
    found, parts = [], [[] for _ in arrays]
    sizes = [n // count for n, count in zip(grid.block_shape, counts, strict=True)]
    for block in range(grid.n_blocks):
        r, theta, phi = grid.edges(block)
        for corner in np.ndindex(*counts):
            edges = [
                cut(e, counts[axis])[corner[axis]] for e, axis in ((r, 2), (theta, 1), (phi, 0))
            ]
            found.append((*edges, grid.level[block]))
            index = tuple(slice(c * n, c * n + n) for c, n in zip(corner, sizes, strict=True))
            for array, kept in zip(arrays, parts, strict=True):
                kept.append(array[block][index])
    return grid_of(found), [np.stack(kept) for kept in parts]
