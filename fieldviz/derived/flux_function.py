"""The flux function of the azimuth-averaged poloidal field, from fluxes through faces.

B_r = 1/(r^2 sin theta) dpsi/dtheta, B_theta = -1/(r sin theta) dpsi/dr, so psi is constant along
the field lines of an axisymmetric field (Mestel 1961; Chandrasekhar 1956, from memory).

psi is the same along every path only where the field is free of divergence. How much two paths
differ is reported; from cell values, where they always do, psi is the least-squares compromise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import eigh_tridiagonal, solveh_banded

from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import annulus_widths, area_r, area_theta, centres, cosine_steps
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FluxFunction", "distinct_edges", "flux_function", "flux_function_at"]

_POLOIDAL = ("magnetic_r", "magnetic_theta")
_SAME_EDGE = 1e-3  # of a cell: edges that differ by less are one
_LEAST_SINE = 1e-3  # of the next edge's: what stands for sin(theta) on the axis


@dataclass(frozen=True, eq=False)
class FluxFunction:
    """The flux function at nodes, and how well it is defined.

    Attributes
    ----------
    psi : (n_theta, n_r) float64 array
        psi = r sin(theta) <A_phi>, field times length squared; 0 at the inner edge of the midplane.
    r : (n_r,) array
    theta : (n_theta,) array
    path_mismatch : float
        Largest difference between psi integrated first along theta, then along r, and the other
        way round, over the edges that all blocks share there; as a share of the largest |psi|.
        Rounding for a field that is free of divergence on faces; NaN where there is no flux, or
        not everywhere a number.
    source : str
        "faces" or "cells".
    notes : tuple of str
        What the numbers rest on.
    """

    psi: Array
    r: Array
    theta: Array
    path_mismatch: float
    source: str
    notes: tuple[str, ...]


def flux_function_at(snapshot: Snapshot, r: Array, theta: Array) -> Array:
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
    From faces, from edge to edge psi grows by the flux between them over the wedge's azimuth: along
    the inner wall from face to face in theta, from there outward in r. Between edges the flux
    through a face is shared by cos(theta) or by r^3, and fluxes of faces across theta are linear in
    cos(theta): the field without divergence in any cell that `fieldviz.lines` follows with "flux".

    From cell values, faces are interpolated, and psi is that whose field differs least from theirs:
    the sum over all faces of area times the square of the difference is smallest. Between edges it
    is linear in cos(theta) and in r^3. A cell without a number then leaves no number anywhere.
    `flux_function` says how well psi is defined.
    """
    _check(snapshot, r, theta)
    r, theta = np.asarray(r, dtype=np.float64), np.asarray(theta, dtype=np.float64)
    if _on_faces(snapshot):
        at_wall = _along_inner_wall(snapshot, np.append(theta, np.pi / 2))
        outward = _outward(snapshot, r, theta)
        return (at_wall[:-1, None] - at_wall[-1] - outward) / snapshot.grid.period
    whole = _least_squares(_with_faces(snapshot))
    return _at_nodes(whole, snapshot.grid, r, theta)


def flux_function(
    snapshot: Snapshot, r: Array | None = None, theta: Array | None = None
) -> FluxFunction:
    """Work out psi and how much it depends on the path of integration.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_r` and `magnetic_theta`, on faces or cells.
    r, theta : arrays, optional
        Nodes, as for `flux_function_at`; all edges of the grid by default.

    Returns
    -------
    FluxFunction

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.flux_function(fv.demo_disc(shape=(4, 32, 24))).path_mismatch < 1e-12
    True
    """
    snapshot.require("work out the flux function", *_POLOIDAL)
    grid = snapshot.grid
    r = distinct_edges(grid.r_edges) if r is None else np.asarray(r, dtype=np.float64)
    theta = (
        distinct_edges(grid.theta_edges) if theta is None else np.asarray(theta, dtype=np.float64)
    )
    _check(snapshot, r, theta)
    common = _common(grid.r_edges), _common(grid.theta_edges)
    fluxes = _with_faces(snapshot)
    if fluxes is snapshot:
        source, note = "faces", "psi from face fluxes, first along theta at the inner wall"
        psi = flux_function_at(snapshot, r, theta)
        there = flux_function_at(snapshot, *common)
    else:
        source, note = "cells", "psi from cell values by least squares, weighted with area"
        whole = _least_squares(fluxes)
        psi, there = _at_nodes(whole, grid, r, theta), _at_nodes(whole, grid, *common)
    mismatch, notes = _mismatch(*_two_paths(fluxes, *common), there)
    if source == "cells":
        notes.append("cell values are interpolated to faces: the mismatch is a truncation error")
    return FluxFunction(psi, r, theta, mismatch, source, (note, *notes))


def _check(snapshot: Snapshot, r: Array, theta: Array) -> None:
    snapshot.require("work out the flux function", *_POLOIDAL)
    grid = snapshot.grid
    for name, nodes, (low, high) in (("r", r, grid.r_range), ("theta", theta, grid.theta_range)):
        # Written so that NaN is refused too.
        if not (np.min(nodes) >= low and np.max(nodes) <= high):
            raise FieldvizError(
                f"Cannot work out the flux function: expected nodes with {name} within {low:.6g} "
                f"to {high:.6g}, got {np.min(nodes):.6g} to {np.max(nodes):.6g}; leave out those "
                "beyond the wedge."
            )


