"""Means and covariances along azimuth on one (theta, r) mesh, joined from blocks of any level."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from fieldviz.derived.azimuth_blocks import (
    Formula,
    Pair,
    Request,
    RunningMoments,
    block_moments,
    over_kepler,
)
from fieldviz.derived.shared import is_shared, once
from fieldviz.errors import FieldvizError
from fieldviz.wedge.block_table import snap_outer_edges
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.geometry import annulus_widths, cell_volumes, centres, cosine_steps
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "AzimuthMoments",
    "MeridionalMesh",
    "azimuth_cells",
    "azimuth_moments",
    "meridional_mesh",
]

MIDPLANE = 0.5 * np.pi
FLOOR_MARGIN = 1.01  # a cell within one percent of the floor counts as being at it

OVER_KEPLER = "over_kepler"
_NAME = "usual azimuth moments"
_UNIT = np.array([0.0, 1.0])
_BUILT_IN: Mapping[str, Formula] = {OVER_KEPLER: over_kepler}


@dataclass(frozen=True, eq=False)
class MeridionalMesh:
    """The finest edges in r and theta of all blocks, over the whole wedge.

    Attributes
    ----------
    r_edges : (n_r + 1,) array
    theta_edges : (n_theta + 1,) array
    period : float
        Azimuth of the wedge, radians.
    row_start, row_stop : (n_theta, n_r) int arrays
        First row, and the row after the last one, of the finest cell that covers each place:
        values are constant across a coarse cell, so positions are those of the cell's own middle.
    columns : (n,) int array
        Columns at which a cell begins in a block at the midplane: profiles use these cells.
    """

    r_edges: Array
    theta_edges: Array
    period: float
    row_start: IntArray
    row_stop: IntArray
    columns: IntArray
    _places: tuple[IntArray, IntArray] = field(repr=False)

    @property
    def r(self) -> Array:
        """Middles of the columns, (n_r,)."""
        return centres(self.r_edges)

    @property
    def theta(self) -> Array:
        """Middles of the rows, (n_theta,)."""
        return centres(self.theta_edges)

    @property
    def volumes(self) -> Array:
        """Exact volumes over the whole azimuth, (n_theta, n_r)."""
        turn = np.array([0.0, self.period])
        volumes: Array = cell_volumes(self.r_edges, self.theta_edges, turn)[0]
        return volumes

    @property
    def profile_edges(self) -> Array:
        """Radial edges of the cells at the midplane, (n + 1,)."""
        return np.append(self.r_edges[self.columns], self.r_edges[-1])

    @property
    def holds_midplane(self) -> bool:
        """Whether theta = pi/2 lies within the wedge."""
        return bool(self.theta_edges[0] < MIDPLANE < self.theta_edges[-1])

    def summed(self, table: Array) -> Array:
        """Sum the columns (last axis) that share a cell at the midplane."""
        return np.add.reduceat(table, self.columns, axis=-1)

    def averaged(self, per_column: Array) -> Array:
        """Area-weighted mean over the columns that share a cell at the midplane."""
        area = annulus_widths(self.r_edges)
        return self.summed(per_column * area) / self.summed(area)

    def spread(self, profile: Array) -> Array:
        """Give each column the value of its cell at the midplane, (n_r,)."""
        return np.repeat(profile, np.diff(np.append(self.columns, len(self.r_edges) - 1)))

    def column(self, table: Array, i: int) -> tuple[Array, Array]:
        """Middles in theta and values of the distinct cells of one column."""
        rows = np.unique(self.row_start[:, i])
        edges = self.theta_edges
        return 0.5 * (edges[rows] + edges[self.row_stop[rows, i]]), table[rows, i]

    def at_theta(self, table: Array, theta: Array | float) -> Array:
        """Values on a surface theta(r) by linear interpolation between cell middles.

        Parameters
        ----------
        table : (n_theta, n_r) array
        theta : float or (n_r,) array

        Returns
        -------
        (n_r,) array
            NaN outside the wedge; the outermost half cells take the value of their cell.
        """
        wanted = np.broadcast_to(np.asarray(theta, dtype=np.float64), len(self.r_edges) - 1)
        if self.is_even and np.ndim(theta) == 0:
            found = _between_rows(self.theta, table, float(theta))
        else:
            found = np.array([np.interp(t, *self.column(table, i)) for i, t in enumerate(wanted)])
        inside = (wanted >= self.theta_edges[0]) & (wanted <= self.theta_edges[-1])
        return np.where(inside, found, np.nan)

    @cached_property
    def is_even(self) -> bool:
        """Whether every cell is one row high: no block is coarser in theta than another."""
        return bool(np.all(self.row_stop - self.row_start == 1))

    def at_midplane(self, table: Array) -> Array:
        """Profile of a table at theta = pi/2, on the cells at the midplane."""
        return self.averaged(self.at_theta(table, MIDPLANE))

    def band_share(self, angle: Array | float) -> Array:
        """Share of each cell's volume within |theta - pi/2| < angle(r), (n_theta, n_r)."""
        half = np.clip(np.broadcast_to(angle, len(self.r_edges) - 1), 0.0, MIDPLANE)
        cosine = np.cos(self.theta_edges)[:, None]
        within = np.clip(cosine, -np.sin(half), np.sin(half))
        share = -np.diff(within, axis=0) / cosine_steps(self.theta_edges)[:, None]
        return np.clip(share, 0.0, 1.0)

    def block_cells(self, block: int) -> tuple[IntArray, IntArray, tuple[slice, slice]]:
        """Cell of the block for each row and column it covers, and which rows and columns."""
        rows, columns = self._places[0][block], self._places[1][block]
        return (
            np.repeat(np.arange(len(rows) - 1), np.diff(rows)),
            np.repeat(np.arange(len(columns) - 1), np.diff(columns)),
            (slice(rows[0], rows[-1]), slice(columns[0], columns[-1])),
        )


