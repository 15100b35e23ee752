"""One layer of ghost cells around every block.

Across a neighbour of the same level the value is a copy; across a level jump it is linear
interpolation at the ghost centre; past a wall it is continued linearly; in azimuth the wedge
repeats. The width is always one, whatever the number of processes.
"""

from __future__ import annotations

from dataclasses import dataclass
from weakref import WeakKeyDictionary

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["HaloGrid", "halo", "halo_array", "halo_grid", "stays_positive"]

_POSITIVE = ("density", "pressure", "diffusivity_ambipolar", "diffusivity_ohmic")


@dataclass(frozen=True, eq=False)
class HaloGrid:
    """Edges and centres of all blocks with their ghost layer.

    Attributes
    ----------
    r_edges, theta_edges, phi_edges : (n_blocks, n + 3) arrays
    r, theta, phi : (n_blocks, n + 2) arrays
        Centres, ghosts included.
    """

    r_edges: Array
    theta_edges: Array
    phi_edges: Array
    r: Array
    theta: Array
    phi: Array


_known: WeakKeyDictionary[WedgeGrid, HaloGrid] = WeakKeyDictionary()


def halo_grid(grid: WedgeGrid) -> HaloGrid:
    """Edges and centres with ghosts; worked out once per grid."""
    if grid not in _known:
        _known[grid] = _make_halo_grid(grid)
    return _known[grid]


def stays_positive(name: str) -> bool:
    """Whether a quantity must not be continued below zero."""
    return name in _POSITIVE


def halo(snapshot: Snapshot, name: str) -> Array:
    """A cell field with its ghost layer, (n_blocks, n_phi + 2, n_theta + 2, n_r + 2).

    Parameters
    ----------
    snapshot : Snapshot
    name : str
        Cell field.

    Returns
    -------
    array
        In the field's own precision.
    """
    return halo_array(snapshot.grid, snapshot.cell(name), positive=stays_positive(name))


def halo_array(
    grid: WedgeGrid, cells: Array, *, positive: bool = False, out: Array | None = None
) -> Array:
    """Any cell array of a grid with its ghost layer; see `halo`.

    Parameters
    ----------
    grid : WedgeGrid
    cells : (n_blocks, n_phi, n_theta, n_r) array
        Components of vectors are taken as they are: neighbours share the directions of r, theta
        and phi to first order in the cell size, and exactly at the same point.
    positive : bool
        Never continue below zero.
    out : (n_blocks, n_phi + 2, n_theta + 2, n_r + 2) array, optional
        Where to put it; it need not be contiguous.

    Returns
    -------
    (n_blocks, n_phi + 2, n_theta + 2, n_r + 2) array
    """
    from fieldviz.wedge._kernels import fill_halos, fill_walls

    shape = (grid.n_blocks, *grid.block_shape)
    if cells.shape != shape:
        raise FieldvizError(
            f"Cannot add a halo: expected an array of shape {shape}, got {cells.shape}."
        )
    around = halo_grid(grid)
    table = grid.table
    haloed = out
    if haloed is None:
        haloed = np.empty((shape[0], *(n + 2 for n in shape[1:])), dtype=cells.dtype)
    haloed[:, 1:-1, 1:-1, 1:-1] = cells
    if grid.n_blocks == 1:
        # Nothing to search for: the block is its own neighbour in azimuth, the rest are walls.
        haloed[:, 0, 1:-1, 1:-1], haloed[:, -1, 1:-1, 1:-1] = cells[:, -1], cells[:, 0]
        fill_walls(haloed[0], around.r[0], around.theta[0], True, True, True, True, positive)
        return haloed
    # Coarse levels first: finer ones interpolate between coarse cells and coarse ghosts.
    for level in grid.levels:
        fill_halos(
            np.flatnonzero(grid.level == level), haloed, around.r, around.theta, around.phi,
            table.r, table.theta, table.phi, table.block, grid.level, positive,
        )  # fmt: skip
    return haloed


def _make_halo_grid(grid: WedgeGrid) -> HaloGrid:
    edges = [
        _with_ghost_edges(grid, axis, array)
        for axis, array in enumerate((grid.r_edges, grid.theta_edges, grid.phi_edges))
    ]
    ghost, first = edges[0][:, 0], edges[0][:, 1]
    # Radii stay positive: near the origin the ghost cell is half the way inward. Only where the
    # origin itself is the wall, as theta at the axis, does the ghost lie beyond it.
    edges[0][:, 0] = np.where((ghost > 0) | (first == 0), ghost, 0.5 * first)
    return HaloGrid(*edges, *(centres(array) for array in edges))


def _with_ghost_edges(grid: WedgeGrid, axis: int, edges: Array) -> Array:
    widths = np.diff(edges, axis=1)
    count, ghosts = edges.shape[1] - 1, []
    for high in (False, True):
        # The cell at the wall, the one inside it, and the cells of a neighbour that touch it.
        end, inside, touching = (-1, max(-2, -count), 0) if high else (0, min(1, count - 1), -1)
        width = widths[:, end] * np.clip(widths[:, end] / widths[:, inside], 0.5, 2.0)
        neighbour = _same_level_neighbours(grid, axis, high)
        known = neighbour >= 0
        width[known] = widths[neighbour[known], touching]
        ghost = edges[:, end] + width if high else edges[:, end] - width
        # The neighbour's own edge, not a sum that rounds: blocks must not show in any bit.
        # Across the azimuth's seam there is no such edge.
        beyond = edges[neighbour, 1 if high else -2]
        direct = known & (edges[neighbour, 0 if high else -1] == edges[:, end])
        ghosts.append(np.where(direct, beyond, ghost))
    return np.column_stack([ghosts[0], edges, ghosts[1]])


def _same_level_neighbours(grid: WedgeGrid, axis: int, high: bool) -> Array:
    """For each block a same-level block across one side, -1 where there is none."""
    table = grid.table
    lines = (table.r, table.theta, table.phi)
    starts = [
        np.searchsorted(line, edges[:, 0])
        for line, edges in zip(lines, (grid.r_edges, grid.theta_edges, grid.phi_edges), strict=True)
    ]
    ends = [
        np.searchsorted(line, edges[:, -1])
        for line, edges in zip(lines, (grid.r_edges, grid.theta_edges, grid.phi_edges), strict=True)
    ]
    count = len(lines[axis]) - 1
    found = np.full(grid.n_blocks, -1, dtype=np.int64)
    assert grid.level is not None
    for block in range(grid.n_blocks):
        beyond = ends[axis][block] if high else starts[axis][block] - 1
        if axis == 2:
            beyond %= count
        if not 0 <= beyond < count:
            continue
        index: list[int | slice] = [slice(starts[n][block], ends[n][block]) for n in (2, 1, 0)]
        index[2 - axis] = int(beyond)
        across = np.asarray(table.block[tuple(index)])
        same = across[grid.level[across] == grid.level[block]]
        if same.size:
            found[block] = int(same.flat[0])
    return found
