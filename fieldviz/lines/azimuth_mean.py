"""The azimuthal mean of a snapshot: one azimuth cell, on the finest edges in r and theta."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fieldviz.derived.azimuth_sums import meridional_mesh
from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["azimuth_mean"]

_SAME_PLACE = 1e-6  # of a cell: a centre this near a known one takes its value alone
_MEANT = ("density", "pressure", *VELOCITY, *MAGNETIC)


def azimuth_mean(
    snapshot: Snapshot, names: Sequence[str] | None = None, *, mass_weighted: bool = True
) -> Snapshot:
    """Average cell fields over azimuth.

    Parameters
    ----------
    snapshot : Snapshot
        Any blocks and levels.
    names : sequence of str, optional
        Cell fields; by default density, pressure, velocity and magnetic field, as far as they are
        there.
    mass_weighted : bool
        Velocities are <rho v>/<rho>, so that density times velocity is the mean mass flux; needs
        `density`. Otherwise they are plain means over volume, as all other fields are.

    Returns
    -------
    Snapshot
        One block with one azimuth cell as wide as the wedge; its edges in r and theta are all
        edges of all blocks. Cell values only, in double precision. A cell without a number makes
        the mean at its r and theta NaN.

    Raises
    ------
    MissingFieldError, FieldvizError
        Also where no fields are left to average.

    Notes
    -----
    Each block is averaged on its own cells. Where they are coarser than the common edges, the mean
    is linear in r and theta between them and their ghosts: second order across level jumps, and
    the cells' own values to the bit where the edges agree.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.lines.azimuth_mean import azimuth_mean
    >>> azimuth_mean(fv.demo_disc(shape=(4, 32, 24))).grid.block_shape
    (1, 32, 24)
    """
    wanted = list(dict.fromkeys(n for n in _MEANT if snapshot.has(n)) if names is None else names)
    snapshot.require("average over azimuth", *wanted)
    if not wanted:
        raise FieldvizError(
            "Cannot average over azimuth: expected at least one field, got none; name cell fields "
            "of the snapshot."
        )
    grid = snapshot.grid
    mesh = meridional_mesh(grid)
    r_edges, theta_edges = mesh.r_edges, mesh.theta_edges
    by_mass = [name for name in wanted if mass_weighted and name in VELOCITY]
    if by_mass:
        snapshot.require("weight velocities with mass", "density")
    density = _mean(snapshot, ("density",), r_edges, theta_edges) if by_mass else None
    cells = {}
    for name in wanted:
        if name not in by_mass:
            mean = _mean(snapshot, (name,), r_edges, theta_edges)
        else:
            flux = _mean(snapshot, (name, "density"), r_edges, theta_edges)
            with np.errstate(divide="ignore", invalid="ignore"):
                mean = flux / density
        cells[name] = mean[None]
    return Snapshot.from_arrays(
        r_edges,
        theta_edges,
        np.array(grid.phi_range),
        cells=cells,
        time=snapshot.time,
        mu0=snapshot.mu0,
        gm=snapshot.gm,
        gamma=snapshot.gamma,
        title=snapshot.title,
        units=snapshot.units,
        source=snapshot.source,
    )


def _mean(
    snapshot: Snapshot, factors: tuple[str, ...], r_edges: Array, theta_edges: Array
) -> Array:
    """Mean over phi of a product of fields on the common cells, (n_theta, n_r)."""
    grid = snapshot.grid
    around = halo_grid(grid)
    haloed = [halo(snapshot, name) for name in factors]
    r, theta = centres(r_edges), centres(theta_edges)
    total = np.zeros((len(theta), len(r)))
    for block in range(grid.n_blocks):
        product = np.ones(1)
        for values in haloed:
            product = product * values[block, 1:-1].astype(np.float64)
        per_azimuth = np.diff(grid.phi_edges[block])
        # Summed along phi in order: einsum would choose its own.
        ring = (product * per_azimuth[:, None, None]).sum(0) / grid.period
        rows, columns = _covered(grid, block, r, theta)
        along_theta = _between(ring, around.theta[block], theta[rows])
        total[rows, columns] += _between(along_theta.T, around.r[block], r[columns]).T
    return total


def _covered(grid: WedgeGrid, block: int, r: Array, theta: Array) -> tuple[slice, slice]:
    """Common cells within one block: slices of theta and of r."""
    spans = []
    for middles, edges in ((theta, grid.theta_edges[block]), (r, grid.r_edges[block])):
        first, last = np.searchsorted(middles, [edges[0], edges[-1]])
        spans.append(slice(int(first), int(last)))
    return spans[0], spans[1]


def _between(values: Array, known: Array, wanted: Array) -> Array:
    """Linear interpolation along the first axis; a centre met takes no part of its neighbour."""
    low: IntArray = np.clip(np.searchsorted(known, wanted) - 1, 0, len(known) - 2)
    share = (wanted - known[low]) / (known[low + 1] - known[low])
    high = np.where(share > _SAME_PLACE, low + 1, low)
    low = np.where(share < 1 - _SAME_PLACE, low, low + 1)
    share = share[:, None]
    return np.where(
        (low == high)[:, None], values[low], (1 - share) * values[low] + share * values[high]
    )
