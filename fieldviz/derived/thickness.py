"""How thick the disc is: H/R from the midplane sound speed, or from the density's spread."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.shared import once
from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["Thickness", "disc_thickness"]

_MIDPLANE = 0.5 * np.pi


@dataclass(frozen=True)
class Thickness:
    """H/R of the disc.

    Attributes
    ----------
    h : float
        Median over ln r.
    spread : (float, float)
        16 and 84 percent of its distribution over ln r.
    source : str
        What it was worked out from, in words.
    """

    h: float
    spread: tuple[float, float]
    source: str


def disc_thickness(snapshot: Snapshot) -> Thickness:
    """H/R with H = c_s/Omega_K and c_s^2 = P/rho at the midplane.

    Without pressure it is the density-weighted spread of theta about the midplane, within three
    of its own widths.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`; `pressure` if it is there.

    Returns
    -------
    Thickness

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Common practice, no source. The two ways agree for a vertically isothermal disc.
    """
    return once(snapshot, "thickness", lambda: _measured(snapshot))


def _measured(snapshot: Snapshot) -> Thickness:
    snapshot.require("work out the disc's thickness", "density")
    if snapshot.has("pressure"):
        h, weight = _from_pressure(snapshot)
        source = "midplane sound speed"
    else:
        h, weight = _from_density(snapshot)
        source = "spread of the density (the snapshot has no pressure)"
    good = np.isfinite(h) & (h > 0)
    if not good.any():
        raise FieldvizError(
            "Cannot work out the disc's thickness: expected positive density and pressure at the "
            "midplane, got none; give the thickness H/R yourself."
        )
    low, middle, high = _weighted_percentiles(h[good], weight[good], (0.16, 0.5, 0.84))
    return Thickness(middle, (low, high), source)


def _midplane_blocks(snapshot: Snapshot) -> Array:
    edges = snapshot.grid.theta_edges
    found = np.flatnonzero((edges[:, 0] <= _MIDPLANE) & (edges[:, -1] >= _MIDPLANE))
    if not found.size:
        raise FieldvizError(
            "Cannot work out the disc's thickness: expected a wedge that holds the midplane "
            f"theta = pi/2, got colatitudes {snapshot.grid.theta_range[0]:.4g} to "
            f"{snapshot.grid.theta_range[1]:.4g}; give the thickness H/R yourself."
        )
    return found


def _from_pressure(snapshot: Snapshot) -> tuple[Array, Array]:
    values, weights = [], []
    for block in _midplane_blocks(snapshot):
        r, theta, _ = snapshot.grid.cell_centres(block)
        row = int(np.argmin(np.abs(theta - _MIDPLANE)))
        density = snapshot.cell_block("density", block)[:, row].sum(0, dtype=np.float64)
        pressure = snapshot.cell_block("pressure", block)[:, row].sum(0, dtype=np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            values.append(np.sqrt(pressure / density * r / snapshot.gm))
        weights.append(_log_weight(snapshot, block))
    return np.concatenate(values), np.concatenate(weights)


def _from_density(snapshot: Snapshot) -> tuple[Array, Array]:
    mass, angle = [], []
    for block in range(snapshot.grid.n_blocks):
        theta = snapshot.grid.cell_centres(block)[1] - _MIDPLANE
        weight = snapshot.cell_block("density", block) * snapshot.grid.volumes(block)
        mass.append(np.nansum(weight, axis=(0, 2)))
        angle.append(theta)
    m, x = np.concatenate(mass), np.concatenate(angle)
    h = np.inf
    for _ in range(50):
        near = np.abs(x) < 3 * h
        update = float(np.sqrt(np.sum(m[near] * x[near] ** 2) / np.sum(m[near])))
        if abs(update - h) < 1e-6 * update:
            break
        h = update
    return np.array([update]), np.ones(1)


def _log_weight(snapshot: Snapshot, block: int) -> Array:
    r_edges, _, phi_edges = snapshot.grid.edges(block)
    inner = np.maximum(r_edges, 1e-12 * r_edges[-1])
    return np.diff(np.log(inner)) * (phi_edges[-1] - phi_edges[0])


def _weighted_percentiles(values: Array, weights: Array, shares: tuple[float, ...]) -> list[float]:
    order = np.argsort(values)
    sorted_values, cumulative = values[order], np.cumsum(weights[order])
    middles = (cumulative - 0.5 * weights[order]) / cumulative[-1]
    return [float(v) for v in np.interp(shares, middles, sorted_values)]
