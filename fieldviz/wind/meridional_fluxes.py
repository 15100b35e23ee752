"""Azimuth means of what flows: mass, angular momentum and energy, each with its parts."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.ring_means import ring_means

__all__ = ["ABSENT_GAMMA", "QUANTITIES", "FluxTables", "excess_density", "flux_tables"]

ABSENT_GAMMA = "no gamma: isothermal gas has no enthalpy of the form gamma P/((gamma - 1) rho)"
# Name of each flux, and the group of fields it is worked out from.
QUANTITIES = {
    "mass": "gas",
    "kinetic_torque": "gas",
    "excess_torque": "gas",
    "kinetic_energy": "gas",
    "gravity": "gas",
    "magnetic_torque": "field",
    "poynting": "both",
    "enthalpy": "heat",
}
_NEEDS = {
    "gas": ("density", *VELOCITY),
    "field": MAGNETIC,
    "both": (*VELOCITY, *MAGNETIC),
    "heat": ("pressure", *VELOCITY),
}
_MIDPLANE = 0.5 * np.pi
_Fields = dict[str, Array]


@dataclass(frozen=True, eq=False)
class FluxTables:
    """Flux densities averaged along azimuth, tables (n_theta, n_r).

    Attributes
    ----------
    mesh : MeridionalMesh
    radial, southward : mapping of quantity to table
        Components along r-hat and theta-hat.
    size : mapping of quantity to table
        Mean absolute value of what crosses the launching surface theta = S(r) southward,
        F_theta - r S' F_r.
    reasons : mapping of quantity to str
        Why a quantity is absent.
    notes : tuple of str
    """

    mesh: MeridionalMesh
    radial: Mapping[str, Array]
    southward: Mapping[str, Array]
    size: Mapping[str, Array]
    reasons: Mapping[str, str]
    notes: tuple[str, ...]


class _Flow:
    """Fluxes of one block at a time; its fields are read once."""

    def __init__(self, snapshot: Snapshot, names: tuple[str, ...]) -> None:
        self._snapshot, self._names = snapshot, names
        self._block = -1
        self._fields: _Fields = {}

    def fields(self, block: int) -> _Fields:
        if block != self._block:
            self._fields = {
                name: self._snapshot.cell_block(name, block).astype(np.float64)
                for name in self._names
            }
            r, theta, _ = self._snapshot.grid.cell_centres(block)
            self._fields |= {"r": r, "R": r * np.sin(theta)[:, None]}
            self._block = block
        return self._fields

    def flux(self, quantity: str, component: str, block: int) -> Array:
        """One component of a flux density, (n_phi, n_theta, n_r)."""
        with np.errstate(invalid="ignore", over="ignore"):
            return _FORMULAS[quantity](self.fields(block), component, self._snapshot)


def _carried(f: _Fields, component: str) -> Array:
    return f["density"] * f[f"velocity_{component}"]


def _specific_excess(f: _Fields, snapshot: Snapshot) -> Array:
    """R v_phi - sqrt(GM r): angular momentum per mass beyond Kepler's on the midplane."""
    return np.asarray(f["R"] * f["velocity_phi"] - np.sqrt(snapshot.gm * f["r"]))


def _square(f: _Fields, kind: str) -> Array:
    return f[f"{kind}_r"] ** 2 + f[f"{kind}_theta"] ** 2 + f[f"{kind}_phi"] ** 2


def _poynting(f: _Fields, component: str, snapshot: Snapshot) -> Array:
    along = sum(f[v] * f[b] for v, b in zip(VELOCITY, MAGNETIC, strict=True))
    flux = _square(f, "magnetic") * f[f"velocity_{component}"] - along * f[f"magnetic_{component}"]
    return np.asarray(flux / snapshot.mu0)


def _enthalpy(f: _Fields, component: str, snapshot: Snapshot) -> Array:
    assert snapshot.gamma is not None
    factor = snapshot.gamma / (snapshot.gamma - 1)
    return np.asarray(factor * f["pressure"] * f[f"velocity_{component}"])


_FORMULAS: dict[str, Callable[[_Fields, str, Snapshot], Array]] = {
    "mass": lambda f, c, s: _carried(f, c),
    "kinetic_torque": lambda f, c, s: f["R"] * f["velocity_phi"] * _carried(f, c),
    "excess_torque": lambda f, c, s: _carried(f, c) * _specific_excess(f, s),
    "kinetic_energy": lambda f, c, s: 0.5 * _square(f, "velocity") * _carried(f, c),
    "gravity": lambda f, c, s: -s.gm / f["r"] * _carried(f, c),
    "magnetic_torque": lambda f, c, s: -f["R"] * f["magnetic_phi"] * f[f"magnetic_{c}"] / s.mu0,
    "poynting": _poynting,
    "enthalpy": _enthalpy,
}


