"""Values between the cells of a meridional mesh: on a surface theta(r), and on whole spheres."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.geometry import cosine_steps
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["Places", "SphereSums", "on_spheres", "places_at", "rebinned"]


@dataclass(frozen=True, eq=False)
class Places:
    """Two rows and a weight for each place; arrays are (n_places, n_r).

    Attributes
    ----------
    near, far : int arrays
        Rows of the cell that holds the place, and of its neighbour towards the place.
    weight : array
        Share of the neighbour; negative in the half cell before a wall, where values are continued.
    """

    near: IntArray
    far: IntArray
    weight: Array

    def of(self, table: Array) -> Array:
        """Values of a table (n_theta, n_r) at the places, linear between cell middles."""
        columns = np.arange(table.shape[1])
        here, there = table[self.near, columns], table[self.far, columns]
        with np.errstate(invalid="ignore"):
            mixed = (1 - self.weight) * here + self.weight * there
        return np.where(self.weight == 0, here, mixed)


def places_at(mesh: MeridionalMesh, theta: Array) -> Places:
    """Where colatitudes lie among the cells of each column.

    Parameters
    ----------
    mesh : MeridionalMesh
    theta : (n_places, n_r) array
        Finite and within the wedge.

    Returns
    -------
    Places
    """
    edges, middles = mesh.theta_edges, mesh.theta
    last = len(middles) - 1
    near = np.clip(np.searchsorted(edges, theta, side="right") - 1, 0, last)
    middle = middles[near]
    far = np.where(theta < middle, near - 1, near + 1)
    # Before a wall the neighbour on the other side continues the values.
    far = np.where(far < 0, min(1, last), np.where(far > last, max(last - 1, 0), far))
    other = middles[far]
    step = other - middle
    weight = np.divide(theta - middle, step, out=np.zeros_like(middle), where=step != 0)
    return Places(near, far, weight)


def on_spheres(mesh: MeridionalMesh, table: Array) -> Array:
    """r^2 times a table on the spheres between the columns, (n_theta, n_r + 1).

    Linear in r between the middles of the cells; continued linearly to the walls.
    """
    r, edges = mesh.r, mesh.r_edges
    scaled = r**2 * table
    if len(r) == 1:
        return np.repeat(scaled, 2, axis=1)
    low = np.clip(np.arange(len(edges)) - 1, 0, len(r) - 2)
    share = (edges - r[low]) / (r[low + 1] - r[low])
    return np.asarray((1 - share) * scaled[:, low] + share * scaled[:, low + 1])


@dataclass(frozen=True, eq=False)
class SphereSums:
    """Sums over colatitude from the wedge's upper edge to any angle, for each of many columns.

    Attributes
    ----------
    theta_edges : (n_theta + 1,) array
    per_cell : (n_theta, n) array
        What each cell adds.
    """

    theta_edges: Array
    per_cell: Array

    @classmethod
    def of_flux(cls, mesh: MeridionalMesh, table: Array) -> SphereSums:
        """Outward flux through spheres at all radial edges, from a table of a radial component."""
        solid = cosine_steps(mesh.theta_edges)[:, None] * mesh.period
        return cls(mesh.theta_edges, on_spheres(mesh, table) * solid)

    def up_to(self, theta: Array | float) -> Array:
        """Sum from the upper edge down to `theta` of each column, (n,); NaN where theta is NaN.

        Within a cell the summand is linear, with the slope of its neighbours: second order.
        """
        edges, (count, columns) = self.theta_edges, self.per_cell.shape
        wanted = np.clip(np.broadcast_to(theta, columns), edges[0], edges[-1])
        known = np.where(np.isnan(wanted), edges[0], wanted)
        row = np.clip(np.searchsorted(edges, known, side="right") - 1, 0, count - 1)
        share = (known - edges[row]) / np.diff(edges)[row]
        place, inside = np.arange(columns), (row > 0) & (row < count - 1)
        cumulative = np.vstack([np.zeros(columns), np.cumsum(self.per_cell, axis=0)])
        below, above = np.minimum(row + 1, count - 1), np.maximum(row - 1, 0)
        slope = 0.5 * (self.per_cell[below, place] - self.per_cell[above, place])
        slope = np.where(inside & np.isfinite(slope), slope, 0.0)
        part = share * self.per_cell[row, place] + 0.5 * slope * share * (share - 1)
        return np.where(
            np.isnan(wanted), np.nan, cumulative[row, place] + np.where(share == 0, 0.0, part)
        )

    def between(self, upper: Array | float, lower: Array | float) -> Array:
        """Sum between two angles of each column, (n,)."""
        return self.up_to(lower) - self.up_to(upper)


def rebinned(per_column: Array, r_edges: Array, radii: Array) -> Array:
    """Share what each column holds among other bins in radius, evenly in r^2 within a column.

    A bin that meets a column without a number has none.
    """
    bad = ~np.isfinite(per_column)
    square, wanted = np.square(r_edges), np.square(radii)

    def summed(values: Array) -> Array:
        cumulative = np.concatenate([[0.0], np.cumsum(values)])
        return np.asarray(np.diff(np.interp(wanted, square, cumulative)))

    if len(radii) == len(r_edges) and np.array_equal(radii, r_edges):
        return per_column
    found = summed(np.where(bad, 0.0, per_column))
    return np.where(summed(bad * np.diff(square)) > 1e-12 * np.diff(wanted), np.nan, found)
