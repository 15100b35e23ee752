"""A flux density on a cone theta = constant as one table of patches, for any blocks and levels."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import annulus_widths, centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["ConeTable", "array_on_cone", "checked_r_range", "checked_theta", "magnetic_on_cone"]

# As in the grid: what differs by less than this share of a cell is the same edge.
_SAME_EDGE = 1e-3


@dataclass(frozen=True, eq=False)
class ConeTable:
    """Patches between all edges that meet the cone, each inside one cell of the finest block there.

    Attributes
    ----------
    theta : float
        Colatitude, radians.
    r_edges : (n_r + 1,) array
        Radii, the ends of the asked range included.
    phi_edges : (n_phi + 1,) array
        Azimuths over the whole wedge.
    density : (n_phi, n_r) float64 array
        Flux density along theta-hat (southward); 0 where there was no number.
    without_number : int
        Patches whose density was NaN or infinite.
    from_faces : bool
        Whether it was read from faces, and nothing was interpolated.
    """

    theta: float
    r_edges: Array
    phi_edges: Array
    density: Array
    without_number: int
    from_faces: bool

    @property
    def areas(self) -> Array:
        """Exact areas of the patches, (n_phi, n_r)."""
        widths = annulus_widths(self.r_edges) * np.sin(self.theta)
        return np.asarray(np.diff(self.phi_edges)[:, None] * widths)


def checked_theta(work: str, grid: WedgeGrid, theta: float) -> float:
    """Refuse a colatitude outside the wedge, or on the axis, where a cone has no area."""
    low, high = grid.theta_range
    if not (low <= theta <= high and 0 < theta < np.pi):
        raise FieldvizError(
            f"Cannot {work}: expected a colatitude theta within the wedge's {low:.6g} to "
            f"{high:.6g} radians and off the axis, got {theta}; choose one inside."
        )
    return float(theta)


def checked_r_range(
    work: str, grid: WedgeGrid, r_range: tuple[float, float] | None
) -> tuple[float, float]:
    """Refuse radii outside the wedge or not in order; None is the whole wedge."""
    inner, outer = grid.r_range
    low, high = r_range if r_range is not None else (inner, outer)
    if not inner <= low < high <= outer:
        raise FieldvizError(
            f"Cannot {work}: expected a range of radii, inner one first, within the wedge's "
            f"{inner:.6g} to {outer:.6g}, got {low:.6g} to {high:.6g}; choose radii inside."
        )
    return float(low), float(high)


def magnetic_on_cone(
    snapshot: Snapshot, theta: float, r_range: tuple[float, float], work: str
) -> ConeTable:
    """B_theta on a cone.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_theta`. Face values are used where the cone consists of faces, those of the
        finer level at a level jump; else cell values, interpolated linearly in theta.
    theta : float
        Colatitude within the wedge.
    r_range : (float, float)
    work : str
        What it is for, for the error.

    Returns
    -------
    ConeTable

    Raises
    ------
    MissingFieldError
    """
    snapshot.require(work, "magnetic_theta")
    table = None
    if "magnetic_theta" in snapshot.faces:
        table = _from_faces(snapshot, theta, r_range)
    if table is None:
        table = array_on_cone(snapshot.grid, halo(snapshot, "magnetic_theta"), theta, r_range)
    return table


def array_on_cone(
    grid: WedgeGrid, haloed: Array, theta: float, r_range: tuple[float, float]
) -> ConeTable:
    """Any cell array with its ghost layer on a cone, linear in theta between cell centres.

    Parameters
    ----------
    grid : WedgeGrid
    haloed : (n_blocks, n_phi + 2, n_theta + 2, n_r + 2) array
    theta : float
        Colatitude within the wedge.
    r_range : (float, float)

    Returns
    -------
    ConeTable
    """
    edges, around, last = grid.theta_edges, halo_grid(grid), grid.theta_range[1]
    crossed = (edges[:, 0] <= theta) & (
        (theta < edges[:, -1]) | ((theta == last) & (last == edges[:, -1]))
    )
    rows: dict[int, Array] = {}
    for block in np.flatnonzero(crossed):
        middles = around.theta[block]
        j = int(np.clip(np.searchsorted(middles, theta) - 1, 0, len(middles) - 2))
        weight = (theta - middles[j]) / (middles[j + 1] - middles[j])
        pair = haloed[block, 1:-1, j : j + 2, 1:-1].astype(np.float64)
        with np.errstate(invalid="ignore"):
            rows[int(block)] = (1 - weight) * pair[:, 0] + weight * pair[:, 1]
    table = _painted(grid, rows, theta, r_range, from_faces=False)
    assert table is not None
    return table


def _from_faces(snapshot: Snapshot, theta: float, r_range: tuple[float, float]) -> ConeTable | None:
    """B_theta from faces, or None unless faces cover the whole cone."""
    grid = snapshot.grid
    distance = np.abs(grid.theta_edges - theta)
    nearest = distance.argmin(axis=1)
    near = distance.min(axis=1) <= _SAME_EDGE * np.diff(grid.theta_edges, axis=1).min(axis=1)
    blocks = np.flatnonzero(near)
    if not blocks.size:
        return None
    assert grid.level is not None
    # Coarse blocks first, so that at a level jump the fine faces stand.
    order = blocks[np.argsort(grid.level[blocks], kind="stable")]
    rows = {
        int(b): snapshot.faces.block("magnetic_theta", int(b))[:, nearest[b]].astype(np.float64)
        for b in order
    }
    return _painted(grid, rows, theta, r_range, from_faces=True)


def _painted(
    grid: WedgeGrid,
    rows: dict[int, Array],
    theta: float,
    r_range: tuple[float, float],
    *,
    from_faces: bool,
) -> ConeTable | None:
    """One table from the rows of several blocks; None if they leave a part of the cone out."""
    numbers = list(rows)
    r_edges = _clipped(_union(grid.r_edges[numbers]), r_range)
    phi_edges = _union(grid.phi_edges[numbers])
    r, phi = centres(r_edges), centres(phi_edges)
    density = np.zeros((len(phi), len(r)))
    covered = np.zeros(density.shape, dtype=bool)
    for block, values in rows.items():
        r_own, _, phi_own = grid.edges(block)
        columns, lines = _inside(r, r_own), _inside(phi, phi_own)
        i = np.searchsorted(r_own, r[columns]) - 1
        k = np.searchsorted(phi_own, phi[lines]) - 1
        density[lines, columns] = values[np.ix_(k, i)]
        covered[lines, columns] = True
    if not covered.all():
        return None
    bad = ~np.isfinite(density)
    density[bad] = 0.0
    return ConeTable(theta, r_edges, phi_edges, density, int(bad.sum()), from_faces)


def _inside(sorted_values: Array, edges: Array) -> slice:
    return slice(*(int(n) for n in np.searchsorted(sorted_values, edges[[0, -1]])))


def _union(edges: Array) -> Array:
    """All edges of several blocks, increasing; those that differ by rounding count once."""
    values = np.unique(edges)
    limit = _SAME_EDGE * np.diff(edges, axis=1).min()
    apart = np.diff(values) > limit
    kept = values[np.concatenate([[True], apart])]
    kept[-1] = values[-1]
    return np.asarray(kept)


def _clipped(edges: Array, span: Iterable[float]) -> Array:
    low, high = span
    within = edges[(edges > low) & (edges < high)]
    return np.concatenate([[low], within, [high]])
