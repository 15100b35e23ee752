"""Sums over each side of the wind by azimuth and radius, in one pass over the blocks.

Everything the three pairs and their errors are made of: a numerator and a denominator for each
side, bin of azimuth and band of radius.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from scipy.sparse import csr_array

from fieldviz.symmetry.jackknife import N_BLOCKS
from fieldviz.symmetry.theta_hats import theta_hats
from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.surfaces import MatchedCones

__all__ = ["SideSums", "azimuth_bins", "side_sums"]

_MIDPLANE = 0.5 * np.pi
_MOST_BINS = 64
_ROUNDING = 1e-12
SIDES = (("upper", 1), ("lower", -1))


@dataclass(eq=False)
class SideSums:
    """Sums of one snapshot, or weighted means of several.

    Attributes
    ----------
    numerators, denominators : dict of name to (n_bins, 2, n_bands) array
        "outflow" and "torque": flux, and share of the cone's band that it was summed over.
        "bend" and "lean": weighted sum, and weight.
    inflow, inflow_torque : float
        Inflow between the cones, averaged over radius, and with the Kepler angular momentum.
    kepler, leaving : float
        Kepler speed summed over the leaving gas, and its weight.
    inside, outside : float
        |rho v_p| up to the angle that both sides reach, and beyond.
    left_out : dict of name to int
        Cells that are no numbers.
    """

    numerators: dict[str, Array]
    denominators: dict[str, Array]
    inflow: float = 0.0
    inflow_torque: float = 0.0
    kepler: float = 0.0
    leaving: float = 0.0
    inside: float = 0.0
    outside: float = 0.0
    left_out: dict[str, int] = field(default_factory=lambda: {"gas": 0, "field": 0})

    @property
    def kepler_speed(self) -> float:
        """Mean Kepler speed of the leaving gas."""
        return self.kepler / self.leaving if self.leaving else 0.0

    @property
    def share_outside(self) -> float:
        """Share of |rho v_p| beyond the angle that both sides reach."""
        share = self.outside / (self.inside + self.outside) if self.outside else 0.0
        return share if share > _ROUNDING else 0.0

    def add(self, other: SideSums, weight: float) -> None:
        """Add `weight` times another one."""
        for name in self.numerators:
            self.numerators[name] = self.numerators[name] + weight * other.numerators[name]
            self.denominators[name] = self.denominators[name] + weight * other.denominators[name]
        for name in ("inflow", "inflow_torque", "kepler", "leaving", "inside", "outside"):
            setattr(self, name, getattr(self, name) + weight * getattr(other, name))
        for name, count in other.left_out.items():
            self.left_out[name] += count

    @classmethod
    def nothing(cls, names: tuple[str, ...], n_bins: int, n_bands: int) -> SideSums:
        """Zeros."""
        shape = (n_bins, 2, n_bands)
        return cls({n: np.zeros(shape) for n in names}, {n: np.zeros(shape) for n in names})


def azimuth_bins(grid: WedgeGrid) -> int:
    """Choose how many even bins azimuth is cut into.

    Up to 64, a multiple of 8 where there are as many cells, and on edges of the coarsest cells if
    their number allows.
    """
    widest = float(np.diff(grid.phi_edges, axis=1).max())
    n = max(1, round(grid.period / widest))
    if n < N_BLOCKS:
        return n
    counts = range(N_BLOCKS, min(n, _MOST_BINS) + 1, N_BLOCKS)
    on_edges = [count for count in counts if n % count == 0]
    return (on_edges or list(counts))[-1]


def side_sums(snapshot: Snapshot, cones: MatchedCones, band_edges: Array, n_bins: int) -> SideSums:
    """Go once over all blocks; one block of the fields is in memory at a time.

    Parameters
    ----------
    snapshot : Snapshot
        With density and velocity; the field where it has one.
    cones : MatchedCones
    band_edges : (n_bands + 1,) array
    n_bins : int
        From `azimuth_bins`.

    Returns
    -------
    SideSums
        "torque" where there are B_theta and B_phi, "lean" with all of B.
    """
    names: tuple[str, ...] = ("outflow", "bend")
    if snapshot.has("magnetic_theta", "magnetic_phi"):
        names += ("torque",)
    if snapshot.has(*MAGNETIC):
        names += ("lean",)
    sums = SideSums.nothing(names, n_bins, len(band_edges) - 1)
    for block in range(snapshot.grid.n_blocks):
        r_edges = snapshot.grid.r_edges[block]
        if r_edges[-1] > band_edges[0] and r_edges[0] < band_edges[-1]:
            _BlockPass(snapshot, block, cones, band_edges, n_bins).add_to(sums)
    length = float(band_edges[-1] - band_edges[0])
    sums.inflow /= length
    sums.inflow_torque /= length
    return sums


class _BlockPass:
    """One block: its fields, and how its cells lie in bins and bands."""

    def __init__(
        self, snapshot: Snapshot, block: int, cones: MatchedCones, band_edges: Array, n_bins: int
    ):
        self.snapshot, self.block, self.cones = snapshot, block, cones
        self.grid = snapshot.grid
        self.r, self.theta, _ = self.grid.cell_centres(block)
        self.height = _MIDPLANE - self.theta
        r_edges, _, phi_edges = self.grid.edges(block)
        bins = self.grid.phi_range[0] + self.grid.period * np.arange(n_bins + 1) / n_bins
        self.azimuth = _overlap(bins, phi_edges).T  # (n_bins, n_phi), radians
        self.annuli = _overlap(band_edges**2 / 2, r_edges**2 / 2)  # (n_r, n_bands)
        self.full_annuli = np.diff(band_edges**2 / 2)
        band = np.searchsorted(band_edges, self.r, side="right") - 1
        self.in_band = (band[:, None] == np.arange(len(band_edges) - 1)).astype(np.float64)
        self.hats = [
            (side, cone, *hat)
            for side, cone in enumerate((cones.upper, cones.lower))
            for hat in theta_hats(self.grid, block, np.array([cone]))
        ]
        # Volumes per radian of azimuth.
        self.volumes = self.grid.volumes(block)[0] / (phi_edges[1] - phi_edges[0])

    def fields(self, *names: str) -> list[Array]:
        return [
            self.snapshot.cell_block(name, self.block).astype(np.float64, copy=False)
            for name in names
        ]

    def add_to(self, sums: SideSums) -> None:
        density, v_r, v_theta = self.fields("density", "velocity_r", "velocity_theta")
        good = np.isfinite(density + v_r + v_theta)
        used = self.in_band.any(1)
        sums.left_out["gas"] += int(np.count_nonzero(~good[..., used]))
        if not good.all():
            density, v_r, v_theta = (np.where(good, f, 0.0) for f in (density, v_r, v_theta))
        self._cones(sums, "outflow", density * v_theta, good)
        mass = density * self.volumes
        self._accretion(sums, mass * v_r)
        weights = self._bend(sums, mass, v_r, v_theta)
        if "torque" in sums.numerators:
            b_theta, b_phi = self.fields("magnetic_theta", "magnetic_phi")
            good = np.isfinite(b_theta + b_phi)
            sums.left_out["field"] += int(np.count_nonzero(~good[..., used]))
            # -R B_theta B_phi/mu0 is the southward flux of angular momentum by the field.
            lever = -np.sin(self.theta)[:, None] * self.r / self.snapshot.mu0
            self._cones(sums, "torque", np.where(good, lever * b_theta * b_phi, 0.0), good)
            if "lean" in sums.numerators:
                self._lean(sums, weights, self.fields("magnetic_r")[0], b_theta)

    def _binned(self, per_cell: Array) -> Array:
        """Sum a density per radian over bins and bands, (n_bins, n_bands)."""
        return np.asarray(self.azimuth @ per_cell.sum(1) @ self.in_band)

    def _cones(self, sums: SideSums, name: str, southward: Array, good: Array) -> None:
        for side, theta, columns, weights in self.hats:
            share = np.where(columns, _at(weights, good.astype(np.float64)), 0.0)
            flux = np.where(columns, _at(weights, southward), 0.0)
            # Northward, that is minus theta-hat, leads away from the midplane above it.
            outward = -SIDES[side][1] * np.sin(theta) * flux
            area = self.azimuth @ share @ self.annuli
            sums.numerators[name][:, side] += self.azimuth @ outward @ self.annuli
            sums.denominators[name][:, side] += area / (self.full_annuli * self.grid.period)

    def _accretion(self, sums: SideSums, momentum_r: Array) -> None:
        disc = np.abs(self.height) < self.cones.angle
        widths = np.diff(self.grid.phi_edges[self.block])
        radial = -np.einsum("k,kji,j,i->i", widths, momentum_r, disc, self.in_band.sum(1))
        sums.inflow += float(radial.sum())
        sums.inflow_torque += float((radial * np.sqrt(self.snapshot.gm * self.r)).sum())

    def _bend(self, sums: SideSums, mass: Array, v_r: Array, v_theta: Array) -> list[Array]:
        """Add the bend; return the weights of leaving gas on each side."""
        momentum = mass * np.hypot(v_r, v_theta)
        compared = self._share_between(0.0, self.cones.reach, 1)
        compared += self._share_between(0.0, self.cones.reach, -1)
        widths = np.diff(self.grid.phi_edges[self.block])
        per_row = np.einsum("k,kji,i->j", widths, momentum, self.in_band.sum(1))
        sums.inside += float(per_row @ compared)
        sums.outside += float(per_row @ np.clip(1 - compared, 0.0, 1.0))
        v_R, v_z = cylindrical_components(v_r, v_theta, self.theta[:, None])
        kepler = np.sqrt(self.snapshot.gm / (self.r * np.sin(self.theta)[:, None]))
        weights = []
        for side, (_, sign) in enumerate(SIDES):
            share = self._share_between(self.cones.angle, self.cones.reach, sign)[:, None]
            weight = np.where(sign * v_z > 0, share * momentum, 0.0)
            sums.numerators["bend"][:, side] += self._binned(weight * v_R)
            there = self._binned(weight)
            sums.denominators["bend"][:, side] += there
            sums.leaving += float(there.sum())
            sums.kepler += float(self._binned(weight * kepler).sum())
            weights.append(weight)
        return weights

    def _share_between(self, low: float, high: float, sign: int) -> Array:
        """Share of each row's volume between two angles on one side of the midplane."""
        height = sign * np.cos(self.grid.theta_edges[self.block])
        within = np.clip(height, np.sin(low), np.sin(high))
        return np.asarray(np.abs(np.diff(within) / np.diff(height)))

    def _lean(self, sums: SideSums, weights: list[Array], b_r: Array, b_theta: Array) -> None:
        """Angle of the poloidal field from the vertical, outward positive on either side."""
        b_R, b_z = cylindrical_components(b_r, b_theta, self.theta[:, None])
        for side, (_, sign) in enumerate(SIDES):
            angle = np.degrees(np.arctan2(sign * b_R * np.where(b_z < 0, -1.0, 1.0), np.abs(b_z)))
            weight = np.where(np.isfinite(angle), weights[side], 0.0)
            angle = np.where(np.isfinite(angle), angle, 0.0)
            sums.numerators["lean"][:, side] += self._binned(weight * angle)
            sums.denominators["lean"][:, side] += self._binned(weight)


def _at(weights: csr_array, cells: Array) -> Array:
    """Interpolate (n_phi, n_theta, n_r) cells to one colatitude, (n_phi, n_r)."""
    row = weights.toarray()[0]
    used = np.flatnonzero(row)
    return np.asarray(np.einsum("j,kji->ki", row[used], cells[:, used]))


def _overlap(pieces: Array, edges: Array) -> Array:
    """Common length of each cell and each piece, (n_cells, n_pieces)."""
    low = np.maximum(edges[:-1, None], pieces[:-1])
    high = np.minimum(edges[1:, None], pieces[1:])
    return np.asarray(np.clip(high - low, 0.0, None))
