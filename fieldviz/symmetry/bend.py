"""Averages over each side of the wind, and the accretion that gives outflow and torque a scale."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.surfaces import MatchedCones

__all__ = ["SideAverages", "side_averages"]

_MIDPLANE = 0.5 * np.pi
_SIDES = (("upper", 1), ("lower", -1))


@dataclass(frozen=True)
class SideAverages:
    """Sums of one pass over the blocks.

    Attributes
    ----------
    bend : ((n_bands,) array, (n_bands,) array)
        Mean v_R of leaving gas above and below, by band; NaN where none leaves.
    bend_total : (float, float)
    kepler_speed : float
        Mean Kepler speed of the same cells.
    accretion_rate, accretion_torque : float
        Inflow between the cones, averaged over radius, and with the Kepler angular momentum.
    share_outside : float
        Share of |rho v_p| beyond the angle both sides reach.
    notes : tuple of str
    """

    bend: tuple[Array, Array]
    bend_total: tuple[float, float]
    kepler_speed: float
    accretion_rate: float
    accretion_torque: float
    share_outside: float
    notes: tuple[str, ...]


@dataclass
class _Sums:
    """Running sums; the last axis of the side arrays is the band."""

    weight: Array
    radial_speed: Array
    kepler: float = 0.0
    inflow: float = 0.0
    torque: float = 0.0
    inside: float = 0.0
    outside: float = 0.0
    left_out: int = 0


def side_averages(snapshot: Snapshot, cones: MatchedCones, band_edges: Array) -> SideAverages:
    """Go once over all blocks; see `SideAverages`."""
    shape = (2, len(band_edges) - 1)
    sums = _Sums(np.zeros(shape), np.zeros(shape))
    for block in range(snapshot.grid.n_blocks):
        _add_block(sums, snapshot, block, cones, band_edges)
    with np.errstate(invalid="ignore", divide="ignore"):
        bend = sums.radial_speed / sums.weight
        total = sums.radial_speed.sum(1) / sums.weight.sum(1)
    length = band_edges[-1] - band_edges[0]
    notes = [
        f"no gas moves away from the midplane on the {name} side: it counts as zero"
        for side, (name, _) in enumerate(_SIDES)
        if sums.weight[side].sum() == 0
    ]
    if sums.left_out:
        notes.append(f"{sums.left_out} cells with NaN or infinite values were left out")
    leaving = sums.weight.sum()
    return SideAverages(
        (bend[0], bend[1]),
        (float(total[0]), float(total[1])),
        sums.kepler / leaving if leaving else 0.0,
        sums.inflow / length,
        sums.torque / length,
        sums.outside / (sums.inside + sums.outside) if sums.outside else 0.0,
        tuple(notes),
    )


def _add_block(
    sums: _Sums, snapshot: Snapshot, block: int, cones: MatchedCones, band_edges: Array
) -> None:
    r, theta, _ = snapshot.grid.cell_centres(block)
    band = np.searchsorted(band_edges, r, side="right") - 1
    used = (band >= 0) & (band < len(band_edges) - 1)
    if not used.any():
        return
    names = ("density", "velocity_r", "velocity_theta")
    density, v_r, v_theta = (
        snapshot.cell_block(name, block)[..., used].astype(np.float64) for name in names
    )
    bad = ~np.isfinite(density + v_r + v_theta)
    sums.left_out += int(bad.sum())
    mass = np.where(bad, 0.0, density * snapshot.grid.volumes(block)[..., used])
    v_r, v_theta = np.where(bad, 0.0, v_r), np.where(bad, 0.0, v_theta)
    height = _MIDPLANE - theta
    r, band = r[used], band[used]

    momentum = mass * np.hypot(v_r, v_theta)
    compared = np.abs(height) <= cones.reach
    sums.inside += float(momentum[:, compared].sum())
    sums.outside += float(momentum[:, ~compared].sum())

    disc = np.abs(height) < cones.angle
    radial = -(mass * v_r)[:, disc].sum((0, 1))
    sums.inflow += float(radial.sum())
    sums.torque += float((radial * np.sqrt(snapshot.gm * r)).sum())

    v_R, v_z = cylindrical_components(v_r, v_theta, theta[:, None])
    kepler = np.sqrt(snapshot.gm / (r * np.sin(theta)[:, None]))
    for side, (_, sign) in enumerate(_SIDES):
        rows = compared & (sign * height > cones.angle)
        weight = np.where(sign * v_z > 0, momentum, 0.0)[:, rows]
        sums.kepler += float((weight * kepler[rows]).sum())
        for n in range(len(band_edges) - 1):
            mine = band == n
            sums.weight[side, n] += weight[..., mine].sum()
            sums.radial_speed[side, n] += (weight * v_R[:, rows])[..., mine].sum()
