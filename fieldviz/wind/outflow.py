"""What the wind takes from the disc: mass, angular momentum and energy, with its budgets."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from fieldviz.derived.azimuth_sums import meridional_mesh
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.accretion import (
    MIDPLANE_LAYER,
    NEGLIGIBLE,
    Accretion,
    EjectionIndex,
    accretion,
    ejection_index,
)
from fieldviz.wind.budgets import angular_momentum_budget, mass_budget, storage
from fieldviz.wind.domain_fluxes import edge_flux, sphere_flux
from fieldviz.wind.inclination import Inclination, inclination
from fieldviz.wind.launch_surfaces import LaunchSurface, Surface, launch_surface, moved_surface
from fieldviz.wind.meridional_fluxes import (
    ABSENT_GAMMA,
    QUANTITIES,
    FluxTables,
    flux_tables,
)
from fieldviz.wind.outflow_result import LeverArm, Outflow, SurfaceRepeat
from fieldviz.wind.side_fluxes import Loss, loss_through, sum_of_losses

__all__ = ["LeverArm", "Outflow", "SurfaceRepeat", "outflow"]

_WORK = "measure the outflow"
_TORQUE = ("kinetic_torque", "magnetic_torque")


def outflow(
    snapshot: Snapshot,
    surface: Surface = 4.0,
    *,
    radii: Array | tuple[float, float] | None = None,
    thickness: float | None = None,
    midplane_height: float = MIDPLANE_LAYER,
    fit_range: tuple[float, float] | None = None,
    before: Snapshot | None = None,
    after: Snapshot | None = None,
) -> Outflow:
    """Measure what leaves through launching surfaces, and what falls in between them.

    Parameters
    ----------
    snapshot : Snapshot
        `density` and velocity for mass and all that goes with it, `magnetic_*` for the torque of
        the field and the Poynting flux, `pressure` and `gamma` for the enthalpy.
    surface : float, str or (str, float)
        As of `launch_surface`: cones at so many H, "outflow", "slow", "sonic", "beta", or a field
        and its value.
    radii : (float, float) or (n + 1,) array, optional
        A range, with all faces of the grid within it as edges of the bins, or the edges of the bins
        themselves; the whole grid by default.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    midplane_height : float
        Height in H that parts the midplane's accretion from that of the surface layers.
    fit_range : (float, float), optional
        Radii for the ejection index; those of `radii` by default.
    before, after : Snapshot, optional
        Neighbours in time for the change of mass and angular momentum; else it is taken as zero.

    Returns
    -------
    Outflow

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    All is worked out from azimuth means of the flux densities, one block at a time; across a level
    jump the columns are those of the finer level. Ejection: Ferreira & Pelletier 1995.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.wind.outflow import outflow
    >>> found = outflow(fv.demo_disc(shape=(2, 64, 48)), 5.0)
    >>> round(found.lower / found.upper, 6)
    1.0
    """
    if not (snapshot.has("density", *VELOCITY) or snapshot.has(*MAGNETIC)):
        raise MissingFieldError(
            f"Cannot {_WORK}: expected density and velocity, or a magnetic field, got a snapshot "
            f"with {', '.join(sorted(snapshot.cell_names)) or 'no fields'}; map them in a layout "
            "description."
        )
    found = launch_surface(snapshot, surface, thickness=thickness)
    mesh = meridional_mesh(snapshot.grid)
    tables = flux_tables(snapshot, mesh, _slopes(found))
    bins = _bins(mesh.r_edges, radii)
    losses = {name: loss_through(tables, found, name, bins) for name in QUANTITIES}
    falling = accretion(tables, found, bins, midplane_height=midplane_height)
    change, note = storage(snapshot, found, bins, before, after)
    parts = _energy_parts(losses)
    sums = {
        "mass": ("mass",),
        "torque": _TORQUE,
        "energy": tuple(parts),
    }
    leaning = _inclination(snapshot, found, bins)
    repeats = tuple(_repeat(snapshot, tables, found, bins, by) for by in (-1.0, 1.0))
    return Outflow(
        snapshot.time,
        found,
        losses["mass"],
        losses["kinetic_torque"],
        losses["magnetic_torque"],
        sum_of_losses("torque", [losses[name] for name in _TORQUE]),
        sum_of_losses("energy", list(parts.values())),
        parts,
        repeats,
        {name: sphere_flux(tables, found, its, bins) for name, its in sums.items()},
        {name: edge_flux(tables, its) for name, its in sums.items()},
        falling,
        _ejection(falling, losses["mass"], tables, found, fit_range),
        _lever_arm(losses),
        mass_budget(falling, losses["mass"], change, note),
        angular_momentum_budget(snapshot, tables, found, falling, losses, change, note),
        leaning,
        2 * np.pi / snapshot.grid.period,
        snapshot.grid.azimuth_sentence,
        _notes(snapshot, tables, found, leaning, repeats, note),
    )


def _bins(edges: Array, radii: Array | tuple[float, float] | None) -> Array:
    if radii is None:
        return edges
    wanted = np.asarray(radii, dtype=np.float64)
    inner, outer = edges[0], edges[-1]
    good = wanted.ndim == 1 and len(wanted) > 1 and np.all(np.diff(wanted) > 0)
    if not good or wanted[0] < inner * (1 - 1e-12) or wanted[-1] > outer * (1 + 1e-12):
        raise FieldvizError(
            f"Cannot {_WORK}: expected increasing radii within {inner:.6g} to {outer:.6g}, got "
            f"{np.array2string(wanted, threshold=6)}; choose radii inside."
        )
    wanted = np.clip(wanted, inner, outer)
    if len(wanted) > 2:
        return wanted
    near = 1e-9 * np.diff(edges).min()
    within = edges[(edges > wanted[0] + near) & (edges < wanted[1] - near)]
    return np.concatenate([wanted[:1], within, wanted[1:]])


def _slopes(surface: LaunchSurface) -> tuple[Array, Array] | None:
    """Slopes of both sides; None for cones."""
    slopes = (surface.upper.slope, surface.lower.slope)
    return slopes if any(np.any(np.nan_to_num(s)) for s in slopes) else None


def _energy_parts(losses: Mapping[str, Loss]) -> dict[str, Loss]:
    """Parts that add up to the energy; the enthalpy only with gamma."""
    names = ["kinetic_energy", "gravity", "poynting"]
    if losses["enthalpy"].reason != ABSENT_GAMMA:
        names.append("enthalpy")
    return {name: losses[name] for name in names}


def _repeat(
    snapshot: Snapshot, tables: FluxTables, surface: LaunchSurface, bins: Array, by: float
) -> SurfaceRepeat:
    nothing = (np.nan, np.nan)
    try:
        moved = moved_surface(snapshot, surface, by)
    except FieldvizError as error:
        return SurfaceRepeat(by, "", False, nothing, nothing, nothing, str(error))
    losses = {name: loss_through(tables, moved, name, bins) for name in QUANTITIES}

    def both(names: tuple[str, ...]) -> tuple[float, float]:
        return (
            float(sum(losses[name].upper.net for name in names)),
            float(sum(losses[name].lower.net for name in names)),
        )

    energy = both(tuple(_energy_parts(losses)))
    return SurfaceRepeat(by, moved.label, moved.clipped, both(("mass",)), both(_TORQUE), energy)


def _ejection(
    falling: Accretion,
    mass: Loss,
    tables: FluxTables,
    surface: LaunchSurface,
    fit_range: tuple[float, float] | None,
) -> EjectionIndex:
    """The index over the bins, or over its own range on all faces within that."""
    if fit_range is None:
        return ejection_index(falling.r, falling.rate, wind=mass)
    bins = _bins(tables.mesh.r_edges, fit_range)
    rate = accretion(tables, surface, bins).rate
    return ejection_index(bins, rate, wind=loss_through(tables, surface, "mass", bins))


def _lever_arm(losses: Mapping[str, Loss]) -> LeverArm:
    """Angular momentum over what the same mass would have at Kepler's speed."""

    def ratio(side: str) -> tuple[float, float, float]:
        torque, gas, excess, mass = (
            getattr(losses[name], side).net
            for name in ("magnetic_torque", "kinetic_torque", "excess_torque", "mass")
        )
        return torque + gas, gas - excess, mass

    found, notes = [], []
    pairs = {side: ratio(side) for side in ("upper", "lower")}
    pairs["total"] = tuple(a + b for a, b in zip(pairs["upper"], pairs["lower"], strict=True))  # type: ignore[assignment]
    largest = np.nanmax([abs(p[2]) for p in pairs.values()] + [0.0])
    for side, (torque, kepler, mass) in pairs.items():
        if np.isnan(mass) or mass <= NEGLIGIBLE * largest:
            found.append(np.nan)
            notes.append(f"no lever arm ({side}): no mass loss there")
        else:
            found.append(torque / kepler)
    return LeverArm(found[0], found[1], found[2], tuple(notes))


