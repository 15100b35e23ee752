"""Sums over each side of the wind by azimuth and radius, in one pass over the blocks.

Everything the three pairs and their errors are made of: a numerator and a denominator for each
side, bin of azimuth and band of radius.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from fieldviz.symmetry.jackknife import N_BLOCKS
from fieldviz.symmetry.theta_hats import theta_hats
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray
from fieldviz.wind.chunks import by_chunks, same_type
from fieldviz.wind.surfaces import MatchedCones

__all__ = ["SideSums", "azimuth_bins", "side_sums"]

_MIDPLANE = 0.5 * np.pi
_MOST_BINS = 64
_ROUNDING = 1e-12
SIDES = (("upper", 1), ("lower", -1))
# Flux density across a cone in some rows, and which cells of them are numbers.
Flux = Callable[[IntArray], tuple[Array, Array]]


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
        self.band = np.where((band >= 0) & (band < len(band_edges) - 1), band, -1)
        self.hats = [
            (side, cone, *hat)
            for side, cone in enumerate((cones.upper, cones.lower))
            for hat in theta_hats(self.grid, block, np.array([cone]))
        ]
        # Volumes per radian of azimuth.
        self.volumes = self.grid.volumes(block)[0] / (phi_edges[1] - phi_edges[0])

    def fields(self, *names: str) -> list[Array]:
        return [self.snapshot.cell_block(name, self.block) for name in names]

    def add_to(self, sums: SideSums) -> None:
        names = ["density", "velocity_r", "velocity_theta"]
        names += ["magnetic_r", "magnetic_theta"] if "lean" in sums.numerators else []
        fields = same_type(self.fields(*names))
        self._planes(sums, fields)
        self._cones(sums, "outflow", self._mass_flux(fields))
        if "torque" in sums.numerators:
            south = fields[4] if len(fields) > 4 else self.fields("magnetic_theta")[0]
            south, around = same_type([south, *self.fields("magnetic_phi")])
            sums.left_out["field"] += self._unknown(south, around)
            self._cones(sums, "torque", self._torque(south, around))

    def _unknown(self, first: Array, second: Array) -> int:
        """Cells in bands where one of two fields is no number."""
        from fieldviz.symmetry._kernels import unknown_cells

        def work(start: int, stop: int) -> int:
            count: int = unknown_cells(first, second, start, stop, self.band)
            return count

        return int(by_chunks(len(first), first.size, work))

    def _planes(self, sums: SideSums, fields: tuple[Array, ...]) -> None:
        """Add all but what crosses the cones; one set of numbers for each azimuth."""
        from fieldviz.symmetry._kernels import side_planes

        n_phi, n_theta, n_r = self.grid.block_shape
        n_bands = sums.numerators["bend"].shape[-1]
        found, totals = np.zeros((n_phi, 2, 5, n_bands)), np.zeros((n_phi, 4))
        angle, reach = self.cones.angle, self.cones.reach
        shares = np.array([self._share_between(angle, reach, sign) for _, sign in SIDES])
        compared = self._share_between(0.0, reach, 1) + self._share_between(0.0, reach, -1)
        gm, lever = self.snapshot.gm, self.r * np.sin(self.theta)[:, None]

        def work(start: int, stop: int) -> int:
            left_out: int = side_planes(
                fields, start, stop, np.sin(self.theta), np.cos(self.theta), self.volumes,
                np.sqrt(gm / lever), np.sqrt(gm * self.r), self.band, np.abs(self.height) < angle,
                compared, shares, found, totals,
            )  # fmt: skip
            return left_out

        sums.left_out["gas"] += int(by_chunks(n_phi, n_phi * n_theta * n_r, work))
        widths = np.diff(self.grid.phi_edges[self.block])
        for name, value in zip(
            ("inflow", "inflow_torque", "inside", "outside"), widths @ totals, strict=True
        ):
            setattr(sums, name, getattr(sums, name) + float(value))
        binned = np.einsum("bk,ksqn->qbsn", self.azimuth, found)
        for name, place in (("bend", 0), ("lean", 3)):
            if name in sums.numerators:
                sums.numerators[name] += binned[place]
                sums.denominators[name] += binned[place + 1]
        sums.leaving += float(binned[1].sum())
        sums.kepler += float(binned[2].sum())

    def _mass_flux(self, fields: tuple[Array, ...]) -> Flux:
        def of_rows(rows: IntArray) -> tuple[Array, Array]:
            density, v_r, v_theta = (f[:, rows].astype(np.float64) for f in fields[:3])
            good = np.isfinite(density + v_r + v_theta)
            return np.where(good, density * v_theta, 0.0), good

        return of_rows

    def _torque(self, b_theta: Array, b_phi: Array) -> Flux:
        def of_rows(rows: IntArray) -> tuple[Array, Array]:
            south, around = (f[:, rows].astype(np.float64) for f in (b_theta, b_phi))
            good = np.isfinite(south + around)
            # -R B_theta B_phi/mu0 is the southward flux of angular momentum by the field.
            lever = -np.sin(self.theta[rows])[:, None] * self.r / self.snapshot.mu0
            return np.where(good, lever * south * around, 0.0), good

        return of_rows

    def _cones(self, sums: SideSums, name: str, southward: Flux) -> None:
        """Add what crosses the cones, from the rows beside them."""
        for side, theta, columns, hats in self.hats:
            every = hats.toarray()[0]
            rows = np.flatnonzero(every)
            flux, good = southward(rows)
            share, flux = (
                np.where(columns, np.einsum("j,kji->ki", every[rows], cells), 0.0)
                for cells in (good.astype(np.float64), flux)
            )
            # Northward, that is minus theta-hat, leads away from the midplane above it.
            outward = -SIDES[side][1] * np.sin(theta) * flux
            area = self.azimuth @ (share @ self.annuli)
            sums.numerators[name][:, side] += self.azimuth @ (outward @ self.annuli)
            sums.denominators[name][:, side] += area / (self.full_annuli * self.grid.period)

    def _share_between(self, low: float, high: float, sign: int) -> Array:
        """Share of each row's volume between two angles on one side of the midplane."""
        height = sign * np.cos(self.grid.theta_edges[self.block])
        within = np.clip(height, np.sin(low), np.sin(high))
        return np.asarray(np.abs(np.diff(within) / np.diff(height)))


def _overlap(pieces: Array, edges: Array) -> Array:
    """Common length of each cell and each piece, (n_cells, n_pieces)."""
    low = np.maximum(edges[:-1, None], pieces[:-1])
    high = np.minimum(edges[1:, None], pieces[1:])
    return np.asarray(np.clip(high - low, 0.0, None))
