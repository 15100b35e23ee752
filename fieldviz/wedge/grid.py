"""The grid of a snapshot: blocks, levels, edges, and what follows from them exactly."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from fieldviz.errors import GridError
from fieldviz.wedge import geometry
from fieldviz.wedge.block_table import BlockTable, build_block_table, snap_outer_edges
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["WedgeGrid"]

_FULL_RING = 2.0 * np.pi
_ANGLE_TOLERANCE = 1e-5  # a few roundings of single precision at 2 pi


@dataclass(frozen=True, eq=False)
class WedgeGrid:
    """Blocks of one shape that tile a wedge (r, theta, phi).

    Parameters
    ----------
    r_edges : (n_blocks, n_r + 1) float64 array
        Radii, strictly increasing, >= 0; code length.
    theta_edges : (n_blocks, n_theta + 1) float64 array
        Colatitudes in radians, strictly increasing within [0, pi].
    phi_edges : (n_blocks, n_phi + 1) float64 array
        Azimuths in radians, strictly increasing, spanning at most 2 pi over all blocks.
    level : (n_blocks,) int array, optional
        Refinement level; worked out from the cell sizes where it is not given.
    edge_tolerance : float
        Outer edges of neighbours that differ by less than this share of a cell are one edge.

    Raises
    ------
    GridError
        If the edges are not finite, increasing and in range, or the blocks do not tile a wedge.
    """

    r_edges: Array
    theta_edges: Array
    phi_edges: Array
    level: IntArray | None = None
    edge_tolerance: float = field(default=1e-3, repr=False)

    def __post_init__(self) -> None:
        edges = {}
        for name in ("r", "theta", "phi"):
            edges[name] = _checked_edges(name, getattr(self, f"{name}_edges"))
        counts = {name: len(array) for name, array in edges.items()}
        if len(set(counts.values())) != 1:
            raise GridError(
                f"Cannot build the grid: expected the same number of blocks along every axis, "
                f"got {counts}; check the first axis of the edge arrays."
            )
        _check_ranges(edges)
        for name, array in edges.items():
            snapped = snap_outer_edges(array, self.edge_tolerance)
            if name == "phi":
                snapped = _close_full_ring(snapped)
            if name == "theta":
                snapped = np.clip(snapped, 0.0, np.pi)
            snapped.flags.writeable = False
            object.__setattr__(self, f"{name}_edges", snapped)
        # Built at once: overlapping or gappy blocks must not get as far as a number.
        object.__setattr__(
            self, "table", build_block_table(self.r_edges, self.theta_edges, self.phi_edges)
        )
        object.__setattr__(self, "level", self._checked_level())

    table: BlockTable = field(init=False, repr=False)

    def _checked_level(self) -> IntArray:
        if self.level is None:
            return self._level_of_cells()
        level = np.asarray(self.level)
        if level.shape != (self.n_blocks,) or not np.issubdtype(level.dtype, np.integer):
            raise GridError(
                f"Cannot build the grid: expected {self.n_blocks} whole-number levels, "
                f"got an array of shape {level.shape} and type {level.dtype}; "
                "leave them out and they are worked out."
            )
        return level.astype(np.int64)

    def _level_of_cells(self) -> IntArray:
        """Levels from cell widths, by halves of the widest, where the file does not say."""
        if self.table.block.size == self.n_blocks:
            # Every lattice cell is one block: stretched perhaps, but nowhere refined.
            return np.zeros(self.n_blocks, dtype=np.int64)
        # Steps in r and theta are often stretched, in azimuth seldom: it is asked first.
        for edges in (self.phi_edges, self.theta_edges):
            step = np.log2(np.diff(edges, axis=1).mean(axis=1))
            level = np.rint(step.max() - step).astype(np.int64)
            if level.any():
                break
        return level

    @property
    def n_blocks(self) -> int:
        """Number of blocks."""
        return len(self.r_edges)

    @property
    def block_shape(self) -> tuple[int, int, int]:
        """Cells of a block: (n_phi, n_theta, n_r)."""
        return (
            self.phi_edges.shape[1] - 1,
            self.theta_edges.shape[1] - 1,
            self.r_edges.shape[1] - 1,
        )

    @property
    def n_cells(self) -> int:
        """Number of cells in all blocks."""
        return self.n_blocks * int(np.prod(self.block_shape))

    @property
    def levels(self) -> list[int]:
        """The levels that occur, coarsest first."""
        assert self.level is not None
        return [int(value) for value in np.unique(self.level)]

    @cached_property
    def r_range(self) -> tuple[float, float]:
        """Inner and outer radius."""
        return float(self.r_edges.min()), float(self.r_edges.max())

    @cached_property
    def theta_range(self) -> tuple[float, float]:
        """Colatitude of the upper and of the lower boundary."""
        return float(self.theta_edges.min()), float(self.theta_edges.max())

    @cached_property
    def phi_range(self) -> tuple[float, float]:
        """First and last azimuth."""
        return float(self.phi_edges.min()), float(self.phi_edges.max())

    @property
    def period(self) -> float:
        """Azimuth after which the wedge repeats."""
        return self.phi_range[1] - self.phi_range[0]

    @property
    def is_full_ring(self) -> bool:
        """Whether the wedge is the whole ring."""
        return abs(self.period - _FULL_RING) < _ANGLE_TOLERANCE

    @property
    def repeats(self) -> int | None:
        """How often the wedge fits the ring, or None where that is not a whole number."""
        count = _FULL_RING / self.period
        return round(count) if abs(count - round(count)) < 1e-4 else None

    @property
    def azimuth_sentence(self) -> str:
        """What the azimuth covers, in words."""
        degrees = np.degrees(self.period)
        if self.is_full_ring:
            return "full ring"
        if self.repeats is None:
            return (
                f"wedge of {degrees:.4g} degrees; 360 degrees is not a whole multiple of it, so "
                "repeats cannot close the ring"
            )
        return f"wedge of {degrees:.4g} degrees, {self.repeats} of them make the ring"

    @property
    def wedge_volume(self) -> float:
        """Analytic volume of the whole wedge."""
        return geometry.wedge_volume(self.r_range, self.theta_range, self.period)

    def edges(self, block: int) -> tuple[Array, Array, Array]:
        """r, theta and phi edges of one block."""
        return self.r_edges[block], self.theta_edges[block], self.phi_edges[block]

    def cell_centres(self, block: int) -> tuple[Array, Array, Array]:
        """r, theta and phi of the cell middles of one block."""
        r, theta, phi = (geometry.centres(edges) for edges in self.edges(block))
        return r, theta, phi

    def volumes(self, block: int) -> Array:
        """Exact cell volumes of one block, (n_phi, n_theta, n_r)."""
        return geometry.cell_volumes(*self.edges(block))

    def area_r(self, block: int) -> Array:
        """Exact areas of one block's faces across r, (n_phi, n_theta, n_r + 1)."""
        return geometry.area_r(*self.edges(block))

    def area_theta(self, block: int) -> Array:
        """Exact areas of one block's faces across theta, (n_phi, n_theta + 1, n_r)."""
        return geometry.area_theta(*self.edges(block))

    def area_phi(self, block: int) -> Array:
        """Exact areas of one block's faces across phi, (n_phi + 1, n_theta, n_r)."""
        return geometry.area_phi(*self.edges(block))

    def wrap(self, phi: Array) -> Array:
        """Bring azimuths into the wedge by whole periods."""
        first = self.phi_range[0]
        return first + np.mod(phi - first, self.period)

    def locate(self, r: Array, theta: Array, phi: Array) -> IntArray:
        """Number of the block that covers each point, -1 outside; phi wraps.

        Parameters
        ----------
        r, theta, phi : arrays of one shape
            Points. A point on a shared edge belongs to the block of larger coordinate, one on
            the outer boundary to the block inside it. NaN is outside.

        Returns
        -------
        int array
        """
        table = self.table
        indices, inside = [], np.isfinite(phi)
        phi = np.where(inside, phi, table.phi[0])
        for lines, values in ((table.r, r), (table.theta, theta), (table.phi, self.wrap(phi))):
            index = np.searchsorted(lines, values, side="right") - 1
            index = np.where(values == lines[-1], len(lines) - 2, index)
            inside &= (values >= lines[0]) & (values <= lines[-1])
            indices.append(np.clip(index, 0, len(lines) - 2))
        return np.where(inside, table.block[indices[2], indices[1], indices[0]], -1)