def excess_density(snapshot: Snapshot, block: int) -> Array:
    """Rho (R v_phi - sqrt(GM r)) of one block, (n_phi, n_theta, n_r)."""
    f = _Flow(snapshot, ("density", "velocity_phi")).fields(block)
    return np.asarray(f["density"] * _specific_excess(f, snapshot))


def flux_tables(
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    slopes: tuple[Array, Array] | None = None,
) -> FluxTables:
    """Go over the blocks and average all fluxes that the snapshot's fields allow.

    Parameters
    ----------
    snapshot : Snapshot
    mesh : MeridionalMesh
        Of the snapshot's grid.
    slopes : ((n_r,) array, (n_r,) array), optional
        r S'(r) of the launching surface above and below the midplane, by column; cones by default.

    Returns
    -------
    FluxTables
        Memory is that of one block and of the tables.

    Notes
    -----
    Gas, field, Poynting flux and enthalpy are averaged apart, so that a cell without a number in
    one of them spoils no other. Such cells are left out and counted.
    """
    absent = {quantity: _reason(snapshot, group) for quantity, group in QUANTITIES.items()}
    found: dict[str, dict[str, Array]] = {"r": {}, "theta": {}, "size": {}}
    notes: list[str] = []
    for group in dict.fromkeys(QUANTITIES.values()):
        names = [q for q, its in QUANTITIES.items() if its == group and not absent[q]]
        if not names:
            continue
        columns = [(quantity, kind) for quantity in names for kind in found]
        means, left_out = _averaged(snapshot, mesh, group, columns, slopes)
        for kind, tables in found.items():
            tables |= {q: means[f"{q} {kind}"] for q in names}
        what = ", ".join(names).replace("_", " ")
        notes += [f"{what}: {note}" for note in left_out]
    reasons = {quantity: reason for quantity, reason in absent.items() if reason}
    return FluxTables(
        mesh, found["r"], found["theta"], found["size"], reasons,
        tuple(notes),
    )  # fmt: skip


def _averaged(
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    group: str,
    columns: list[tuple[str, str]],
    slopes: tuple[Array, Array] | None,
) -> tuple[dict[str, Array], tuple[str, ...]]:
    flow = _Flow(snapshot, _NEEDS[group])

    def values(block: int) -> tuple[Array, list[Array]]:
        found = []
        for quantity, kind in columns:
            if kind in ("r", "theta"):
                found.append(flow.flux(quantity, kind, block))
                continue
            found.append(np.abs(_across(flow, quantity, snapshot, mesh, slopes, block)))
        good = np.ones(snapshot.grid.block_shape, dtype=bool)
        if group == "gas":
            # Gas without a positive density counts as without a number.
            good &= flow.fields(block)["density"] > 0
        return good, found

    names = [f"{q} {kind}" for q, kind in columns]
    # The slope of a surface may jump from column to column: nothing to make linear then.
    smooth = [name for name in names if slopes is None or not name.endswith(" size")]
    return ring_means(snapshot, mesh, names, values, smooth=smooth)


def _across(
    flow: _Flow,
    quantity: str,
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    slopes: tuple[Array, Array] | None,
    block: int,
) -> Array:
    """Southward component across the surface of the side on which each cell lies."""
    southward = flow.flux(quantity, "theta", block)
    if slopes is None:
        return southward
    _, cells, place = mesh.block_cells(block)
    count = np.bincount(cells)
    upper, lower = (np.bincount(cells, np.nan_to_num(s[place[1]])) / count for s in slopes)
    above = snapshot.grid.cell_centres(block)[1] < _MIDPLANE
    slope = np.where(above[:, None], upper, lower)
    return np.asarray(southward - slope * flow.flux(quantity, "r", block))


def _reason(snapshot: Snapshot, group: str) -> str:
    missing = [name for name in _NEEDS[group] if not snapshot.has(name)]
    if missing:
        return f"no {', '.join(missing)} in the snapshot"
    if group == "heat" and (snapshot.gamma is None or snapshot.gamma <= 1):
        return ABSENT_GAMMA
    return ""
