"""The flux function of the azimuth-averaged poloidal field.

psi is constant along field lines:

    B_r = 1/(r^2 sin theta) dpsi/dtheta,    B_theta = -1/(r sin theta) dpsi/dr.
"""

from __future__ import annotations

import numpy as np
from scipy.interpolate import CubicSpline

from fieldviz.scenes.display_grid import Window, sampling_nodes
from fieldviz.scenes.finite_cells import finite_field
from fieldviz.wedge.geometry import centres, cosine_steps
from fieldviz.wedge.halo import halo_array
from fieldviz.wedge.sampling import PointSampler
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["averaged_poloidal_field", "equal_flux_levels", "poloidal_flux"]

_MOST_AZIMUTHS = 96
_MOST_NODES = 4_000_000


def averaged_poloidal_field(
    snapshot: Snapshot, r_end: float | None = None
) -> tuple[Array, Array, Array, Array]:
    """B_r and B_theta averaged over azimuth, on cells as fine as the finest of the snapshot.

    Parameters
    ----------
    snapshot : Snapshot
    r_end : float, optional
        Outer radius.

    Returns
    -------
    r : (n_r,) array
        Radii of the cell middles.
    theta_edges : (n_theta + 1,) array
    B_r, B_theta : (n_theta, n_r) arrays
        At the cell middles; the mean over at most 96 evenly spaced azimuths.
    """
    phi, theta_edges, r_edges = sampling_nodes(snapshot.grid, Window(r_end=r_end), _MOST_NODES)
    phi = phi[:: -(-len(phi) // _MOST_AZIMUTHS)]
    r, theta = centres(r_edges), centres(theta_edges)
    mesh = np.meshgrid(phi, theta, r, indexing="ij")
    sampler = PointSampler(snapshot.grid, np.stack([a.ravel() for a in mesh[::-1]], axis=-1))
    means = []
    for name in ("magnetic_r", "magnetic_theta"):
        cells, _ = finite_field(snapshot.cell(name))
        values = sampler.of_halo(halo_array(snapshot.grid, cells))
        means.append(values.reshape(len(phi), len(theta), len(r)).mean(axis=0, dtype=np.float64))
    return r, theta_edges, means[0], means[1]


def poloidal_flux(r: Array, theta_edges: Array, B_r: Array, B_theta: Array) -> Array:
    """Integrate an axisymmetric field to its flux function.

    Parameters
    ----------
    r : (n_r,) array
        Radii of the cell middles.
    theta_edges : (n_theta + 1,) array
        Colatitudes of the cell edges.
    B_r, B_theta : (n_theta, n_r) arrays
        Cell values; theta-hat points south.

    Returns
    -------
    (n_theta + 1, n_r) array
        psi at (theta edge, r), 0 at the first radius of the edge next to the midplane; field
        times length squared.

    Notes
    -----
    Along that edge psi grows by -r sin(theta) B_theta dr, a cubic spline in ln r. From it along
    every arc it grows from edge to edge by r^2 B_r (cos theta_j - cos theta_j+1), which is the
    flux of a cell whose B_r is the mean over the cell: no error adds up along a field line.
    """
    row = int(np.argmin(np.abs(theta_edges - np.pi / 2)))
    at_row = 0.5 * (B_theta[max(row - 1, 0)] + B_theta[min(row, len(B_theta) - 1)])
    along_r = -(r**2) * np.sin(theta_edges[row]) * at_row
    base = CubicSpline(np.log(r), along_r).antiderivative()(np.log(r))
    steps = r**2 * B_r * cosine_steps(theta_edges)[:, None]
    arcs = np.concatenate([np.zeros((1, len(r))), np.cumsum(steps, axis=0)])
    return np.asarray(base + arcs - arcs[row])


def equal_flux_levels(psi: Array, count: int) -> Array:
    """Values of psi with the same flux between neighbours and half of it beside the ends."""
    low, high = float(np.min(psi)), float(np.max(psi))
    return low + (high - low) * (np.arange(count) + 0.5) / count