def meridional_mesh(grid: WedgeGrid) -> MeridionalMesh:
    """Find the finest common edges in r and theta; edges that differ by rounding are one."""
    theta_edges, rows = _common_edges(grid.theta_edges, grid.edge_tolerance)
    r_edges, columns = _common_edges(grid.r_edges, grid.edge_tolerance)
    shape = (len(theta_edges) - 1, len(r_edges) - 1)
    start, stop = np.zeros(shape, dtype=np.int64), np.full(shape, shape[0], dtype=np.int64)
    at_midplane = (grid.theta_edges[:, 0] <= MIDPLANE) & (grid.theta_edges[:, -1] >= MIDPLANE)
    begins = np.zeros(shape[1], dtype=bool)
    begins[0] = True
    for block in range(grid.n_blocks):
        place = (slice(rows[block, 0], rows[block, -1]), slice(*columns[block, [0, -1]]))
        repeats = np.diff(rows[block])
        start[place] = np.maximum(start[place], np.repeat(rows[block, :-1], repeats)[:, None])
        stop[place] = np.minimum(stop[place], np.repeat(rows[block, 1:], repeats)[:, None])
        if at_midplane[block] or not at_midplane.any():
            begins[columns[block, :-1]] = True
    return MeridionalMesh(
        r_edges,
        theta_edges,
        grid.period,
        start,
        stop,
        np.flatnonzero(begins),
        (rows, columns),
    )


def _between_rows(theta: Array, table: Array, wanted: float) -> Array:
    """Linear between two rows of a table, for all columns."""
    j = int(np.clip(np.searchsorted(theta, wanted, side="right") - 1, 0, max(len(theta) - 2, 0)))
    if len(theta) == 1 or wanted <= theta[0]:
        return np.asarray(table[0], dtype=np.float64)
    if wanted >= theta[-1]:
        return np.asarray(table[-1], dtype=np.float64)
    share = (wanted - theta[j]) / (theta[j + 1] - theta[j])
    if share == 0:  # A row beside it without a number says nothing.
        return np.asarray(table[j], dtype=np.float64)
    return np.asarray((1 - share) * table[j] + share * table[j + 1])