def distinct_edges(edges: Array) -> Array:
    """All different edges of all blocks along one axis."""
    values = np.unique(edges)
    apart = np.diff(values) > _SAME_EDGE * np.diff(edges, axis=1).min()
    kept = values[np.concatenate([[True], apart])]
    kept[-1] = values[-1]
    return np.asarray(kept)


def _common(edges: Array) -> Array:
    """Edges along one axis that are edges in every block they cross.

    In a coarse block the lines of finer ones run through the middle of cells, where fluxes are
    shared and not known: paths along them may differ without any divergence.
    """
    lines = distinct_edges(edges)
    limit = _SAME_EDGE * np.diff(edges, axis=1).min()
    kept = np.ones(len(lines), dtype=bool)
    for own in np.unique(edges, axis=0):
        distance = np.abs(lines[:, None] - own).min(axis=1)
        kept &= (lines < own[0]) | (lines > own[-1]) | (distance <= limit)
    return np.asarray(lines[kept])


def _two_paths(snapshot: Snapshot, r: Array, theta: Array) -> tuple[Array, Array]:
    """Psi less that of the corner (inner wall, upper wall), (n_theta, n_r).

    First along theta at the inner wall, then outward; and outward along the upper wall, then
    along theta.
    """
    outward = _outward(snapshot, r, theta) / snapshot.grid.period
    downward = _downward(snapshot, r, theta) / snapshot.grid.period
    return downward[:, :1] - outward, downward - outward[:1]


def _mismatch(first: Array, second: Array, psi: Array) -> tuple[float, list[str]]:
    without = int(np.count_nonzero(~np.isfinite(first) | ~np.isfinite(second)))
    if without:
        return np.nan, [f"{without} nodes have no number, so paths cannot be compared"]
    scale = np.abs(psi).max()
    if scale == 0:
        return np.nan, ["there is no poloidal flux to compare paths by"]
    mismatch = float(np.abs(first - second).max() / scale)
    return mismatch, [f"paths of integration differ by {mismatch:.2g} of the largest |psi|"]


def _least_squares(fluxes: Snapshot) -> Array:
    """Psi on the lattice of all edges, but for a constant."""
    lines = distinct_edges(fluxes.grid.r_edges), distinct_edges(fluxes.grid.theta_edges)
    return _compromise(*_two_paths(fluxes, *lines), *lines)


def _compromise(first: Array, second: Array, r: Array, theta: Array) -> Array:
    """Psi whose steps are nearest to the fluxes, in the mean of B weighted with area.

    With steps F along theta and G along r, areas a = r^2 dcos and b = sin(theta) (r dr), this is
    the least sum of (dpsi - F)^2/a + (dpsi - G)^2/b. Areas are products of a function of r and one
    of theta, so eigenvectors along theta leave one small band matrix along r for each.
    """
    # One path holds the fluxes along theta, the other those along r.
    steps_theta, steps_r = np.diff(second, axis=0), np.diff(first, axis=1)
    sine = np.sin(theta)
    sine[0], sine[-1] = (max(sine[m], _LEAST_SINE * sine[n]) for m, n in ((0, 1), (-1, -2)))
    square = np.square(np.maximum(r, _LEAST_SINE * r[1]))
    per_cosine, per_ring = 1 / cosine_steps(theta), 1 / annulus_widths(r)
    sources = np.zeros(first.shape)
    flow = steps_theta * per_cosine[:, None] / square
    sources[1:] += flow
    sources[:-1] -= flow
    flow = steps_r * per_ring / sine[:, None]
    sources[:, 1:] += flow
    sources[:, :-1] -= flow
    if not np.isfinite(sources).all():
        return np.full(first.shape, np.nan)
    root = np.sqrt(sine)
    diagonal, beside = _second_difference(per_cosine)
    values, vectors = eigh_tridiagonal(diagonal * sine, beside * root[1:] * root[:-1])
    modes = vectors.T @ (sources * root[:, None])
    band = np.zeros((2, len(r)))
    values[0] = 0.0  # It is, but for rounding: psi may be constant along theta.
    for n, value in enumerate(values):
        band[1], band[0, 1:] = _second_difference(per_ring)
        band[1] += value / square
        if n == 0:
            # Along r it may be constant too: one value is pinned, and taken off afterwards.
            band[1, 0] *= 2
        modes[n] = solveh_banded(band, modes[n])
    return np.asarray((vectors @ modes) * root[:, None])


def _second_difference(weights: Array) -> tuple[Array, Array]:
    """Diagonal and off-diagonal of the matrix of sum(weights (x_n+1 - x_n)^2)."""
    return np.append(weights, 0.0) + np.append(0.0, weights), -weights


