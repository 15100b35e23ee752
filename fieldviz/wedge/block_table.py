"""Which block covers which part of the wedge, found in a time that does not grow with blocks.

The outer edges of all blocks cut the wedge into a coarse lattice. Each lattice cell belongs to
exactly one block, or the blocks overlap or leave gaps. The lattice then locates points: three
binary searches, one look-up.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.errors import GridError
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["BlockTable", "build_block_table", "snap_outer_edges"]

_LARGEST_LATTICE = 200_000_000
_AXES = ("r", "theta", "phi")


@dataclass(frozen=True)
class BlockTable:
    """Lattice of block numbers.

    Attributes
    ----------
    r, theta, phi : (n + 1,) arrays
        Lattice lines.
    block : (n_phi, n_theta, n_r) int32 array
        Number of the block that covers each lattice cell.
    """

    r: Array
    theta: Array
    phi: Array
    block: IntArray


def snap_outer_edges(edges: Array, tolerance: float) -> Array:
    """Give touching blocks the very same outer edge.

    Files in single precision differ in the last digit of a shared edge, which would open gaps.

    Parameters
    ----------
    edges : (n_blocks, n + 1) array
        Edges of all blocks along one axis.
    tolerance : float
        Outer edges nearer to each other than this share of the smaller end cell are one line.

    Returns
    -------
    (n_blocks, n + 1) array
        A copy with the outer edges set to common values.
    """
    snapped = edges.copy()
    outer = np.concatenate([edges[:, 0], edges[:, -1]])
    widths = np.concatenate([edges[:, 1] - edges[:, 0], edges[:, -1] - edges[:, -2]])
    order = np.argsort(outer, kind="stable")
    values, widths = outer[order], widths[order]
    limit = tolerance * np.minimum(widths[1:], widths[:-1])
    starts = np.concatenate([[True], np.diff(values) > limit])
    line = np.cumsum(starts) - 1
    common = values[starts][line]
    result = np.empty_like(outer)
    result[order] = common
    n = len(edges)
    snapped[:, 0], snapped[:, -1] = result[:n], result[n:]
    return snapped


def build_block_table(r_edges: Array, theta_edges: Array, phi_edges: Array) -> BlockTable:
    """Build the lattice and check that the blocks tile one wedge.

    Parameters
    ----------
    r_edges, theta_edges, phi_edges : (n_blocks, n + 1) arrays
        Edges with snapped outer values (`snap_outer_edges`).

    Returns
    -------
    BlockTable

    Raises
    ------
    GridError
        If blocks overlap or leave gaps; the message names blocks or the place.
    """
    lines, starts, ends = [], [], []
    for edges in (r_edges, theta_edges, phi_edges):
        axis_lines = np.unique(edges[:, [0, -1]])
        lines.append(axis_lines)
        starts.append(np.searchsorted(axis_lines, edges[:, 0]))
        ends.append(np.searchsorted(axis_lines, edges[:, -1]))
    shape = tuple(len(axis) - 1 for axis in reversed(lines))
    if np.prod([float(n) for n in shape]) > _LARGEST_LATTICE:
        raise GridError(
            f"Cannot build the block table: expected blocks that share their outer edges, got "
            f"{shape} distinct lines (phi, theta, r); check that block edges are not jittered."
        )
    block = np.full(shape, -1, dtype=np.int32)
    for number in range(len(r_edges)):
        part = block[
            starts[2][number] : ends[2][number],
            starts[1][number] : ends[1][number],
            starts[0][number] : ends[0][number],
        ]
        if (part >= 0).any():
            other = int(part[part >= 0].flat[0])
            raise GridError(
                f"Cannot use these blocks: expected leaf blocks without overlap, got blocks "
                f"{other} and {number} covering the same place; keep only the finest block there."
            )
        part[...] = number
    _check_gaps(block, lines)
    return BlockTable(lines[0], lines[1], lines[2], block)


def _check_gaps(block: IntArray, lines: list[Array]) -> None:
    empty = np.argwhere(block < 0)
    if not len(empty):
        return
    k, j, i = empty[0]
    place = ", ".join(
        f"{name} {axis[n]:.6g} to {axis[n + 1]:.6g}"
        for name, axis, n in zip(_AXES, lines, (i, j, k), strict=True)
    )
    raise GridError(
        f"Cannot use these blocks: expected blocks that fill the wedge, got a gap at {place}; "
        "check that no block is missing and that edges of neighbours agree."
    )
