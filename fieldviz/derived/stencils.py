"""Three-point derivatives on the blocks of a grid: weights, neighbours, walls and level jumps."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from weakref import WeakKeyDictionary

import numpy as np

from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_grid
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["AxisStencil", "Stencils", "stencils"]

_VANISHES = 1e-12  # sin(pi) is 1e-16 in floating point
_ALIGNED = 1e-3  # of a cell: edges of neighbours in single precision differ by less


@dataclass(frozen=True, eq=False)
class AxisStencil:
    """Derivatives along one axis at cell centres, from three cells each.

    Attributes
    ----------
    start : (n_blocks, n) int array
        First of the three cells; -1 is the ghost cell below, n the one above.
    positions : (n_blocks, 3, n) array
        Their centres, in the axis's own unit.
    weights : (n_blocks, 3, n) array
        Of the parabola's slope; zero for cells past a wall.
    one_sided : (n_blocks, n) bool array
        Where a wall allows cells on one side only.
    walls : (n_blocks, 2) array
        Where the wall below and above is; NaN without one.
    """

    start: IntArray
    positions: Array
    weights: Array
    one_sided: Array
    walls: Array

    def of_product(self, metric: Callable[[Array], Array]) -> Array:
        """Weights of d(metric f)/dx for f, (n_blocks, 3, n).

        Where the metric vanishes at a wall, as sin(theta) on the axis, so does the product: the
        wall itself is then the third point, beside the own cell and the one inside it.
        """
        weights = self.weights * metric(self.positions)
        n = weights.shape[2]
        for side, cell, inside in ((0, 0, 1), (1, n - 1, n - 2)):
            wall = self.walls[:, side]
            zero = np.abs(metric(np.where(np.isnan(wall), 1.0, wall))) < _VANISHES
            for block in np.flatnonzero(zero & (n > 2)):
                place = {
                    i: self.positions[block, i - self.start[block, cell], cell]
                    for i in (cell, inside)
                }
                own, other, end = place[cell], place[inside], wall[block]
                slopes = {
                    cell: 1 / (own - other) + 1 / (own - end),
                    inside: (own - end) / ((other - own) * (other - end)),
                }
                weights[block, :, cell] = 0.0
                for i in (cell, inside):
                    weights[block, i - self.start[block, cell], cell] = slopes[i] * metric(place[i])
        return weights


@dataclass(frozen=True, eq=False)
class Stencils:
    """All that derivatives on one grid need.

    Attributes
    ----------
    r, theta, phi : AxisStencil
    neighbour : (n_blocks, 3, 2) int array
        Block of the same level across each side (axes r, theta, phi; low, high), -1 for none.
    beyond : (n_blocks, 3, 2, 2) int array
        Block and index along the axis where the cells across each side are kept. At a level jump
        that is an extra block: one for as many sides as it has cells along the axis.
    n_extra : int
        How many extra blocks there are.
    sides : (n, 3) int array
        Block, axis and side of every level jump.
    """

    r: AxisStencil
    theta: AxisStencil
    phi: AxisStencil
    neighbour: IntArray
    beyond: IntArray
    n_extra: int
    sides: IntArray

    def with_ghosts(self, grid: WedgeGrid, values: Array) -> Array:
        """Cell values, and in extra blocks the ghost cells at level jumps.

        Without level jumps they are the values themselves, not copied.
        """
        from fieldviz.derived._kernels import fill_layers

        if not self.n_extra:
            return np.ascontiguousarray(values)
        extended = np.zeros((len(values) + self.n_extra, *values.shape[1:]), values.dtype)
        extended[: len(values)] = values
        around, table = halo_grid(grid), grid.table
        fill_layers(
            self.sides, extended, self.beyond, self.neighbour, around.r, around.theta, around.phi,
            (table.r, table.theta, table.phi), table.block,
        )  # fmt: skip
        return extended


_known: WeakKeyDictionary[WedgeGrid, Stencils] = WeakKeyDictionary()


def stencils(grid: WedgeGrid) -> Stencils:
    """Stencils of a grid; worked out once.

    Parameters
    ----------
    grid : WedgeGrid

    Returns
    -------
    Stencils

    Notes
    -----
    A derivative is the slope of the parabola through three cell centres, the middle one its own;
    at a wall the own cell and the two inside it. Both are second order on any smooth spacing.
    Weights depend on nothing but these centres, so cutting a grid into blocks of three or more
    cells changes none. Slopes along different axes commute.
    """
    if grid not in _known:
        _known[grid] = _make_stencils(grid)
    return _known[grid]


def _make_stencils(grid: WedgeGrid) -> Stencils:
    edges = (grid.r_edges, grid.theta_edges, grid.phi_edges)
    ranges = (grid.r_range, grid.theta_range, None)
    neighbour = _same_level_neighbours(grid)
    wall = np.zeros(neighbour.shape, dtype=bool)
    for axis in range(2):
        for side in range(2):
            wall[:, axis, side] = edges[axis][:, -side] == ranges[axis][side]  # type: ignore[index]
    sides = np.argwhere((neighbour < 0) & ~wall)
    beyond, n_extra = _cells_beyond(grid, neighbour, sides)
    around = halo_grid(grid)
    r, theta, phi = (
        _axis_stencil(centres, edges[axis], wall[:, axis])
        for axis, centres in enumerate((around.r, around.theta, around.phi))
    )
    if edges[2].shape[1] == 2 and grid.period == edges[2][0, 1] - edges[2][0, 0]:
        phi.weights[:] = 0.0  # A single azimuth cell: derivatives along phi are zero.
    return Stencils(r, theta, phi, neighbour, beyond, n_extra, sides)


def _cells_beyond(grid: WedgeGrid, neighbour: IntArray, sides: IntArray) -> tuple[IntArray, int]:
    """`Stencils.beyond` and the number of extra blocks."""
    last = np.array(grid.block_shape[::-1]) - 1
    own = np.arange(grid.n_blocks)[:, None, None]
    low = np.arange(2) == 0
    beyond = np.empty((*neighbour.shape, 2), dtype=np.int64)
    beyond[..., 0] = np.where(neighbour >= 0, neighbour, own)
    # The neighbour's nearest cells; at a wall the own last ones.
    beyond[..., 1] = np.where((neighbour >= 0) == low, last[:, None], 0)
    n_extra = 0
    for axis in range(3):
        chosen = sides[sides[:, 1] == axis].T
        number = np.arange(chosen.shape[1])
        beyond[tuple(chosen)] = np.column_stack(
            [grid.n_blocks + n_extra + number // (last[axis] + 1), number % (last[axis] + 1)]
        )
        n_extra += -(-len(number) // (int(last[axis]) + 1))
    return beyond, n_extra


def _axis_stencil(centres: Array, edges: Array, wall: Array) -> AxisStencil:
    """Stencil from haloed centres (n_blocks, n + 2), edges, and walls (n_blocks, 2 sides)."""
    n_blocks, n = centres.shape[0], centres.shape[1] - 2
    own = np.broadcast_to(np.arange(n), (n_blocks, n))
    lowest, highest = np.where(wall[:, :1], 0, -1), np.where(wall[:, 1:], n - 1, n)
    start = np.clip(np.clip(own - 1, lowest, np.maximum(highest - 2, lowest)), -1, n - 2)
    cells = start[:, None, :] + np.arange(3)[:, None]
    there = (cells >= lowest[:, None]) & (cells <= highest[:, None])
    positions = np.take_along_axis(centres[:, None], cells + 1, axis=2)
    weights = _slopes(positions, there, centres[:, 1:-1])
    one_sided = np.zeros((n_blocks, n), dtype=bool)
    one_sided[:, 0] |= wall[:, 0]
    one_sided[:, -1] |= wall[:, 1]
    walls = np.where(wall, edges[:, [0, -1]], np.nan)
    return AxisStencil(start, positions, weights, one_sided, walls)


def _slopes(positions: Array, there: Array, place: Array) -> Array:
    """Weights of the slope at `place` of the polynomial through the positions that are there."""
    weights = np.zeros(positions.shape)
    for a in range(3):
        others = [n for n in range(3) if n != a]
        for left, factor in (others, others[::-1]):
            # The derivative of (x - x_left) times the other factor of Lagrange's polynomial.
            term = 1.0 / np.where(there[:, left], positions[:, a] - positions[:, left], np.inf)
            gap = positions[:, a] - positions[:, factor]
            term *= np.where(there[:, factor], (place - positions[:, factor]) / gap, 1.0)
            weights[:, a] += term
    return np.where(there, weights, 0.0)


def _same_level_neighbours(grid: WedgeGrid) -> IntArray:
    """Blocks of the same level and extent across each side, (n_blocks, 3, 2); -1 for none."""
    assert grid.level is not None
    edges = (grid.r_edges, grid.theta_edges, grid.phi_edges)
    lines = (grid.table.r, grid.table.theta, grid.table.phi)
    ends = [
        np.searchsorted(line, array[:, [0, -1]]) for line, array in zip(lines, edges, strict=True)
    ]
    ends[2][:, 1] %= len(lines[2]) - 1  # The azimuth's seam is one line.
    found = np.full((grid.n_blocks, 3, 2), -1, dtype=np.int64)
    for axis in range(3):
        others = [n for n in range(3) if n != axis]
        # What two neighbours share: level, extents across the axis, and the line between them.
        shared = np.column_stack([grid.level, *(ends[n] for n in others)])
        low, high = (
            [tuple(row) for row in np.column_stack([shared, ends[axis][:, side]]).tolist()]
            for side in (0, 1)
        )
        for side, mine, theirs in ((0, low, high), (1, high, low)):
            block_of = {key: block for block, key in enumerate(theirs)}
            for block, key in enumerate(mine):
                other = block_of.get(key, -1)
                if other >= 0 and all(_aligned(edges[n], block, other) for n in others):
                    found[block, axis, side] = other
    return found


def _aligned(edges: Array, block: int, other: int) -> bool:
    width = np.diff(edges[block]).min()
    return bool(np.abs(edges[block] - edges[other]).max() <= _ALIGNED * width)
