"""Energies of the even and odd parts of full fields, cell by cell, one block at a time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.symmetry.mean_tables import MeanTables
from fieldviz.symmetry.mirror import MIRROR_SIGNS, MirrorPiece, mirror_pieces, with_less
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray
from fieldviz.wind.chunks import by_chunks

__all__ = ["full_energies"]

_MIDPLANE = 0.5 * np.pi
_ON_MIDPLANE = 1e-9
_LOGARITHM = "density"  # is compared as ln(rho/even mean)


def full_energies(
    snapshot: Snapshot, tables: MeanTables, weights: Array, even_mean: Array
) -> dict[str, Array]:
    """E+ and E- of every quantity, (2, n_bands) each.

    Parameters
    ----------
    snapshot : Snapshot
    tables : MeanTables
    weights : (n_theta, n_r) array
        Of the cells of the mesh.
    even_mean : (n_theta, n_r) array
        What is taken off ln(rho).

    Returns
    -------
    dict of name to array
    """
    full = {name: np.zeros((2, tables.n_bands)) for name in tables.formulas}
    for block in range(snapshot.grid.n_blocks):
        its = _weighted(snapshot, tables, block, weights, even_mean)
        if not its.rows.size:
            continue
        pieces = list(mirror_pieces(snapshot.grid, block, its.rows))
        for name in full:
            full[name] += _block_energies(snapshot, tables, block, name, its, pieces)
    return full


@dataclass(frozen=True, eq=False)
class _Weighted:
    """How the cells of a block count: arguments of `_kernels.add_energies`."""

    rows: IntArray
    turns: Array
    weights: Array
    base: Array
    band: IntArray


def _weighted(
    snapshot: Snapshot, tables: MeanTables, block: int, weights: Array, even_mean: Array
) -> _Weighted:
    """Weights of the cells of one block.

    On a mesh that mirrors onto itself those below the midplane would give the same once more: the
    upper ones count twice.
    """
    _, theta, _ = snapshot.grid.cell_centres(block)
    rows_on_mesh, columns_on_mesh, place = tables.mesh.block_cells(block)
    per_cell = np.zeros(snapshot.grid.block_shape[1:])
    np.add.at(per_cell, np.ix_(rows_on_mesh, columns_on_mesh), weights[place])
    if _mirrors_onto_itself(tables.mesh.theta_edges):
        height = _MIDPLANE - theta
        per_cell *= np.where(height > _ON_MIDPLANE, 2.0, 1.0 * (height > -_ON_MIDPLANE))[:, None]
    rows, columns = np.flatnonzero(per_cell.any(1)), _firsts(columns_on_mesh)
    return _Weighted(
        rows,
        np.diff(snapshot.grid.phi_edges[block]) / snapshot.grid.period,
        per_cell[rows],
        np.ascontiguousarray(even_mean[place][_firsts(rows_on_mesh)[rows]][:, columns]),
        tables.band[place[1]][columns],
    )


def _block_energies(
    snapshot: Snapshot,
    tables: MeanTables,
    block: int,
    name: str,
    its: _Weighted,
    pieces: list[MirrorPiece],
) -> Array:
    """E+ and E- of one quantity in one block, (2, n_bands)."""
    from fieldviz.symmetry._kernels import add_energies, add_mirrored

    sources = {
        number: with_less(tables.formulas[name](snapshot, number))
        for number in {block, *(piece.block for piece in pieces)}
    }
    log = name == _LOGARITHM
    base = its.base if log else np.zeros_like(its.base)
    n_phi, _, n_r = snapshot.grid.block_shape
    energies = np.zeros((n_phi, 2, tables.n_bands))

    def work(start: int, stop: int) -> int:
        mirrored = np.zeros((stop - start, len(its.rows), n_r))
        for piece in pieces:
            add_mirrored(mirrored, start, *sources[piece.block], log, *piece.arrays)
        add_energies(
            mirrored, start, *sources[block], log, its.rows, its.turns, its.weights, base,
            float(MIRROR_SIGNS[name]), its.band, energies,
        )  # fmt: skip
        return 0

    by_chunks(n_phi, n_phi * len(its.rows) * n_r, work)
    return np.asarray(energies.sum(0))


def _mirrors_onto_itself(theta_edges: Array) -> bool:
    away = np.abs(theta_edges + theta_edges[::-1] - np.pi)
    return bool(away.max() < _ON_MIDPLANE)


def _firsts(cells: IntArray) -> IntArray:
    """First place on the mesh of each cell of a block."""
    return np.flatnonzero(np.diff(cells, prepend=-1))