def _checked_edges(name: str, edges: Array) -> Array:
    array = np.array(edges, dtype=np.float64, ndmin=2)
    if array.ndim != 2 or array.shape[1] < 2 or not len(array):
        raise GridError(
            f"Cannot build the grid: expected {name}_edges of shape (n_blocks, n + 1), "
            f"got shape {np.shape(edges)}; check how the edges were made."
        )
    bad = np.count_nonzero(~np.isfinite(array))
    if bad:
        raise GridError(
            f"Cannot build the grid: expected finite {name}_edges, got {bad} NaN or infinite "
            "values; the file's grid is damaged, mend it before anything else."
        )
    falling = np.argwhere(np.diff(array, axis=1) <= 0)
    if len(falling):
        block, i = (int(index) for index in falling[0])
        raise GridError(
            f"Cannot build the grid: expected {name}_edges that increase, got "
            f"{array[block, i]:.8g} then {array[block, i + 1]:.8g} in block {block}; sort them, "
            "or say in a layout description that the axis runs the other way."
        )
    return array


def _check_ranges(edges: dict[str, Array]) -> None:
    if edges["r"].min() < 0:
        raise GridError(
            f"Cannot build the grid: expected radii >= 0, got {edges['r'].min():.6g}; if the file "
            'stores ln r, say so in a layout description (transform = "ln").'
        )
    low, high = edges["theta"].min(), edges["theta"].max()
    if low < -_ANGLE_TOLERANCE or high > np.pi + _ANGLE_TOLERANCE:
        raise GridError(
            f"Cannot build the grid: expected colatitudes within 0 to pi radians, got {low:.6g} to "
            f"{high:.6g}; degrees or latitudes must be named in a layout description."
        )
    span = float(np.ptp(edges["phi"]))
    if span > _FULL_RING + _ANGLE_TOLERANCE:
        raise GridError(
            f"Cannot build the grid: expected azimuths that span at most 2 pi radians, got "
            f"{span:.6g}; degrees must be named in a layout description."
        )


def _close_full_ring(phi_edges: Array) -> Array:
    """Set the last azimuth so that a ring that is full but for rounding closes exactly."""
    first, last = phi_edges.min(), phi_edges.max()
    if abs(last - first - _FULL_RING) < _ANGLE_TOLERANCE:
        phi_edges[phi_edges == last] = first + _FULL_RING
    return phi_edges
