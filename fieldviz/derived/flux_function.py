"""The flux function of the azimuth-averaged poloidal field, from fluxes through faces.

B_r = 1/(r^2 sin theta) dpsi/dtheta, B_theta = -1/(r sin theta) dpsi/dr, so psi is constant along
the field lines of an axisymmetric field (Mestel 1961; Chandrasekhar 1956, from memory).
"""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["flux_function"]


def flux_function(snapshot: Snapshot, r: Array, theta: Array) -> Array:
    """Work out psi at nodes, 0 at the inner edge of the midplane.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_r` and `magnetic_theta`, on faces or cells.
    r : (n_r,) array
        Radii of the nodes, within the wedge.
    theta : (n_theta,) array
        Colatitudes of the nodes, within the wedge.

    Returns
    -------
    (n_theta, n_r) float64 array
        psi = r sin(theta) <A_phi>, field times length squared. From face-centred fields it is exact
        where nodes are edges of the grid; from cell values it is second order.

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    From edge to edge psi grows by the flux between them over the wedge's azimuth: along the inner
    wall from face to face in theta, from there outward in r. Between edges the flux through a face
    is shared by cos(theta) or by r^3, and fluxes of faces across theta are linear in cos(theta):
    the field without divergence in any cell that `fieldviz.lines` follows with "flux".
    """
    snapshot.require("work out the flux function", "magnetic_r", "magnetic_theta")
    grid = snapshot.grid
    for name, nodes, (low, high) in (("r", r, grid.r_range), ("theta", theta, grid.theta_range)):
        if np.min(nodes) < low or np.max(nodes) > high:
            raise FieldvizError(
                f"Cannot work out the flux function: expected nodes with {name} within {low:.6g} "
                f"to {high:.6g}, got {np.min(nodes):.6g} to {np.max(nodes):.6g}."
            )
    at_wall = _along_inner_wall(snapshot, np.append(theta, np.pi / 2))
    outward = _outward(snapshot, np.asarray(r, dtype=np.float64), np.asarray(theta))
    return (at_wall[:-1, None] - at_wall[-1] - outward) / grid.period


def _along_inner_wall(snapshot: Snapshot, theta: Array) -> Array:
    """Radial flux through the inner wall from its upper end down to each theta."""
    grid = snapshot.grid
    total = np.zeros(len(theta))
    cosine = np.cos(np.clip(theta, *grid.theta_range))
    for block in np.flatnonzero(grid.r_edges[:, 0] == grid.r_range[0]):
        area = grid.area_r(int(block))[..., 0]
        flux = (_faces_r(snapshot, int(block)) * area).sum(0)
        cumulative = np.concatenate([[0.0], np.cumsum(flux)])
        total += np.interp(-cosine, -np.cos(grid.theta_edges[block]), cumulative)
    return total


def _outward(snapshot: Snapshot, r: Array, theta: Array) -> Array:
    """Southward flux through each cone theta from the inner wall out to each r."""
    grid = snapshot.grid
    total = np.zeros((len(theta), len(r)))
    edges, last = grid.theta_edges, grid.theta_range[1]
    for block in range(grid.n_blocks):
        top, bottom = edges[block, 0], edges[block, -1]
        rows = np.flatnonzero(
            (theta >= top) & ((theta < bottom) | ((theta == last) & (last == bottom)))
        )
        if not rows.size:
            continue
        area = grid.area_theta(block)
        flux = (_faces_theta(snapshot, block) * area).sum(0)
        cumulative = np.concatenate([np.zeros((len(flux), 1)), np.cumsum(flux, axis=1)], axis=1)
        at_rows = _between(np.cos(edges[block]), cumulative, np.cos(theta[rows]))
        cubes = grid.r_edges[block] ** 3
        for row, values in zip(rows, at_rows, strict=True):
            total[row] += np.interp(r**3, cubes, values)
    return total


def _between(falling: Array, values: Array, wanted: Array) -> Array:
    """Linear interpolation along the first axis between falling coordinates."""
    j = np.clip(np.searchsorted(-falling, -wanted, side="right") - 1, 0, len(falling) - 2)
    weight = ((falling[j] - wanted) / (falling[j] - falling[j + 1]))[:, None]
    return (1 - weight) * values[j] + weight * values[j + 1]


def _faces_r(snapshot: Snapshot, block: int) -> Array:
    """B_r on a block's innermost faces, (n_phi, n_theta)."""
    if "magnetic_r" in snapshot.faces:
        return snapshot.faces.block("magnetic_r", block)[..., 0].astype(np.float64)
    haloed = halo(snapshot, "magnetic_r")[block, 1:-1, 1:-1, :2].astype(np.float64)
    weight = _face_weights(snapshot.grid, "r", block)[0]
    return (1 - weight) * haloed[..., 0] + weight * haloed[..., 1]


def _faces_theta(snapshot: Snapshot, block: int) -> Array:
    """B_theta on a block's faces across theta, (n_phi, n_theta + 1, n_r)."""
    if "magnetic_theta" in snapshot.faces:
        return snapshot.faces.block("magnetic_theta", block).astype(np.float64)
    haloed = halo(snapshot, "magnetic_theta")[block, 1:-1, :, 1:-1].astype(np.float64)
    weight = _face_weights(snapshot.grid, "theta", block)[:, None]
    return (1 - weight) * haloed[:, :-1] + weight * haloed[:, 1:]


def _face_weights(grid: WedgeGrid, axis: str, block: int) -> Array:
    """Weights of the upper cell for interpolation from haloed centres to faces."""
    with_ghosts = getattr(halo_grid(grid), f"{axis}_edges")[block]
    middles, faces = centres(with_ghosts), with_ghosts[1:-1]
    return (faces - middles[:-1]) / np.diff(middles)
