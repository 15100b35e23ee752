"""Integrals over cones theta = constant: what flows through them, band by band in radius."""

from __future__ import annotations

import numpy as np

from fieldviz.wedge.geometry import annulus_widths
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_grid
from fieldviz.wedge.typing import Array

__all__ = ["cone_integral"]


def cone_integral(grid: WedgeGrid, haloed: Array, theta: float, band_edges: Array) -> Array:
    """Integral of a flux density over a cone, for each band of radii.

    Parameters
    ----------
    grid : WedgeGrid
    haloed : (n_blocks, n_phi + 2, n_theta + 2, n_r + 2) array
        Flux density along theta-hat (southward), with its ghost layer.
    theta : float
        Colatitude of the cone; need not be a face.
    band_edges : (n_bands + 1,) array
        Radii. Cells cut by a band edge are shared by area.

    Returns
    -------
    (n_bands,) float64 array
        Southward flux through the wedge's part of the cone. Linear interpolation in theta, so
        second order in the cell size; areas are exact.
    """
    around = halo_grid(grid)
    total = np.zeros(len(band_edges) - 1)
    edges = grid.theta_edges
    last = grid.theta_range[1]
    crossed = (edges[:, 0] <= theta) & (
        (theta < edges[:, -1]) | ((theta == last) & (last == edges[:, -1]))
    )
    for block in np.flatnonzero(crossed):
        centres = around.theta[block]
        j = int(np.clip(np.searchsorted(centres, theta) - 1, 0, len(centres) - 2))
        weight = (theta - centres[j]) / (centres[j + 1] - centres[j])
        rows = haloed[block, 1:-1, :, 1:-1].astype(np.float64, copy=False)
        density = (1 - weight) * rows[:, j] + weight * rows[:, j + 1]
        r_edges, _, phi_edges = grid.edges(int(block))
        per_r = np.diff(phi_edges) @ density * annulus_widths(r_edges) * np.sin(theta)
        total += np.diff(_up_to(band_edges, r_edges, per_r))
    return total


def _up_to(radii: Array, r_edges: Array, per_cell: Array) -> Array:
    """Sum from the inner edge up to each radius, even in r^2 within a cell."""
    cumulative = np.concatenate([[0.0], np.cumsum(per_cell)])
    return np.interp(np.square(radii), np.square(r_edges), cumulative)