def _inclination(snapshot: Snapshot, surface: LaunchSurface, bins: Array) -> Inclination | None:
    needed = ("density", "velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta")
    if not snapshot.has(*needed):
        return None
    return inclination(snapshot, surface, radii=(float(bins[0]), float(bins[-1])))


def _notes(
    snapshot: Snapshot,
    tables: FluxTables,
    surface: LaunchSurface,
    leaning: Inclination | None,
    repeats: tuple[SurfaceRepeat, ...],
    change: str,
) -> tuple[str, ...]:
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}; times "
        f"{2 * np.pi / snapshot.grid.period:.6g} for the full disc",
        *surface.notes,
        "fluxes are azimuth means of products cell by cell, linear in theta between cells",
        change,
        *tables.notes,
    ]
    for name, reason in tables.reasons.items():
        words = "left out of the energy" if reason == ABSENT_GAMMA else "NaN"
        notes.append(f"{name.replace('_', ' ')} is {words}: {reason}")
    if leaning is None:
        notes.append("no inclination: it needs density, velocity and the poloidal field")
    for repeat in repeats:
        if repeat.reason:
            notes.append(f"not repeated {repeat.moved:+g} H away: {repeat.reason}")
        elif repeat.clipped:
            notes.append(f"the surface moved by {repeat.moved:+g} H was clipped to the grid")
    return tuple(notes)
