"""Means along azimuth on one mesh of second order, also where levels differ along azimuth."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.geometry import cell_volumes, centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["RingTotals", "ring_means"]

_UNIT = np.array([0.0, 1.0])


def ring_means(
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    names: Sequence[str],
    values: Callable[[int], tuple[Array, Sequence[Array]]],
    *,
    smooth: bool | Sequence[str] = True,
) -> tuple[dict[str, Array], tuple[str, ...]]:
    """Go once over the blocks and average along azimuth.

    Parameters
    ----------
    snapshot : Snapshot
    mesh : MeridionalMesh
        Of the snapshot's grid.
    names : sequence of str
        Of the quantities.
    values : function of the block
        Gives which cells may be used, and an array for each name; all (n_phi, n_theta, n_r).
    smooth : bool or sequence of str
        Names that are made linear within coarse cells; the others stay constant there.

    Returns
    -------
    dict of str to (n_theta, n_r) array
        NaN where no cell of the ring was used.
    tuple of str
        What was left out.

    Notes
    -----
    A cell in which any of the quantities is not finite is left out of all of them and counted. The
    mean of a block that is coarser than the mesh is made linear within its cells, with slopes from
    the block itself, before blocks are joined: `azimuth_moments` would take it as constant there,
    which is of first order where blocks of different levels share a ring.
    """
    totals = RingTotals(snapshot, mesh, names, smooth)
    for block in range(snapshot.grid.n_blocks):
        good, arrays = values(block)
        for array in arrays:
            good = good & np.isfinite(array)
        azimuth = good * np.diff(snapshot.grid.phi_edges[block])[:, None, None]
        sums = [(azimuth * np.where(good, array, 0.0)).sum(0) for array in arrays]
        left_out = int(np.count_nonzero(~good))
        totals.add(block, azimuth.sum(0), np.array(sums), left_out)
    return totals.means(), totals.notes


class RingTotals:
    """Sums along azimuth of some quantities on the mesh, grown block by block.

    Parameters
    ----------
    snapshot, mesh, names, smooth
        As of `ring_means`.
    """

    def __init__(
        self,
        snapshot: Snapshot,
        mesh: MeridionalMesh,
        names: Sequence[str],
        smooth: bool | Sequence[str] = True,
    ) -> None:
        self._snapshot, self._mesh, self._names = snapshot, mesh, tuple(names)
        smoothed = names if smooth is True else (smooth or ())
        self._smooth = np.array([name in smoothed for name in names], dtype=bool)
        shape = (len(mesh.theta), len(mesh.r))
        self._weight, self._totals = np.zeros(shape), np.zeros((len(names), *shape))
        self._count, self._lost = 0, 0.0

    def add(self, block: int, covered: Array, sums: Array, left_out: int) -> None:
        """Take in one block.

        Parameters
        ----------
        block : int
        covered : (n_theta, n_r) array
            Azimuth of the cells that were used, radians.
        sums : (n_names, n_theta, n_r) array
            Values times widths in azimuth of the same cells; overwritten.
        left_out : int
            Cells that were not used.
        """
        grid = self._snapshot.grid
        if left_out:
            self._count += left_out
            turn = np.ptp(grid.phi_edges[block])
            volumes = cell_volumes(*grid.edges(block)[:2], _UNIT)[0]
            self._lost += float(np.sum((turn - covered) * volumes))
        mean = np.divide(sums, covered, out=sums, where=covered > 0)
        rows, columns, place = self._mesh.block_cells(block)
        share, fine = covered, mean
        if len(rows) > mean.shape[1] or len(columns) > mean.shape[2]:
            share = covered[np.ix_(rows, columns)]
            fine = mean[:, rows][:, :, columns]
            if self._smooth.any():
                mean[:, ~(covered > 0)] = np.nan
                fine[self._smooth] += self._within_cells(mean[self._smooth], block)
        self._weight[place] += share
        np.multiply(share, fine, out=fine)
        if not np.all(share > 0):
            fine[:, ~(share > 0)] = 0.0
        self._totals[:, place[0], place[1]] += fine

    def _within_cells(self, mean: Array, block: int) -> Array | float:
        """Linear part within coarse cells of a block's ring means, on the places it covers."""
        rows, columns, place = self._mesh.block_cells(block)
        linear: Array | float = 0.0
        grid, mesh = self._snapshot.grid, self._mesh
        edges = (grid.theta_edges[block], grid.r_edges[block])
        wanted = (mesh.theta[place[0]], mesh.r[place[1]])
        for axis, cells in enumerate((rows, columns)):
            middles = centres(edges[axis])
            if len(cells) == len(middles) or len(middles) < 2:
                continue
            slope = np.nan_to_num(np.gradient(mean, middles, axis=axis + 1))
            offset = wanted[axis] - middles[cells]
            linear = linear + slope[:, rows][:, :, columns] * (
                offset[:, None] if axis == 0 else offset
            )
        return linear

    def means(self) -> dict[str, Array]:
        """Mean of each quantity, (n_theta, n_r); NaN where no cell of the ring was used."""
        with np.errstate(invalid="ignore"):
            found = self._totals / self._weight  # 0/0 where nothing was used
        return dict(zip(self._names, found, strict=True))

    @property
    def notes(self) -> tuple[str, ...]:
        """What was left out."""
        return _notes(self._count, self._lost / self._snapshot.grid.wedge_volume)


def _notes(count: int, share: float) -> tuple[str, ...]:
    if not count:
        return ()
    flag = "; this is more than 10 %: do not rely on it" if share > 0.1 else ""
    return (
        f"{count} cells ({100 * share:.3g} % of the volume) with NaN, infinite values or no "
        f"positive density were left out{flag}",
    )
