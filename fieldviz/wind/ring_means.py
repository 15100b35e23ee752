"""Means along azimuth on one mesh of second order, also where levels differ along azimuth."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["ring_means"]


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
    shape = (len(mesh.theta), len(mesh.r))
    weight, totals = np.zeros(shape), {name: np.zeros(shape) for name in names}
    count, lost = 0, 0.0
    for block in range(snapshot.grid.n_blocks):
        good, arrays = values(block)
        for array in arrays:
            good = good & np.isfinite(array)
        if not good.all():
            count += int(np.count_nonzero(~good))
            lost += float(np.sum(snapshot.grid.volumes(block), where=~good))
        azimuth = good * np.diff(snapshot.grid.phi_edges[block])[:, None, None]
        covered = azimuth.sum(0)
        rows, columns, place = mesh.block_cells(block)
        share = covered[np.ix_(rows, columns)]
        weight[place] += share
        for name, array in zip(names, arrays, strict=True):
            sums = (azimuth * np.where(good, array, 0.0)).sum(0)
            mean = np.divide(sums, covered, out=np.full_like(sums, np.nan), where=covered > 0)
            fine = mean[np.ix_(rows, columns)]
            if smooth is True or (smooth is not False and name in smooth):
                fine = fine + _within_cells(mean, snapshot, mesh, block)
            totals[name][place] += np.where(share > 0, share * fine, 0.0)
    means = {
        name: np.divide(total, weight, out=np.full(shape, np.nan), where=weight > 0)
        for name, total in totals.items()
    }
    return means, _notes(count, lost / snapshot.grid.wedge_volume)


def _within_cells(
    mean: Array, snapshot: Snapshot, mesh: MeridionalMesh, block: int
) -> Array | float:
    """Linear part within coarse cells of a block's ring mean, on the places it covers."""
    rows, columns, place = mesh.block_cells(block)
    linear: Array | float = 0.0
    edges = (snapshot.grid.theta_edges[block], snapshot.grid.r_edges[block])
    wanted = (mesh.theta[place[0]], mesh.r[place[1]])
    for axis, cells in enumerate((rows, columns)):
        middles = centres(edges[axis])
        if len(cells) == len(middles) or len(middles) < 2:
            continue
        slope = np.nan_to_num(np.gradient(mean, middles, axis=axis))[np.ix_(rows, columns)]
        offset = wanted[axis] - middles[cells]
        linear = linear + slope * (offset[:, None] if axis == 0 else offset)
    return linear


def _notes(count: int, share: float) -> tuple[str, ...]:
    if not count:
        return ()
    flag = "; this is more than 10 %: do not rely on it" if share > 0.1 else ""
    return (
        f"{count} cells ({100 * share:.3g} % of the volume) with NaN, infinite values or no "
        f"positive density were left out{flag}",
    )
