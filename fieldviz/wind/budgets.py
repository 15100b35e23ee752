"""Budgets of mass and angular momentum between the launching surfaces, with what does not close."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import meridional_mesh
from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.accretion import Accretion
from fieldviz.wind.column_places import SphereSums, rebinned
from fieldviz.wind.launch_surfaces import LaunchSurface
from fieldviz.wind.meridional_fluxes import FluxTables, excess_density
from fieldviz.wind.ring_means import ring_means
from fieldviz.wind.side_fluxes import Loss

__all__ = ["Budget", "angular_momentum_budget", "mass_budget", "storage"]

STEADY = "the change in time is taken as zero: no neighbouring snapshot was given"
REFERENCE = (
    "angular momentum is counted from that of the Kepler speed, sqrt(GM r) per mass: stresses are "
    "those of R v_phi - sqrt(GM r)"
)


@dataclass(frozen=True, eq=False)
class Budget:
    """Terms that should add up to zero; code units, for the wedge.

    Attributes
    ----------
    name : str
    radii : (n + 1,) array
        Edges of the bins.
    terms : mapping of str to (n,) array
        Each term in each bin. Without the change in time where none was given.
    reason : str
        Why the sum is NaN; empty where it is not.
    notes : tuple of str
    """

    name: str
    radii: Array
    terms: Mapping[str, Array]
    reason: str
    notes: tuple[str, ...]

    @property
    def totals(self) -> dict[str, float]:
        """Each term over all bins."""
        return {name: float(values.sum()) for name, values in self.terms.items()}

    @property
    def residual(self) -> float:
        """What remains of all bins."""
        return float(sum(self.totals.values()))

    @property
    def residual_bins(self) -> Array:
        """What remains in each bin, (n,)."""
        return np.asarray(np.sum(list(self.terms.values()), axis=0))

    @property
    def share(self) -> float:
        """Size of the residual over that of the largest term; NaN if all are zero."""
        largest = max(abs(value) for value in self.totals.values())
        return abs(self.residual) / largest if largest > 0 else float("nan")

    @property
    def sentence(self) -> str:
        """In one sentence."""
        if self.reason:
            return f"{self.name} budget: not closed, {self.reason}"
        parts = ", ".join(f"{name} {value:.4g}" for name, value in self.totals.items())
        return (
            f"{self.name} budget, r = {self.radii[0]:.4g} to {self.radii[-1]:.4g}: {parts}; "
            f"residual {self.residual:.3g}, {100 * self.share:.3g} % of the largest term"
        )


def storage(
    snapshot: Snapshot,
    surface: LaunchSurface,
    radii: Array,
    before: Snapshot | None,
    after: Snapshot | None,
) -> tuple[dict[str, Array], str]:
    """Change per time of mass and of excess angular momentum between the surfaces, by bin.

    Parameters
    ----------
    snapshot : Snapshot
    surface : LaunchSurface
        Of this snapshot; it is held fixed.
    radii : (n + 1,) array
    before, after : Snapshot or None
        Neighbours in time; a missing one is replaced by the snapshot itself.

    Returns
    -------
    dict, str
        "mass" and "excess", empty without neighbours; and a note.

    Raises
    ------
    FieldvizError
        If the times do not increase, or a neighbour covers other radii.
    """
    if before is None and after is None:
        return {}, STEADY
    early, late = before or snapshot, after or snapshot
    if not late.time > early.time:
        raise FieldvizError(
            f"Cannot work out the change in time: expected times that increase, got {early.time} "
            f"and {late.time}; give snapshots of other times as before and after."
        )
    span = late.time - early.time
    first, last = (_contents(one, surface, radii) for one in (early, late))
    change = {name: (last[name] - first[name]) / span for name in first if name in last}
    return change, f"the change in time is that from t = {early.time:.6g} to {late.time:.6g}"


def _contents(snapshot: Snapshot, surface: LaunchSurface, radii: Array) -> dict[str, Array]:
    """Mass and excess angular momentum between fixed surfaces, by bin."""
    low, high = snapshot.grid.r_range
    if low > radii[0] or high < radii[-1] or not snapshot.has("density"):
        raise FieldvizError(
            f"Cannot work out the change in time: expected a neighbour with density from r = "
            f"{radii[0]:.6g} to {radii[-1]:.6g}, got one from {low:.6g} to {high:.6g} with "
            f"{', '.join(snapshot.cell_names)}."
        )
    mesh = meridional_mesh(snapshot.grid)
    names = ["mass", "excess"] if snapshot.has("velocity_phi") else ["mass"]

    def values(block: int) -> tuple[Array, list[Array]]:
        mass = snapshot.cell_block("density", block).astype(np.float64)
        found = [mass, excess_density(snapshot, block)] if len(names) > 1 else [mass]
        return mass > 0, found

    means, _ = ring_means(snapshot, mesh, names, values)
    limits = [np.interp(mesh.r, centres(side.r_edges), side.theta) for side in surface.sides]
    found = {}
    for name, table in means.items():
        sums = SphereSums(mesh.theta_edges, table * mesh.volumes)
        found[name] = rebinned(sums.between(*limits), mesh.r_edges, radii)
    return found


def mass_budget(accretion: Accretion, wind: Loss, change: Mapping[str, Array], note: str) -> Budget:
    """dM/dt - [Mdot_acc(r2) - Mdot_acc(r1)] + Mdot_u + Mdot_d = 0.

    Parameters
    ----------
    accretion : Accretion
        At the edges of the bins.
    wind : Loss
        Mass loss in the bins.
    change, note
        As `storage` gives them.

    Returns
    -------
    Budget
    """
    terms = {"change in time": change["mass"]} if "mass" in change else {}
    terms |= {
        "gain by accretion": -np.diff(accretion.rate),
        "upper wind": wind.upper.bins,
        "lower wind": wind.lower.bins,
    }
    reason = accretion.reason or wind.reason
    return Budget("mass", accretion.r, terms, reason or _unfinished(terms), (note,))


def angular_momentum_budget(
    snapshot: Snapshot,
    tables: FluxTables,
    surface: LaunchSurface,
    accretion: Accretion,
    torques: Mapping[str, Loss],
    change: Mapping[str, Array],
    note: str,
) -> Budget:
    """Mdot_acc d(sqrt(GM r)) = d(int R T_rphi dA_r) + wind torque + change in time.

    Parameters
    ----------
    snapshot : Snapshot
    tables : FluxTables
    surface : LaunchSurface
    accretion : Accretion
        At the edges of the bins.
    torques : mapping
        "excess_torque" and "magnetic_torque" in the bins.
    change, note
        As `storage` gives them.

    Returns
    -------
    Budget
        The part of accretion is negative: it brings angular momentum in. Without a magnetic field
        its terms are NaN, and so is the residual.

    Notes
    -----
    With T the flux of R v_phi - sqrt(GM r) and of the field, this follows from the conservation of
    mass and of angular momentum exactly, whatever the rotation.
    """
    radii = accretion.r
    kepler = np.sqrt(snapshot.gm * radii)
    rate = 0.5 * (accretion.rate[1:] + accretion.rate[:-1])
    terms = {"accretion": -rate * np.diff(kepler)}
    for name, words in (("excess_torque", "gas"), ("magnetic_torque", "field")):
        terms[f"radial stress of {words}"] = _radial(tables, surface, name, radii)
    for name, words in (("excess_torque", "gas"), ("magnetic_torque", "field")):
        for side, flux in zip(surface.sides, torques[name].sides, strict=True):
            terms[f"{side.side} wind, {words}"] = flux.bins
    if "excess" in change:
        terms["change in time"] = change["excess"]
    reasons = [torques[name].reason for name in ("excess_torque", "magnetic_torque")]
    reason = accretion.reason or "; ".join(dict.fromkeys(reason for reason in reasons if reason))
    return Budget("angular momentum", radii, terms, reason or _unfinished(terms), (note, REFERENCE))


def _radial(tables: FluxTables, surface: LaunchSurface, name: str, radii: Array) -> Array:
    """Difference between spheres of the outward flux between the surfaces, by bin."""
    if name in tables.reasons:
        return np.full(len(radii) - 1, np.nan)
    sums = SphereSums.of_flux(tables.mesh, tables.radial[name])
    upper, lower = (side.on_edges for side in surface.sides)
    flux = np.interp(radii, tables.mesh.r_edges, sums.between(upper, lower))
    return np.asarray(np.diff(flux))


def _unfinished(terms: Mapping[str, Array]) -> str:
    bad = [name for name, values in terms.items() if not np.isfinite(values).all()]
    return f"no number somewhere in: {', '.join(bad)}" if bad else ""
