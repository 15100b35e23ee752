"""Grids for tests: cut into blocks, refined where wanted, filled from a formula."""

from __future__ import annotations

import numpy as np

from fieldviz.wedge.grid import WedgeGrid


def subdivided(edges):
    """Edges of cells half as wide."""
    fine = np.empty(2 * len(edges) - 1)
    fine[::2] = edges
    fine[1::2] = 0.5 * (edges[1:] + edges[:-1])
    return fine


def cut(edges, count):
    """Edges of `count` equal runs of cells."""
    n = (len(edges) - 1) // count
    assert n * count == len(edges) - 1
    return [edges[start * n : (start + 1) * n + 1] for start in range(count)]


def leaves(r, theta, phi, blocks=(1, 1, 1), refined=()):
    """Leaf blocks (r, theta, phi, level), r fastest.

    `blocks` counts them along phi, theta, r; each entry of `refined` is a point (r, theta, phi)
    and a level: the blocks that cover the point are split down to that level.
    """

    def split(r, theta, phi, level):
        wanted = any(
            level < deepest and r[0] <= p[0] < r[-1] and t(theta, p[1]) and t(phi, p[2])
            for p, deepest in refined
        )
        if not wanted:
            yield r, theta, phi, level
            return
        for part_phi in cut(subdivided(phi), 2):
            for part_theta in cut(subdivided(theta), 2):
                for part_r in cut(subdivided(r), 2):
                    yield from split(part_r, part_theta, part_phi, level + 1)

    def t(edges, value):
        return edges[0] <= value < edges[-1]

    return [
        leaf
        for part_phi in cut(np.asarray(phi, float), blocks[0])
        for part_theta in cut(np.asarray(theta, float), blocks[1])
        for part_r in cut(np.asarray(r, float), blocks[2])
        for leaf in split(part_r, part_theta, part_phi, 0)
    ]


def grid_of(found, with_level=True):
    """The WedgeGrid of leaf blocks."""
    r, theta, phi, level = zip(*found, strict=True)
    return WedgeGrid(
        np.stack(r), np.stack(theta), np.stack(phi), np.array(level) if with_level else None
    )


def block_grid(r, theta, phi, blocks=(1, 1, 1), refined=()):
    """A WedgeGrid of blocks, refined around points."""
    return grid_of(leaves(r, theta, phi, blocks, refined))


def filled(grid, formula):
    """Values of formula(r, theta, phi) at all cell centres, (n_blocks, n_phi, n_theta, n_r)."""
    values = np.empty((grid.n_blocks, *grid.block_shape))
    for block in range(grid.n_blocks):
        r, theta, phi = grid.cell_centres(block)
        values[block] = formula(r[None, None, :], theta[None, :, None], phi[:, None, None])
    return values


def points_within(grid, count, seed=0):
    """Random points r, theta, phi all over a wedge, walls and a few periods in phi included."""
    rng = np.random.default_rng(seed)
    points = rng.uniform(size=(count, 3))
    points[: count // 8] = np.round(points[: count // 8])  # corners
    for axis, (low, high) in enumerate((grid.r_range, grid.theta_range, grid.phi_range)):
        points[:, axis] = np.clip(low + points[:, axis] * (high - low), low, high)
    points[:, 2] += grid.period * rng.integers(-2, 3, count)
    return points


R = np.geomspace(1.0, 4.0, 17)
THETA = np.pi / 2 + np.linspace(-0.7, 0.6, 17)
PHI = np.linspace(-0.3, 0.5, 9)

GRIDS = {
    "one block": lambda: block_grid(R, THETA, PHI),
    "blocks": lambda: block_grid(R, THETA, PHI, (2, 2, 2)),
    "two levels": lambda: block_grid(R, THETA, PHI, (2, 4, 2), [((2.0, 1.6, 0.0), 1)]),
    "three levels": lambda: block_grid(
        R, THETA, PHI, (2, 4, 4), [((2.5, 1.6, 0.0), 2), ((1.0, 1.0, 0.4), 1)]
    ),
    "one azimuth cell": lambda: block_grid(R, THETA, np.array([0.0, 0.1]), (1, 2, 2)),
    "full ring": lambda: block_grid(R, THETA, np.linspace(0, 2 * np.pi, 9), (4, 1, 1)),
    "stretched": lambda: block_grid(
        1 + np.linspace(0, 1.5, 17) ** 2 + np.linspace(0, 0.1, 17),
        np.pi / 2 + np.linspace(-1, 1, 17) ** 3 * 0.5 + np.linspace(-0.1, 0.1, 17),
        np.cumsum([0.1, 0.2, 0.1, 0.3, 0.2, 0.1, 0.1, 0.2, 0.3]),
        (2, 4, 2),
    ),
}
