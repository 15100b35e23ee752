"""A snapshot of any blocks and levels on one regular mesh of nodes, smooth enough to contour.

Two steps: the cells are sampled on nodes as fine as the finest cells, then cubic splines refine
the nodes where they are too few for smooth surfaces. In azimuth the spline is periodic, so that
repeats of the wedge join without a seam.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline

from fieldviz.scenes.finite_cells import finite_field
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_array, stays_positive
from fieldviz.wedge.sampling import PointSampler
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["DisplayGrid", "Window", "make_display_grid", "sampling_nodes"]

_LARGEST_SAMPLING = 2_500_000
_FEWEST = {"r": 160, "theta": 96}
_PHI_STEPS = (np.radians(1.3), np.radians(1.9))  # finest and widest


@dataclass(frozen=True)
class Window:
    """The part of the wedge to show; None means as far as the snapshot goes.

    Attributes
    ----------
    r_end : float or None
        Outer radius.
    theta_range : (float, float) or None
        Colatitudes, cut to those of the snapshot.
    phi_start : float
        First azimuth, radians; any number, as the wedge repeats.
    phi_span : float
        Azimuth shown, radians; may be more than the wedge has.
    """

    r_end: float | None = None
    theta_range: tuple[float, float] | None = None
    phi_start: float = 0.0
    phi_span: float = np.pi / 4


@dataclass(frozen=True)
class DisplayGrid:
    """Nodes (phi, theta, r), r fastest, with fields.

    Attributes
    ----------
    phi, theta, r : arrays
        Node coordinates, increasing; phi may pass the end of the wedge.
    fields : mapping of str to (n_phi, n_theta, n_r) float32 array
    hidden : (n_phi, n_theta, n_r) bool array or None
        Nodes next to cells without a number, where there are any.
    cells_left_out : int
        Cells without a number in one of the fields.
    """

    phi: Array
    theta: Array
    r: Array
    fields: Mapping[str, Array]
    hidden: np.ndarray | None = None
    cells_left_out: int = 0

    @property
    def shape(self) -> tuple[int, int, int]:
        """(n_phi, n_theta, n_r)."""
        return len(self.phi), len(self.theta), len(self.r)

    @property
    def midplane_row(self) -> int:
        """The node row in theta next to the midplane."""
        return int(np.argmin(np.abs(self.theta - np.pi / 2)))

    def with_fields(self, **arrays: Array) -> DisplayGrid:
        """A copy with further fields."""
        added = {name: np.asarray(array, dtype=np.float32) for name, array in arrays.items()}
        return self._replaced(self.phi, self.theta, self.r, {**self.fields, **added}, self.hidden)

    def part(
        self,
        phi: slice = slice(None),
        theta: slice = slice(None),
        r: slice = slice(None),
    ) -> DisplayGrid:
        """The nodes of three slices."""
        index = (phi, theta, r)
        fields = {name: array[index] for name, array in self.fields.items()}
        hidden = None if self.hidden is None else self.hidden[index]
        return self._replaced(self.phi[phi], self.theta[theta], self.r[r], fields, hidden)

    def coarser(self, phi_step: int, theta_step: int, r_step: int = 1) -> DisplayGrid:
        """Every n-th node along each axis; the last node of an axis is always kept."""
        index = [
            np.unique(np.append(np.arange(0, count, step), count - 1))
            for count, step in zip(self.shape, (phi_step, theta_step, r_step), strict=True)
        ]
        mesh = np.ix_(*index)
        fields = {name: array[mesh] for name, array in self.fields.items()}
        hidden = None if self.hidden is None else self.hidden[mesh]
        return self._replaced(
            self.phi[index[0]], self.theta[index[1]], self.r[index[2]], fields, hidden
        )

    def _replaced(
        self,
        phi: Array,
        theta: Array,
        r: Array,
        fields: Mapping[str, Array],
        hidden: np.ndarray | None,
    ) -> DisplayGrid:
        return DisplayGrid(phi, theta, r, fields, hidden, self.cells_left_out)


def make_display_grid(
    snapshot: Snapshot,
    names: tuple[str, ...],
    window: Window,
    *,
    budget: int = 2_800_000,
) -> DisplayGrid:
    """Put cell fields of a snapshot on display nodes.

    Parameters
    ----------
    snapshot : Snapshot
    names : tuple of str
        Cell fields; those that must be positive are splined as logarithms.
    window : Window
    budget : int
        Largest number of nodes.

    Returns
    -------
    DisplayGrid
        Second order in the cell size.

    Raises
    ------
    MissingFieldError
    """
    snapshot.require("draw the snapshot", *names)
    coarse = sampling_nodes(snapshot.grid, window)
    phi, theta, r = _display_nodes(snapshot.grid, window, coarse, budget)
    phi_c, theta_c, r_c = coarse
    mesh = np.meshgrid(r_c, theta_c, phi_c, indexing="ij")
    points = np.stack([axis.transpose(2, 1, 0).ravel() for axis in mesh], axis=-1)
    sampler = PointSampler(snapshot.grid, points)
    refine = _Refiner(coarse, (phi, theta, r), snapshot.grid.period)
    fields, bad = {}, np.zeros((snapshot.grid.n_blocks, *snapshot.grid.block_shape), dtype=bool)
    for name in names:
        positive = stays_positive(name)
        cells, missing = finite_field(snapshot.cell(name), positive=positive)
        bad |= missing
        sampled = sampler.of_halo(halo_array(snapshot.grid, cells, positive=positive))
        fields[name] = refine(sampled.reshape(refine.shape), positive)
    hidden = None
    if bad.any():
        share = sampler.of_halo(halo_array(snapshot.grid, bad.astype(np.float32)))
        hidden = refine(share.reshape(refine.shape), False) > 0.25
    return DisplayGrid(phi, theta, r, fields, hidden, int(np.count_nonzero(bad)))


def sampling_nodes(
    grid: WedgeGrid, window: Window, largest: int = _LARGEST_SAMPLING
) -> tuple[Array, Array, Array]:
    """Nodes (phi over one period without its end, theta, r) as fine as the finest cells."""
    r_low, r_high = _radii(grid, window)
    inner = np.where(grid.r_edges[:, :-1] > 0, grid.r_edges[:, :-1], np.nan)
    step = np.nanmin(np.log(grid.r_edges[:, 1:] / inner))
    n_r = int(np.ceil(np.log(r_high / r_low) / step - 1e-9)) + 1
    n_phi = max(int(np.rint(grid.period / np.diff(grid.phi_edges).min())), 4)
    theta_low, theta_high = _colatitudes(grid, window)
    density = _theta_density(grid)
    total = np.interp([theta_low, theta_high], *density)
    n_theta = int(np.ceil(total[1] - total[0] - 1e-9)) + 1
    excess = (n_r * n_theta * n_phi / largest) ** (1 / 3)
    if excess > 1:
        n_r, n_theta, n_phi = (max(int(n / excess), 4) for n in (n_r, n_theta, n_phi))
    phi = grid.phi_range[0] + grid.period * np.arange(n_phi) / n_phi
    # Half a step off the faces: for one block these are the cell centres themselves.
    phi = phi + 0.5 * grid.period / n_phi
    return (
        phi,
        _theta_nodes(density, theta_low, theta_high, max(n_theta, 4)),
        _log_nodes(r_low, r_high, max(n_r, 4)),
    )


def _radii(grid: WedgeGrid, window: Window) -> tuple[float, float]:
    low, high = grid.r_range
    if low <= 0:
        # A mesh in ln r cannot begin at the origin: it begins in the first cell.
        low = float(centres(grid.r_edges)[grid.r_edges[:, 0] <= 0, 0].min())
    if window.r_end is not None and window.r_end < high:
        high = max(window.r_end, low * 1.01)
    return low, high


def _colatitudes(grid: WedgeGrid, window: Window) -> tuple[float, float]:
    low, high = grid.theta_range
    if window.theta_range is not None:
        inside = max(low, window.theta_range[0]), min(high, window.theta_range[1])
        if inside[0] < inside[1]:
            return inside
    return low, high


def _theta_density(grid: WedgeGrid) -> tuple[Array, Array]:
    """Colatitudes, and how many of the finest cells lie above each of them."""
    lines = np.unique(grid.theta_edges)
    lines = lines[np.concatenate([[True], np.diff(lines) > 1e-12])]
    width = np.full(len(lines) - 1, np.inf)
    for edges in np.unique(grid.theta_edges, axis=0):
        first, last = np.searchsorted(lines, edges[[0, -1]] - 1e-12)
        cell = np.clip(
            np.searchsorted(edges, centres(lines)[first:last], side="right") - 1, 0, len(edges) - 2
        )
        width[first:last] = np.minimum(width[first:last], np.diff(edges)[cell])
    counts = np.concatenate([[0.0], np.cumsum(np.diff(lines) / width)])
    return lines, counts


def _theta_nodes(density: tuple[Array, Array], low: float, high: float, count: int) -> Array:
    """`count` colatitudes spaced as the finest cells; one of them is the midplane, if it can be."""
    lines, cells = density
    first, last = (float(n) for n in np.interp([low, high], lines, cells))
    nodes = np.interp(np.linspace(first, last, count), cells, lines)
    nodes[0], nodes[-1] = low, high
    return _with_midplane(nodes)


def _with_midplane(nodes: Array) -> Array:
    if len(nodes) > 2 and nodes[0] < np.pi / 2 < nodes[-1]:
        nearest = 1 + int(np.argmin(np.abs(nodes[1:-1] - np.pi / 2)))
        shift = np.interp(nodes, [nodes[0], nodes[nearest], nodes[-1]], [0, 1, 0])
        nodes = nodes + shift * (np.pi / 2 - nodes[nearest])
        nodes[nearest] = np.pi / 2
    return nodes


def _log_nodes(low: float, high: float, count: int) -> Array:
    nodes = np.geomspace(low, high, count)
    nodes[0], nodes[-1] = low, high
    return nodes


def _display_nodes(
    grid: WedgeGrid, window: Window, coarse: tuple[Array, Array, Array], budget: int
) -> tuple[Array, Array, Array]:
    phi, theta, r = coarse
    phi_step = float(np.clip(grid.period / len(phi), *_PHI_STEPS))
    counts = np.array(
        [
            window.phi_span / phi_step + 1,
            max(len(theta), _FEWEST["theta"]),
            max(len(r), _FEWEST["r"]),
        ]
    )
    excess = max(1.0, (np.prod(counts) / budget) ** (1 / 3))
    n_phi, n_theta, n_r = (max(round(n), 4) for n in counts / excess)
    if n_theta != len(theta):
        # A longer or shorter list of the same spacing: the old nodes, interpolated by number.
        number = np.linspace(0, len(theta) - 1, n_theta)
        theta = _with_midplane(np.interp(number, np.arange(len(theta)), theta))
    return (
        window.phi_start + window.phi_span * np.arange(n_phi) / (n_phi - 1),
        theta,
        _log_nodes(float(r[0]), float(r[-1]), n_r),
    )


class _Refiner:
    """Cubic splines along phi (periodic), theta and ln r, one axis after the other."""

    def __init__(
        self,
        coarse: tuple[Array, Array, Array],
        fine: tuple[Array, Array, Array],
        period: float,
    ) -> None:
        self.shape = tuple(len(axis) for axis in coarse)
        self._coarse, self._fine, self._period = coarse, fine, period

    def __call__(self, values: Array, logarithmic: bool) -> Array:
        """Values on the fine nodes, float32."""
        array = np.log(values) if logarithmic else values
        phi, theta, r = self._coarse
        phi_fine, theta_fine, r_fine = self._fine
        array = _splined(array, np.log(r), np.log(r_fine), 2)
        array = _splined(array, theta, theta_fine, 1)
        array = self._around(array, phi, phi_fine)
        return np.asarray(np.exp(array) if logarithmic else array, dtype=np.float32)

    def _around(self, array: Array, phi: Array, phi_fine: Array) -> Array:
        if np.ptp(array, axis=0).max() == 0:
            return np.broadcast_to(array[:1], (len(phi_fine), *array.shape[1:]))
        closed = np.concatenate([array, array[:1]])
        spline = CubicSpline(np.append(phi, phi[0] + self._period), closed, 0, "periodic")
        return np.asarray(spline(phi[0] + np.mod(phi_fine - phi[0], self._period)))


def _splined(array: Array, old: Array, new: Array, axis: int) -> Array:
    if len(old) == len(new) and np.allclose(old, new, rtol=0, atol=1e-12):
        return array
    return np.asarray(CubicSpline(old, array, axis)(new))
