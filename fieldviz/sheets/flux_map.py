"""Vertical flux near the midplane as a map over radius and azimuth, for any blocks and levels."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.block_table import snap_outer_edges
from fieldviz.wedge.geometry import annulus_widths, centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_array, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["MIDPLANE", "WORK", "FluxMap", "flux_maps"]

WORK = "find flux sheets"
MIDPLANE = 0.5 * np.pi
_SAME_COSINE = 1e-9  # cosines nearer than this are one
_LEAST_RINGS = 5


@dataclass(frozen=True, eq=False)
class FluxMap:
    """Vertical flux density on rings and azimuths, all edges of the blocks that meet a band.

    Attributes
    ----------
    r_edges : (n_r + 1,) array
    phi_edges : (n_phi + 1,) array
        The whole azimuth of the wedge.
    density : (n_phi, n_r) float64 array
        r <B_z>: upward flux through a patch over dr dphi. NaN where a cell had no number.
    without_number : int
        Patches that are NaN.
    from_faces : bool
        Whether face-centred B_theta was used.
    """

    r_edges: Array
    phi_edges: Array
    density: Array
    without_number: int
    from_faces: bool

    @property
    def r(self) -> Array:
        """Middles of the rings."""
        return centres(self.r_edges)

    def mean(self) -> Array:
        """Azimuth mean, (n_r,); NaN where a whole ring is without a number."""
        known = np.isfinite(self.density)
        widths = np.diff(self.phi_edges)[:, None] * known
        azimuth = widths.sum(0)
        total = np.sum(widths * np.where(known, self.density, 0.0), axis=0)
        return np.divide(total, azimuth, out=np.full(len(total), np.nan), where=azimuth > 0)


def flux_maps(
    snapshot: Snapshot,
    surfaces: Sequence[tuple[float, float]],
    r_range: tuple[float, float] | None = None,
) -> list[FluxMap]:
    """Maps of r <B_z> over radius and azimuth, each on a cone or averaged over a band of cones.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_theta`; face values are used where there are any.
    surfaces : sequence of (theta, half_band)
        Colatitude, and the angle from there to the edge of the band; 0 for the cone itself.
        Radians.
    r_range : (float, float), optional
        Radii to use; the whole wedge by default. Cells are not cut.

    Returns
    -------
    list of FluxMap

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    B_z of a patch is the upward flux through the cone over the area of the flat ring below it,
    exact from face values; between faces it is linear in cos(theta), and so is its mean over the
    band. At a level jump every block adds what it covers of the band; where a cone lies between
    two levels the fine faces are used.
    """
    snapshot.require(WORK, "magnetic_theta")
    grid = snapshot.grid
    low, high = grid.theta_range
    if not low < MIDPLANE < high:
        raise FieldvizError(
            f"Cannot {WORK}: expected a wedge that holds the midplane theta = pi/2, got "
            f"colatitudes {low:.4g} to {high:.4g}; choose another snapshot."
        )
    sums = [_SurfaceSum(grid, *surface) for surface in surfaces]
    faces_of = _theta_faces(snapshot)
    level = grid.level
    assert level is not None
    # Coarse blocks first, so that on a cone at a level jump the fine faces stand.
    met = {int(b) for one in sums for b in one.blocks}
    for block in sorted(met, key=lambda block: (level[block], block)):
        faces = faces_of(block)
        for one in sums:
            one.add(block, faces, np.sin(grid.theta_edges[block]))
    from_faces = "magnetic_theta" in snapshot.faces
    return [one.result(r_range, from_faces) for one in sums]


class _SurfaceSum:
    """One surface: what the blocks that meet it add to its map."""

    def __init__(self, grid: WedgeGrid, theta: float, half_band: float) -> None:
        self.cosines = np.cos(grid.theta_edges)
        self.middle, self.half = float(np.cos(theta)), float(np.sin(half_band))
        top, bottom = self.cosines[:, 0], self.cosines[:, -1]
        slack = -_SAME_COSINE if half_band > 0 else _SAME_COSINE
        self.blocks = np.flatnonzero(
            (top > self.middle - self.half - slack) & (bottom < self.middle + self.half + slack)
        )
        self.r_edges, self.r_places = _union(grid.r_edges[self.blocks], grid.edge_tolerance)
        self.phi_edges, self.phi_places = _union(grid.phi_edges[self.blocks], grid.edge_tolerance)
        self.total = np.zeros((len(self.phi_edges) - 1, len(self.r_edges) - 1))
        self.covered = np.zeros_like(self.total)

    def add(self, block: int, southward: Array, sine: Array) -> None:
        found = np.flatnonzero(self.blocks == block)
        if not found.size:
            return
        weights = _band_weights(self.cosines[block], self.middle, self.half)
        used = np.flatnonzero(weights)
        # Only the rows that are needed, in double precision.
        upward = -southward[:, used].astype(np.float64) * sine[used][:, None]
        mean = np.einsum("j,kji->ki", weights[used], upward)
        k, phi_place = _covered_cells(self.phi_places[found[0]])
        i, r_place = _covered_cells(self.r_places[found[0]])
        place = np.ix_(phi_place, r_place)
        if self.half == 0:
            self.total[place], self.covered[place] = mean[np.ix_(k, i)], 1.0
            return
        self.total[place] += mean[np.ix_(k, i)]
        self.covered[place] += weights.sum()

    def result(self, r_range: tuple[float, float] | None, from_faces: bool) -> FluxMap:
        # Upward flux over the flat area r dr dphi, times r: divided by dr dphi.
        known = self.covered > 0
        density = np.full(self.total.shape, np.nan)
        np.divide(self.total, self.covered, out=density, where=known)
        density *= annulus_widths(self.r_edges) / np.diff(self.r_edges)
        keep = _within(self.r_edges, r_range)
        density = density[:, keep]
        bad = ~np.isfinite(density)
        density[bad] = np.nan
        edges = self.r_edges[keep.start : keep.stop + 1]
        return FluxMap(edges, self.phi_edges, density, int(bad.sum()), from_faces)


def _union(edges: Array, tolerance: float) -> tuple[Array, IntArray]:
    """All different edges of several blocks, and the place of each among them."""
    cells = np.stack([edges[:, :-1], edges[:, 1:]], axis=-1)
    snapped = snap_outer_edges(cells.reshape(-1, 2), tolerance).reshape(cells.shape)
    own = np.concatenate([snapped[:, :, 0], snapped[:, -1:, 1]], axis=1)
    common, place = np.unique(own, return_inverse=True)
    return common, place.reshape(own.shape)


def _covered_cells(places: IntArray) -> tuple[IntArray, IntArray]:
    """Cell of the block for each fine cell it covers, and which fine cells these are."""
    cells = np.repeat(np.arange(len(places) - 1), np.diff(places))
    return cells, np.arange(places[0], places[-1])


def _within(r_edges: Array, r_range: tuple[float, float] | None) -> slice:
    inner, outer = float(r_edges[0]), float(r_edges[-1])
    low, high = r_range or (inner, outer)
    if not inner <= low < high <= outer:
        raise FieldvizError(
            f"Cannot {WORK}: expected a range of radii, inner one first, within the wedge's "
            f"{inner:.6g} to {outer:.6g}, got {low:.6g} to {high:.6g}; choose radii inside."
        )
    slack = 1e-9 * (outer - inner)
    first = int(np.searchsorted(r_edges, low - slack))
    last = int(np.searchsorted(r_edges, high + slack, side="right")) - 1
    if last - first < _LEAST_RINGS:
        raise FieldvizError(
            f"Cannot {WORK}: expected at least {_LEAST_RINGS} cells in radius, got "
            f"{max(last - first, 0)}; widen the range."
        )
    return slice(first, last)


def _band_weights(falling: Array, middle: float, half: float) -> Array:
    """Weights of faces whose sum is the integral over a band of cosines of what they hold.

    `falling` are the cosines of the faces; a band without height gives interpolation weights.
    """
    top, bottom = falling[:-1], falling[1:]
    weights = np.zeros(len(falling))
    if half > 0:
        high, low = np.minimum(top, middle + half), np.maximum(bottom, middle - half)
        height, at = np.maximum(high - low, 0.0), 0.5 * (high + low)
    else:
        # A face on the cone is taken as it is; only within a cell is there anything between.
        on_face = np.abs(falling - middle) < _SAME_COSINE
        if on_face.any():
            weights[on_face] = 1.0
            return weights
        height = ((top > middle) & (bottom < middle)).astype(np.float64)
        at = np.full(len(height), middle)
    share = np.where(height > 0, (at - bottom) / (top - bottom), 0.0)
    weights[:-1] += height * share
    weights[1:] += height * (1 - share)
    return weights


def _theta_faces(snapshot: Snapshot) -> Callable[[int], Array]:
    """A function of a block: B_theta on its faces across theta, (n_phi, n_theta + 1, n_r)."""
    if "magnetic_theta" in snapshot.faces:
        return lambda block: snapshot.faces.block("magnetic_theta", block)
    haloed = halo_array(snapshot.grid, snapshot.cell("magnetic_theta"))
    with_ghosts = halo_grid(snapshot.grid).theta_edges

    def between_cells(block: int) -> Array:
        middles, faces = centres(with_ghosts[block]), with_ghosts[block, 1:-1]
        weight = ((faces - middles[:-1]) / np.diff(middles))[:, None]
        cells = haloed[block, 1:-1, :, 1:-1].astype(np.float64)
        return np.asarray((1 - weight) * cells[:, :-1] + weight * cells[:, 1:])

    return between_cells
