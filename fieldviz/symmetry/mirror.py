"""Values at mirror points: theta -> 2 centre - theta, linear in theta between cell middles."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.symmetry.theta_hats import theta_hats
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["MIRROR_SIGNS", "Formula", "TableMirror", "mirrored_cells", "table_mirror"]

# v is a true vector and B an axial one: their signs are opposite.
MIRROR_SIGNS: Mapping[str, int] = {
    "density": 1,
    "velocity_r": 1,
    "velocity_theta": -1,
    "velocity_phi": 1,
    "magnetic_r": -1,
    "magnetic_theta": 1,
    "magnetic_phi": -1,
    "current_r": 1,
    "current_theta": -1,
    "current_phi": 1,
}

Formula = Callable[[Snapshot, int], Array]
_SAME_PLACE = 1e-9  # of the distance between two middles


@dataclass(frozen=True, eq=False)
class TableMirror:
    """How to mirror tables (n_theta, n_r) of a meridional mesh.

    Attributes
    ----------
    angle : (n_theta, n_r) array
        Height of each cell's own middle above the centre, radians.
    centre : (n_r,) array
        Colatitude it mirrors about.
    """

    angle: Array
    centre: Array
    _low: IntArray
    _high: IntArray
    _share: Array
    _inside: Array

    def __call__(self, table: Array) -> Array:
        """Give the table at mirror points; NaN where those lie outside the wedge."""
        columns = np.arange(table.shape[1])
        low, high = table[self._low, columns], table[self._high, columns]
        # A row that has no weight must not bring its NaN along.
        mixed = (1 - self._share) * low + self._share * high
        mixed = np.where(self._share == 0, low, np.where(self._share == 1, high, mixed))
        return np.where(self._inside, mixed, np.nan)


def table_mirror(mesh: MeridionalMesh, centre: Array | float = 0.5 * np.pi) -> TableMirror:
    """Prepare the mirror about `centre`, a colatitude or one for each column, (n_r,)."""
    edges = mesh.theta_edges
    middle = 0.5 * (edges[mesh.row_start] + edges[mesh.row_stop])
    about = np.broadcast_to(np.asarray(centre, dtype=np.float64), middle.shape[1])
    wanted = 2 * about - middle
    low, high = np.empty_like(mesh.row_start), np.empty_like(mesh.row_start)
    share = np.empty(middle.shape)
    for i in range(middle.shape[1]):
        rows = np.unique(mesh.row_start[:, i])
        nodes, x = middle[rows, i], wanted[:, i]
        if len(rows) == 1:
            low[:, i], high[:, i], share[:, i] = rows[0], rows[0], 0.0
            continue
        j = np.clip(np.searchsorted(nodes, x, side="right") - 1, 0, len(rows) - 2)
        part = np.clip((x - nodes[j]) / (nodes[j + 1] - nodes[j]), 0.0, 1.0)
        low[:, i], high[:, i], share[:, i] = rows[j], rows[j + 1], part
    share[share < _SAME_PLACE] = 0.0
    share[share > 1 - _SAME_PLACE] = 1.0
    # A cell that is cut by the end of what both sides reach may have its middle just beyond.
    half = 0.5 * (edges[mesh.row_stop] - edges[mesh.row_start])
    inside = (wanted >= edges[0] - half) & (wanted <= edges[-1] + half)
    return TableMirror(about - middle, about, low, high, share, inside)


def mirrored_cells(
    snapshot: Snapshot, formulas: Mapping[str, Formula], block: int, rows: IntArray
) -> dict[str, Array]:
    """Values at the points that mirror cells of a block about the midplane.

    Parameters
    ----------
    snapshot : Snapshot
    formulas : mapping of name to function (snapshot, block) -> (n_phi, n_theta, n_r) array
    block : int
    rows : (m,) int array
        Rows of the block, each far enough within the range that both sides have.

    Returns
    -------
    dict of name to (n_phi, m, n_r) array
        Linear in theta; in phi and r the value of the cell that holds the point, which at equal
        levels is exact. One other block is in memory at a time.
    """
    grid = snapshot.grid
    r, theta, phi = grid.cell_centres(block)
    wanted = np.clip(np.pi - theta[rows], *grid.theta_range)
    shape = (len(phi), len(rows), len(r))
    result = {name: np.zeros(shape) for name in formulas}
    for other in _overlapping(grid, block, wanted):
        k, own_k = _common(phi, grid.phi_edges[other])
        i, own_i = _common(r, grid.r_edges[other])
        hats = theta_hats(grid, other, wanted) if len(k) and len(i) else []
        for name, formula in formulas.items() if hats else ():
            cells = np.asarray(formula(snapshot, other), dtype=np.float64)
            cells = cells[np.ix_(own_k, np.arange(cells.shape[1]), own_i)]
            by_row = cells.transpose(1, 0, 2).reshape(cells.shape[1], -1)
            for columns, weights in hats:
                values = (weights @ by_row).reshape(-1, len(k), len(i)).transpose(1, 0, 2)
                here = columns[np.ix_(own_k, own_i)][:, None]
                result[name][np.ix_(k, np.arange(len(rows)), i)] += np.where(here, values, 0.0)
    return result


def _overlapping(grid: WedgeGrid, block: int, wanted: Array) -> IntArray:
    """Blocks that may have a say at colatitudes `wanted` over the columns of a block."""
    pad = float(np.diff(grid.theta_edges[:, [0, 1, -2, -1]], axis=1).max())
    kept = grid.theta_edges[:, 0] - pad <= wanted.max()
    kept &= grid.theta_edges[:, -1] + pad >= wanted.min()
    for edges in (grid.r_edges, grid.phi_edges):
        kept &= (edges[:, 0] < edges[block, -1]) & (edges[:, -1] > edges[block, 0])
    return np.flatnonzero(kept)


def _common(middles: Array, edges: Array) -> tuple[IntArray, IntArray]:
    """Which middles lie within the edges, and in which cells."""
    inside = np.flatnonzero((middles >= edges[0]) & (middles < edges[-1]))
    return inside, np.searchsorted(edges, middles[inside], side="right") - 1
