"""Linear interpolation in theta across blocks of any level, one block at a time.

The interpolated value is a sum of hat functions, one for each cell middle. A block adds those of
its own cells; it needs to know where the next middles lie beyond its ends, but no values there.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array

from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.typing import Array

__all__ = ["theta_hats"]

_SAME_PLACE = 1e-9  # of the distance between two middles
_NONE = -1.0  # stands for "no neighbour": at a wall


def theta_hats(grid: WedgeGrid, block: int, theta: Array) -> list[tuple[Array, csr_array]]:
    """What the cells of one block add to values at colatitudes `theta`.

    Parameters
    ----------
    grid : WedgeGrid
    block : int
    theta : (m,) array
        Colatitudes, radians.

    Returns
    -------
    list of ((n_phi, n_r) bool array, (m, n_theta) sparse matrix)
        Columns of the block, and the weights of their rows; at least one weight is not zero.
        Summed over blocks the weights of each place within the wedge are 1. In the half cells at
        the walls the value is that of the cell.
    """
    span = grid.theta_edges[block]
    # No next middle lies farther off than the widest cell at an end of any block.
    pad = np.diff(grid.theta_edges[:, [0, 1]]).max(), np.diff(grid.theta_edges[:, [-2, -1]]).max()
    if theta.max() < span[0] - pad[1] or theta.min() > span[-1] + pad[0]:
        return []
    before, after = (_next_middles(grid, block, end) for end in (0, -1))
    ends = np.stack([before.ravel(), after.ravel()])
    # Edges of neighbours may differ by a rounding: those are one.
    _, first, which = np.unique(np.round(ends, 12), axis=1, return_index=True, return_inverse=True)
    which = which.reshape(before.shape)
    found = []
    for number, (low, high) in enumerate(ends[:, first].T):
        weights = _weights(centres(span), low, high, (span[0], span[-1]), theta)
        if weights.nnz:
            found.append((which == number, weights))
    return found


def _next_middles(grid: WedgeGrid, block: int, end: int) -> Array:
    """Colatitude of the next cell middle beyond one end of each column; -1 at a wall."""
    r, _, phi = grid.cell_centres(block)
    shape = (len(phi), len(r))
    edge = grid.theta_edges[block, end]
    if edge == grid.theta_range[end]:
        return np.full(shape, _NONE)
    # A shared edge belongs to the block of larger theta.
    place = np.nextafter(edge, 0.0) if end == 0 else edge
    at_r, at_phi = np.broadcast_to(r, shape), np.broadcast_to(phi[:, None], shape)
    beyond = grid.locate(at_r, np.full(shape, place), at_phi)
    cells = grid.theta_edges[beyond][..., -2:] if end == 0 else grid.theta_edges[beyond][..., :2]
    middles: Array = cells.mean(-1)
    return middles


def _weights(
    own: Array, before: float, after: float, span: tuple[float, float], theta: Array
) -> csr_array:
    has_before, has_after = bool(before != _NONE), bool(after != _NONE)
    nodes = np.concatenate([[before] * has_before, own, [after] * has_after])
    low = before if has_before else span[0]
    high = after if has_after else span[1]
    inside = (theta >= low) & (theta <= high)
    if len(nodes) == 1:
        return csr_array(inside[:, None].astype(np.float64))
    j = np.clip(np.searchsorted(nodes, theta, side="right") - 1, 0, len(nodes) - 2)
    share = np.clip((theta - nodes[j]) / (nodes[j + 1] - nodes[j]), 0.0, 1.0)
    share = np.where(share < _SAME_PLACE, 0.0, np.where(share > 1 - _SAME_PLACE, 1.0, share))
    row = np.tile(np.arange(len(theta)), 2)
    column = np.concatenate([j, j + 1]) - int(has_before)
    weight = np.concatenate([1 - share, share])
    kept = (weight > 0) & (column >= 0) & (column < len(own)) & np.tile(inside, 2)
    return csr_array((weight[kept], (row[kept], column[kept])), shape=(len(theta), len(own)))