def _at_nodes(lattice: Array, grid: WedgeGrid, r: Array, theta: Array) -> Array:
    """Psi on the lattice of all edges brought to nodes, 0 at the inner edge of the midplane."""
    lattice_r, lattice_theta = distinct_edges(grid.r_edges), distinct_edges(grid.theta_edges)
    wanted = np.clip(np.append(theta, np.pi / 2), *grid.theta_range)
    at_theta = _between(np.cos(lattice_theta), lattice, np.cos(wanted))
    i = np.clip(np.searchsorted(lattice_r, r, side="right") - 1, 0, len(lattice_r) - 2)
    cubes = lattice_r**3
    weight = (r**3 - cubes[i]) / (cubes[i + 1] - cubes[i])
    found = (1 - weight) * at_theta[:-1, i] + weight * at_theta[:-1, i + 1]
    return np.asarray(found - at_theta[-1, 0])


def _along_inner_wall(snapshot: Snapshot, theta: Array) -> Array:
    """Radial flux through the inner wall from its upper end down to each theta."""
    grid = snapshot.grid
    total = np.zeros(len(theta))
    cosine = np.cos(np.clip(theta, *grid.theta_range))
    for block in np.flatnonzero(grid.r_edges[:, 0] == grid.r_range[0]):
        flux = _flux(snapshot, "magnetic_r", int(block))[:, 0]
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
        flux = _flux(snapshot, "magnetic_theta", block)
        cumulative = np.concatenate([np.zeros((len(flux), 1)), np.cumsum(flux, axis=1)], axis=1)
        at_rows = _between(np.cos(edges[block]), cumulative, np.cos(theta[rows]))
        cubes = grid.r_edges[block] ** 3
        for row, values in zip(rows, at_rows, strict=True):
            total[row] += np.interp(r**3, cubes, values)
    return total


def _downward(snapshot: Snapshot, r: Array, theta: Array) -> Array:
    """Outward flux through each sphere r from the upper wall down to each theta."""
    grid = snapshot.grid
    total = np.zeros((len(theta), len(r)))
    edges, last = grid.r_edges, grid.r_range[1]
    for block in range(grid.n_blocks):
        inner, outer = edges[block, 0], edges[block, -1]
        columns = np.flatnonzero((r >= inner) & ((r < outer) | ((r == last) & (last == outer))))
        if not columns.size:
            continue
        flux = _flux(snapshot, "magnetic_r", block)
        cumulative = np.concatenate([np.zeros((1, flux.shape[1])), np.cumsum(flux, axis=0)])
        at_columns = _between(-(edges[block] ** 3), cumulative.T, -(r[columns] ** 3))
        falling = -np.cos(grid.theta_edges[block])
        for column, values in zip(columns, at_columns, strict=True):
            total[:, column] += np.interp(-np.cos(theta), falling, values)
    return total


def _between(falling: Array, values: Array, wanted: Array) -> Array:
    """Linear interpolation along the first axis between falling coordinates."""
    j = np.clip(np.searchsorted(-falling, -wanted, side="right") - 1, 0, len(falling) - 2)
    weight = ((falling[j] - wanted) / (falling[j] - falling[j + 1]))[:, None]
    return (1 - weight) * values[j] + weight * values[j + 1]


def _with_faces(snapshot: Snapshot) -> Snapshot:
    """The poloidal field on faces: as it is, or interpolated linearly between cell values."""
    if _on_faces(snapshot):
        return snapshot
    grid, faces = snapshot.grid, {}
    haloed = halo(snapshot, "magnetic_r")[:, 1:-1, 1:-1].astype(np.float64)
    weight = _face_weights(grid, "r")[:, None, None]
    faces["magnetic_r"] = (1 - weight) * haloed[..., :-1] + weight * haloed[..., 1:]
    haloed = halo(snapshot, "magnetic_theta")[:, 1:-1, :, 1:-1].astype(np.float64)
    weight = _face_weights(grid, "theta")[:, None, :, None]
    faces["magnetic_theta"] = (1 - weight) * haloed[:, :, :-1] + weight * haloed[:, :, 1:]
    return Snapshot.from_grid(grid, faces=faces)


def _on_faces(snapshot: Snapshot) -> bool:
    return all(name in snapshot.faces for name in _POLOIDAL)


def _flux(snapshot: Snapshot, name: str, block: int) -> Array:
    """Flux through a block's faces, summed over azimuth."""
    from fieldviz.derived._survey_kernels import azimuth_sums

    r_edges, theta_edges, phi_edges = snapshot.grid.edges(block)
    area = area_r if name == "magnetic_r" else area_theta
    per_angle = area(r_edges, theta_edges, np.array([0.0, 1.0]))[0]
    total = np.empty(per_angle.shape)
    azimuth_sums(snapshot.faces.block(name, block), np.diff(phi_edges), total)
    return total * per_angle


def _face_weights(grid: WedgeGrid, axis: str) -> Array:
    """Weights of the upper cell for interpolation from haloed centres to faces, (n_blocks, n)."""
    with_ghosts = getattr(halo_grid(grid), f"{axis}_edges")
    middles, faces = centres(with_ghosts), with_ghosts[:, 1:-1]
    return np.asarray((faces - middles[:, :-1]) / np.diff(middles))
