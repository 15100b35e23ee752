"""Values at mirror points: theta -> 2 centre - theta, linear in theta between cell middles."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_blocks import Formula
from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.symmetry.theta_hats import theta_hats
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "MIRROR_SIGNS",
    "Formula",
    "MirrorPiece",
    "TableMirror",
    "mirror_pieces",
    "mirrored_cells",
    "table_mirror",
    "with_less",
]

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
    for alike in _alike(mesh):
        rows = np.unique(mesh.row_start[:, alike[0]])
        nodes, x = middle[rows, alike[0]], wanted[:, alike]
        if len(rows) == 1:
            low[:, alike], high[:, alike], share[:, alike] = rows[0], rows[0], 0.0
            continue
        j = np.clip(np.searchsorted(nodes, x, side="right") - 1, 0, len(rows) - 2)
        part = np.clip((x - nodes[j]) / (nodes[j + 1] - nodes[j]), 0.0, 1.0)
        low[:, alike], high[:, alike], share[:, alike] = rows[j], rows[j + 1], part
    share[share < _SAME_PLACE] = 0.0
    share[share > 1 - _SAME_PLACE] = 1.0
    # A cell that is cut by the end of what both sides reach may have its middle just beyond.
    half = 0.5 * (edges[mesh.row_stop] - edges[mesh.row_start])
    inside = (wanted >= edges[0] - half) & (wanted <= edges[-1] + half)
    return TableMirror(about - middle, about, low, high, share, inside)


def _alike(mesh: MeridionalMesh) -> list[IntArray]:
    """Columns that consist of the same cells."""
    if mesh.is_even:
        return [np.arange(mesh.row_start.shape[1])]
    patterns, which = np.unique(mesh.row_start, axis=1, return_inverse=True)
    return [np.flatnonzero(which.ravel() == number) for number in range(patterns.shape[1])]


def mirrored_cells(
    snapshot: Snapshot, formulas: Mapping[str, Formula], block: int, rows: IntArray
) -> dict[str, Array]:
    """Values at the points that mirror cells of a block about the midplane.

    Parameters
    ----------
    snapshot : Snapshot
    formulas : mapping of name to function (snapshot, block) -> (n_phi, n_theta, n_r) array
        Or such an array and what is to be taken off it at each r and theta.
    block : int
    rows : (m,) int array
        Rows of the block, each far enough within the range that both sides have.

    Returns
    -------
    dict of name to (n_phi, m, n_r) array
        Linear in theta; in phi and r the value of the cell that holds the point, which at equal
        levels is exact. One other block is in memory at a time.
    """
    from fieldviz.symmetry._kernels import add_mirrored

    shape = snapshot.grid.block_shape
    result = {name: np.zeros((shape[0], len(rows), shape[2])) for name in formulas}
    for piece in mirror_pieces(snapshot.grid, block, rows):
        for name, formula in formulas.items():
            cells, less = with_less(formula(snapshot, piece.block))
            add_mirrored(result[name], 0, cells, less, False, *piece.arrays)
    return result


@dataclass(frozen=True, eq=False)
class MirrorPiece:
    """What one block gives to the mirror points of another; see `_kernels.add_mirrored`.

    Attributes
    ----------
    block : int
        The block that gives.
    azimuths, columns : (n_phi,), (n_r,) int arrays
        Its cells that hold the points; -1 where none does.
    used : (n_phi, n_r) bool array
        Its columns that give.
    row_start, rows, weights : arrays
        Weights of its rows, as a sparse matrix (m, n_theta) by rows.
    """

    block: int
    azimuths: IntArray
    columns: IntArray
    used: Array
    row_start: IntArray
    rows: IntArray
    weights: Array

    @property
    def arrays(self) -> tuple[Array, ...]:
        """As the kernel takes them."""
        return (
            self.azimuths, self.columns, self.used, self.row_start, self.rows, self.weights
        )  # fmt: skip


def mirror_pieces(grid: WedgeGrid, block: int, rows: IntArray) -> Iterator[MirrorPiece]:
    """All that gives values to the points that mirror some rows of a block; see `mirrored_cells`.

    Pieces of one giving block follow one another.
    """
    r, theta, phi = grid.cell_centres(block)
    wanted = np.clip(np.pi - theta[rows], *grid.theta_range)
    for other in _overlapping(grid, block, wanted):
        azimuths, columns = _holding(phi, grid.phi_edges[other]), _holding(r, grid.r_edges[other])
        if azimuths.max() >= 0 and columns.max() >= 0:
            for used, weights in theta_hats(grid, int(other), wanted):
                start, cells = (a.astype(np.int64) for a in (weights.indptr, weights.indices))
                yield MirrorPiece(int(other), azimuths, columns, used, start, cells, weights.data)


def with_less(made: Array | tuple[Array, Array]) -> tuple[Array, Array]:
    """What a formula gives, as cells and what is to be taken off at each r and theta."""
    cells, less = made if isinstance(made, tuple) else (made, np.zeros(np.shape(made)[1:]))
    return np.ascontiguousarray(cells), np.ascontiguousarray(less, dtype=np.float64)


def _overlapping(grid: WedgeGrid, block: int, wanted: Array) -> IntArray:
    """Blocks that may have a say at colatitudes `wanted` over the columns of a block."""
    pad = float(np.diff(grid.theta_edges[:, [0, 1, -2, -1]], axis=1).max())
    kept = grid.theta_edges[:, 0] - pad <= wanted.max()
    kept &= grid.theta_edges[:, -1] + pad >= wanted.min()
    for edges in (grid.r_edges, grid.phi_edges):
        kept &= (edges[:, 0] < edges[block, -1]) & (edges[:, -1] > edges[block, 0])
    return np.flatnonzero(kept)


def _holding(middles: Array, edges: Array) -> IntArray:
    """Cells that hold each of the middles, -1 outside the edges."""
    inside = (middles >= edges[0]) & (middles < edges[-1])
    return np.where(inside, np.searchsorted(edges, middles, side="right") - 1, -1)