def azimuth_cells(grid: WedgeGrid) -> int:
    """How many cells lie side by side in azimuth, at least; 1 is an axisymmetric snapshot."""
    return max(grid.block_shape[0], len(grid.table.phi) - 1)


def _common_edges(edges: Array, tolerance: float) -> tuple[Array, IntArray]:
    """All different edges, and the place among them of each edge of each block."""
    cells = np.stack([edges[:, :-1], edges[:, 1:]], axis=-1)
    snapped = snap_outer_edges(cells.reshape(-1, 2), tolerance).reshape(cells.shape)
    own = np.concatenate([snapped[:, :, 0], snapped[:, -1:, 1]], axis=1)
    common, place = np.unique(own, return_inverse=True)
    return common, place.reshape(own.shape)


@dataclass(frozen=True, eq=False)
class AzimuthMoments:
    """Means and covariances along azimuth at each (theta, r), tables (n_theta, n_r).

    Attributes
    ----------
    mesh : MeridionalMesh
    azimuth : (n_theta, n_r) array
        Azimuth covered by cells that were used, radians.
    means, covariances : mapping to tables
        Weighted by volume.
    mass_means, mass_covariances : mapping to tables
        Weighted by mass.
    n_left_out : int
        Cells left out.
    share_left_out : float
        Their share of the wedge's volume.
    notes : tuple of str
    """

    mesh: MeridionalMesh
    azimuth: Array
    means: Mapping[str, Array]
    covariances: Mapping[Pair, Array]
    mass_means: Mapping[str, Array]
    mass_covariances: Mapping[Pair, Array]
    n_left_out: int
    share_left_out: float
    notes: tuple[str, ...]

    def mean_square(self, name: str) -> Array:
        """<f^2>, weighted by volume: square of the mean and variance about it."""
        square: Array = self.means[name] ** 2 + self.covariances[name, name]
        return square


def azimuth_moments(
    snapshot: Snapshot,
    volume: Iterable[str] = (),
    mass: Iterable[str] = (),
    *,
    pairs: Iterable[Pair] = (),
    mass_pairs: Iterable[Pair] = (),
    formulas: Mapping[str, Formula] | None = None,
    density_floor: float | None = None,
) -> AzimuthMoments:
    """Go once over the blocks and average along azimuth.

    Parameters
    ----------
    snapshot : Snapshot
    volume, mass : names
        Fields whose means are wanted, weighted by volume and by mass.
    pairs, mass_pairs : pairs of names
        Covariances wanted, of fields in `volume` and `mass`.
    formulas : mapping of name to function (snapshot, block) -> (n_phi, n_theta, n_r) array
        Values of names that are no fields of the snapshot; what broadcasts to the shape will do.
        "over_kepler" is known: v_phi - sqrt(GM/R).
    density_floor : float, optional
        Cells with a density up to 1.01 times this are left out.

    Returns
    -------
    AzimuthMoments

    Raises
    ------
    MissingFieldError

    Notes
    -----
    A cell in which any of the fields is not finite, or the density not positive, is left out of
    all of them and counted. Deviations are taken from the mean of each block, and blocks are
    joined by the formula of Chan, Golub & LeVeque 1983 (from memory), so that small fluctuations
    on a fast rotation keep their digits. Memory: one block of the fields, and the tables. Within
    `shared.sharing` all usual averages are worked out together, at the first call.
    """
    known = {**_BUILT_IN, **(formulas or {})}
    request = Request(
        tuple(dict.fromkeys(volume)),
        tuple(dict.fromkeys(mass)),
        tuple(dict.fromkeys(pairs)),
        tuple(dict.fromkeys(mass_pairs)),
        bool(mass) or density_floor is not None,
    )
    snapshot.require("average along azimuth", *(n for n in request.names if n not in known))
    _check_pairs(request)
    # Where no cell is left out of all fields together, none is left out of some.
    usual = _usual(snapshot)
    own = set(formulas or {}) & set(usual.names)
    if is_shared(snapshot) and density_floor is None and not own and request.within(usual):
        made = once(snapshot, _NAME, lambda: _averaged(snapshot, usual, _BUILT_IN, None))
        if not made.n_left_out:
            return _some_of(made, request)
    return _averaged(snapshot, request, known, density_floor)


