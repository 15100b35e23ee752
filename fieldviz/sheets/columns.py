"""Columns along theta: cell values of any blocks and levels on one mesh, and what a column shows.

Heights are angles from the midplane over H/R, positive above, as for the launching surfaces.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.flux_function import distinct_edges
from fieldviz.derived.thickness import Thickness, disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.sheets.running import gaussian_kernel
from fieldviz.wedge.geometry import cell_volumes, centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_array
from fieldviz.wedge.sampling import PointSampler
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = [
    "SMOOTHING",
    "Columns",
    "common_notes",
    "full_width",
    "highest",
    "nearest_zero",
    "note_holes",
    "theta_columns",
]

SMOOTHING = 1.0  # full width at half maximum of the smoothing, scale heights
_FWHM = 2.0 * np.sqrt(2.0 * np.log(2.0))  # over the standard deviation of a Gaussian
_MIDPLANE = 0.5 * np.pi


@dataclass(frozen=True, eq=False)
class Columns:
    """Columns along theta; arrays on them are (n_phi, n_theta, n_r), maps (n_phi, n_r).

    Attributes
    ----------
    grid : WedgeGrid
        Where the values come from.
    r_edges, theta_edges, phi_edges : (n + 1,) arrays
        r and phi: those of all blocks at the midplane; theta: those of all blocks.
    thickness : Thickness
    """

    grid: WedgeGrid
    r_edges: Array
    theta_edges: Array
    phi_edges: Array
    thickness: Thickness

    @property
    def r(self) -> Array:
        """Middles of the columns, (n_r,)."""
        return centres(self.r_edges)

    @property
    def theta(self) -> Array:
        """Middles of the rows, (n_theta,)."""
        return centres(self.theta_edges)

    @property
    def phi(self) -> Array:
        """Middles of the columns, (n_phi,)."""
        return centres(self.phi_edges)

    @property
    def shape(self) -> tuple[int, int, int]:
        """(n_phi, n_theta, n_r)."""
        return len(self.phi_edges) - 1, len(self.theta_edges) - 1, len(self.r_edges) - 1

    @property
    def heights(self) -> Array:
        """(pi/2 - theta)/(H/R) of the rows, falling, (n_theta,)."""
        return (_MIDPLANE - self.theta) / self.thickness.h

    @property
    def log_r(self) -> Array:
        """Logarithms of the edges in r over H/R: distances in H, (n_r + 1,)."""
        inner = np.maximum(self.r_edges, 1e-3 * self.r_edges[-1])
        return np.log(inner) / self.thickness.h

    @property
    def weights(self) -> Array:
        """Width in azimuth times width in ln r of every column, (n_phi, n_r)."""
        return np.diff(self.phi_edges)[:, None] * np.diff(self.log_r)

    @property
    def volumes(self) -> Array:
        """Exact volumes, (n_phi, n_theta, n_r)."""
        return cell_volumes(self.r_edges, self.theta_edges, self.phi_edges)

    def sampled(self, cells: Array, rows: slice = slice(None)) -> Array:
        """A cell array interpolated linearly to the middles; in cells of that size, its values.

        A new array in double precision, of some rows or of all.
        """
        if self.grid.n_blocks == 1:
            return np.array(cells[0][:, rows], dtype=np.float64)
        haloed = halo_array(self.grid, cells)
        chosen = self.theta[rows]
        found = np.empty((len(self.phi), len(chosen), len(self.r)))
        theta, r = np.meshgrid(chosen, self.r, indexing="ij")
        for page, phi in enumerate(self.phi):
            points = np.column_stack([r.ravel(), theta.ravel(), np.full(r.size, phi)])
            found[page] = PointSampler(self.grid, points).of_halo(haloed).reshape(r.shape)
        return found

    def of_own_cell(self, cells: Array) -> Array:
        """What a cell array holds in the cell around each middle; of one block it is a view."""
        if self.grid.n_blocks == 1:
            return cells[0]
        found = np.empty(self.shape, dtype=cells.dtype)
        middles = self.phi, self.theta, self.r
        for block in range(self.grid.n_blocks):
            edges = self.grid.edges(block)[::-1]
            spans = [
                np.flatnonzero((x >= own[0]) & (x < own[-1]))
                for x, own in zip(middles, edges, strict=True)
            ]
            places = [
                np.searchsorted(own, x[span], side="right") - 1
                for x, own, span in zip(middles, edges, spans, strict=True)
            ]
            found[np.ix_(*spans)] = cells[block][np.ix_(*places)]
        return found

    def smoothed_along_r(self, values: Array) -> Array:
        """Gaussian mean over 1 H in r; what is no number is left out of it."""
        from fieldviz.sheets._kernels import smooth_last_axis

        return _smoothed(values, centres(self.log_r), np.diff(self.log_r), smooth_last_axis)

    def smoothed_along_theta(self, values: Array) -> Array:
        """Gaussian mean over 1 H in theta; what is no number is left out of it."""
        widths = np.diff(self.theta_edges) / self.thickness.h
        from fieldviz.sheets._kernels import smooth_middle_axis

        return _smoothed(values, self.heights, widths, smooth_middle_axis)

    def percentiles(self, values: Array) -> tuple[float, float, float]:
        """16, 50 and 84 percent of a map over ln r and phi; NaN where nothing has a number."""
        good = np.isfinite(values)
        if not good.any():
            return np.nan, np.nan, np.nan
        order = np.argsort(values[good])
        weights = self.weights[good][order]
        middles = (np.cumsum(weights) - 0.5 * weights) / weights.sum()
        low, middle, high = np.interp((0.16, 0.5, 0.84), middles, values[good][order])
        return float(low), float(middle), float(high)

    def share(self, chosen: Array) -> float:
        """Share of ln r and phi in which a map of truth values holds."""
        return float(np.sum(self.weights * chosen) / np.sum(self.weights))


def theta_columns(snapshot: Snapshot, work: str, thickness: float | None) -> Columns:
    """Lay out columns through the whole wedge.

    Parameters
    ----------
    snapshot : Snapshot
    work : str
        What they are for, for errors.
    thickness : float or None
        H/R; None: worked out from the snapshot.

    Returns
    -------
    Columns

    Raises
    ------
    MissingFieldError, FieldvizError
        If the wedge does not hold the midplane, or the thickness is not within 0 to 1.
    """
    grid = snapshot.grid
    edges = grid.theta_edges
    held = np.flatnonzero((edges[:, 0] <= _MIDPLANE) & (edges[:, -1] >= _MIDPLANE))
    low, high = grid.theta_range
    if not (held.size and low < _MIDPLANE < high):
        raise FieldvizError(
            f"Cannot {work}: expected a wedge on both sides of the midplane theta = pi/2, got "
            f"colatitudes {low:.4g} to {high:.4g}; take a snapshot that holds the midplane."
        )
    if thickness is None:
        measured = disc_thickness(snapshot)
    elif 0 < thickness < 1:
        measured = Thickness(float(thickness), (float(thickness), float(thickness)), "given")
    else:
        raise FieldvizError(
            f"Cannot {work}: expected a thickness H/R of 0 to 1, got {thickness}; leave it out "
            "and it is worked out."
        )
    return Columns(
        grid,
        distinct_edges(grid.r_edges[held]),
        distinct_edges(edges),
        distinct_edges(grid.phi_edges[held]),
        measured,
    )


def nearest_zero(values: Array, heights: Array) -> Array:
    """Height nearest to the midplane at which each column changes sign; NaN where none does.

    Linear between two rows. Rows that are exactly zero between two signs count as the zero, at
    their middle; zeros beside one sign only are no change. No zero is looked for beside a row
    without a number.

    Parameters
    ----------
    values : (n_phi, n_theta, n_r) array
    heights : (n_theta,) array

    Returns
    -------
    (n_phi, n_r) array
    """
    from fieldviz.sheets._kernels import nearest_zeros

    found = np.empty((values.shape[0], values.shape[2]))
    nearest_zeros(values, heights, found)
    return found


def highest(values: Array, heights: Array) -> tuple[Array, Array]:
    """Where each column is highest: row, and height of the parabola through it and its neighbours.

    Parameters
    ----------
    values : (n_phi, n_theta, n_r) array
        Rows without a number are passed over.
    heights : (n_theta,) array

    Returns
    -------
    rows : (n_phi, n_r) int array
        -1 where a column has no maximum: it is constant, has no numbers, or is highest at an end
        or beside a row without a number.
    found : (n_phi, n_r) array
        NaN there.
    """
    from fieldviz.sheets._kernels import highest_rows

    n = values.shape[1]
    rows = np.empty((values.shape[0], values.shape[2]), dtype=np.int64)
    highest_rows(values, rows)
    inner = np.clip(rows, 1, n - 2)
    y = [np.take_along_axis(values, (inner + m)[:, None], axis=1)[:, 0] for m in (-1, 0, 1)]
    x = [heights[inner + m] for m in (-1, 0, 1)]
    with np.errstate(invalid="ignore", divide="ignore"):
        rise = (y[1] - y[0]) / (x[1] - x[0])
        fall = (y[2] - y[1]) / (x[2] - x[1])
        vertex = 0.5 * (x[0] + x[1]) - 0.5 * rise * (x[2] - x[0]) / (fall - rise)
    there = (rows == inner) & np.isfinite(vertex)
    return np.where(there, rows, -1), np.where(there, vertex, np.nan)


def full_width(values: Array, heights: Array, rows: Array) -> Array:
    """Full width at half of the value at `rows`, linear between rows; NaN where it has no end.

    Parameters
    ----------
    values : (n_phi, n_theta, n_r) array
    heights : (n_theta,) array
        Falling.
    rows : (n_phi, n_r) int array
        Peak of each column, -1 for none.

    Returns
    -------
    (n_phi, n_r) array
        In the unit of `heights`.
    """
    n = values.shape[1]
    peak = np.maximum(rows, 0)[:, None]
    half = 0.5 * np.take_along_axis(values, peak, axis=1)
    index = np.arange(n)[:, None]
    # A row without a number ends the search, and gives no width.
    low = ~(values >= half)
    ends = []
    for side in (-1, 1):
        beyond = low & ((index < peak) if side < 0 else (index > peak))
        first = np.where(beyond, index, -1).max(axis=1) if side < 0 else (
            np.where(beyond, index, n).min(axis=1)
        )  # fmt: skip
        known = (first >= 0) & (first < n) & (rows >= 0)
        out = np.clip(first, 0, n - 1)
        inside = np.clip(out - side, 0, n - 1)
        a, b = (np.take_along_axis(values, m[:, None], axis=1)[:, 0] for m in (out, inside))
        with np.errstate(invalid="ignore", divide="ignore"):
            share = (half[:, 0] - b) / (a - b)
        end = heights[inside] + share * (heights[out] - heights[inside])
        ends.append(np.where(known, end, np.nan))
    return np.asarray(ends[0] - ends[1])


def common_notes(columns: Columns) -> list[str]:
    """What all results on columns rest on."""
    thickness = columns.thickness
    return [
        f"heights are angles from the midplane over H/R = {thickness.h:.4g}, from "
        f"{thickness.source}; common practice, no source; thresholds are our choice",
        f"medians and shares are over ln r and azimuth; {columns.grid.azimuth_sentence}",
    ]


def note_holes(notes: list[str], name: str, values: Array) -> None:
    """Say in how many places there is no number."""
    holes = int(np.count_nonzero(~np.isfinite(values)))
    if holes:
        notes.append(f"{name} is no number in {holes} of {values.size} places: they are left out")


def _bands(x: Array, widths: Array) -> tuple[Array, Array, Array] | None:
    """Rows of the smoothing over 1 H without their zeros: weights, where they begin, how many."""
    kernel = gaussian_kernel(x, widths, SMOOTHING / _FWHM)
    if kernel.weights is None:
        return None
    there = kernel.weights > 0
    first = there.argmax(axis=1)
    count = there.shape[1] - there[:, ::-1].argmax(axis=1) - first
    bands = np.zeros((len(x), int(count.max())))
    for row, (start, n) in enumerate(zip(first, count, strict=True)):
        bands[row, :n] = kernel.weights[row, start : start + n]
    return bands, first, count


def _smoothed(values: Array, x: Array, widths: Array, kernel: Callable[..., None]) -> Array:
    """By one of the compiled loops; x lies along the axis that this smooths."""
    bands = _bands(x, widths)
    if bands is None:
        return values
    out = np.empty(values.shape)
    kernel(np.ascontiguousarray(values), *bands, out)
    return out