def _usual(snapshot: Snapshot) -> Request:
    """What diagnostics ask for of the fields that are there."""
    gas = tuple(name for name in ("density", "pressure") if snapshot.has(name))
    field = tuple(name for name in MAGNETIC if snapshot.has(name))
    pairs = [(name, name) for name in field]
    pairs += [(name, "magnetic_phi") for name in field[:2] if "magnetic_phi" in field]
    if "density" not in gas:
        return Request((*gas, *field), (), tuple(dict.fromkeys(pairs)), (), False)
    flow = [name for name in VELOCITY if snapshot.has(name)]
    mass_pairs = [(name, name) for name in flow]
    if "velocity_phi" in flow:
        mass_pairs += [(name, OVER_KEPLER) for name in flow if name != "velocity_phi"]
        flow.append(OVER_KEPLER)
    volume = (*gas, *field, *(name for name in flow if name != "velocity_phi"))
    return Request(volume, tuple(flow), tuple(dict.fromkeys(pairs)), tuple(mass_pairs), True)


def _some_of(made: AzimuthMoments, request: Request) -> AzimuthMoments:
    def both_ways(pairs: Iterable[Pair]) -> set[Pair]:
        return {pair for a, b in pairs for pair in ((a, b), (b, a))}

    return replace(
        made,
        means={name: made.means[name] for name in request.volume},
        covariances={pair: made.covariances[pair] for pair in both_ways(request.pairs)},
        mass_means={name: made.mass_means[name] for name in request.mass},
        mass_covariances={
            pair: made.mass_covariances[pair] for pair in both_ways(request.mass_pairs)
        },
    )


def _averaged(
    snapshot: Snapshot,
    request: Request,
    formulas: Mapping[str, Formula],
    density_floor: float | None,
) -> AzimuthMoments:
    mesh, grid = meridional_mesh(snapshot.grid), snapshot.grid
    shape = mesh.row_start.shape
    by_volume = RunningMoments(shape, request.volume, request.pairs)
    by_mass = RunningMoments(shape, request.mass, request.mass_pairs)
    least = 0.0 if density_floor is None else FLOOR_MARGIN * density_floor
    n_bad, lost = 0, 0.0
    for block in range(grid.n_blocks):
        found = block_moments(snapshot, block, request, formulas, least)
        if found.n_left_out:
            n_bad += found.n_left_out
            without = np.ptp(grid.phi_edges[block]) - found.weight
            lost += float(np.sum(without * cell_volumes(*grid.edges(block)[:2], _UNIT)[0]))
        cells = mesh.block_cells(block)
        by_volume.add(found.weight, found.means, found.products, cells)
        if request.mass:
            by_mass.add(found.mass, found.mass_means, found.mass_products, cells)
    return AzimuthMoments(
        mesh,
        by_volume.weight,
        *by_volume.results(),
        *by_mass.results(),
        n_bad,
        lost / grid.wedge_volume,
        _left_out_notes(n_bad, lost / grid.wedge_volume, density_floor),
    )


def _check_pairs(request: Request) -> None:
    for names, pairs in ((request.volume, request.pairs), (request.mass, request.mass_pairs)):
        unknown = {name for pair in pairs for name in pair} - set(names)
        if unknown:
            raise FieldvizError(
                f"Cannot work out covariances: expected pairs of {', '.join(names) or 'nothing'}, "
                f"got {', '.join(sorted(unknown))}; ask for its mean as well."
            )


def _left_out_notes(count: int, share: float, density_floor: float | None) -> tuple[str, ...]:
    if not count:
        return ()
    floor = "" if density_floor is None else f" or a density up to {FLOOR_MARGIN:g} of the floor"
    flag = "; this is more than 10 %: do not rely on it" if share > 0.1 else ""
    return (
        f"{count} cells ({100 * share:.3g} % of the volume) with NaN, infinite values or no "
        f"positive density{floor} were left out{flag}",
    )
