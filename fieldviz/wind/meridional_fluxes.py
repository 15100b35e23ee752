"""Azimuth means of what flows: mass, angular momentum and energy, each with its parts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.chunks import by_chunks, same_type
from fieldviz.wind.ring_means import RingTotals

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
_FIELDS = ("density", "pressure", *VELOCITY, *MAGNETIC)  # in the order of the kernel
_KINDS = ("r", "theta", "size")


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


def excess_density(snapshot: Snapshot, block: int) -> Array:
    """Rho (R v_phi - sqrt(GM r)) of one block, (n_phi, n_theta, n_r)."""
    density, v_phi = (
        snapshot.cell_block(name, block).astype(np.float64) for name in ("density", "velocity_phi")
    )
    r, theta, _ = snapshot.grid.cell_centres(block)
    lever = r * np.sin(theta)[:, None]
    # Angular momentum per mass beyond Kepler's on the midplane.
    return np.asarray(density * (lever * v_phi - np.sqrt(snapshot.gm * r)))


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
    found: dict[str, dict[str, Array]] = {kind: {} for kind in _KINDS}
    notes: list[str] = []
    for group, total in _summed(snapshot, mesh, absent, slopes).items():
        names = _quantities(group)
        means = total.means()
        for kind, tables in found.items():
            tables |= {q: means[f"{q} {kind}"] for q in names}
        what = ", ".join(names).replace("_", " ")
        notes += [f"{what}: {note}" for note in total.notes]
    reasons = {quantity: reason for quantity, reason in absent.items() if reason}
    return FluxTables(
        mesh, found["r"], found["theta"], found["size"], reasons,
        tuple(notes),
    )  # fmt: skip


def _quantities(group: str) -> list[str]:
    return [quantity for quantity, its in QUANTITIES.items() if its == group]


def _summed(
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    absent: Mapping[str, str],
    slopes: tuple[Array, Array] | None,
) -> dict[str, RingTotals]:
    """Totals of each group that is there; the fields of a block are read once for all of them."""
    wanted = np.array([not absent[_quantities(group)[0]] for group in _NEEDS])
    totals, places = {}, {}
    for group in np.array(list(_NEEDS))[wanted]:
        names = [f"{q} {kind}" for q in _quantities(group) for kind in _KINDS]
        # The slope of a surface may jump from column to column: nothing to make linear then.
        smooth = [name for name in names if slopes is None or not name.endswith(" size")]
        totals[str(group)] = RingTotals(snapshot, mesh, names, smooth)
        first = list(QUANTITIES).index(_quantities(group)[0])
        places[str(group)] = slice(first, first + len(_quantities(group)))
    if not totals:
        return {}
    for block in range(snapshot.grid.n_blocks):
        covered, sums, left_out = _block_sums(snapshot, mesh, block, wanted, slopes)
        for number, group in enumerate(_NEEDS):
            if group in totals:
                its = sums[places[group]].reshape(-1, *covered.shape[1:])
                totals[group].add(block, covered[number], its, int(left_out[number]))
    return totals


def _block_sums(
    snapshot: Snapshot,
    mesh: MeridionalMesh,
    block: int,
    wanted: Array,
    slopes: tuple[Array, Array] | None,
) -> tuple[Array, Array, Array]:
    """Azimuth covered, sums and cells left out of one block; see `_kernels.flux_rows`."""
    from fieldviz.wind._kernels import flux_rows

    groups = zip(_NEEDS.values(), wanted, strict=True)
    needed = {name for names, there in groups if there for name in names}
    there = np.array([name in needed for name in _FIELDS])
    read = same_type([snapshot.cell_block(n, block) for n in _FIELDS if n in needed])
    fields = tuple(read[place] for place in np.maximum(np.cumsum(there) - 1, 0))
    r, theta, _ = snapshot.grid.cell_centres(block)
    lever = r * np.sin(theta)[:, None]
    kepler, well = np.sqrt(snapshot.gm * r), -snapshot.gm / r
    slope = _slope_rows(snapshot, mesh, block, slopes)
    gamma = snapshot.gamma or 0.0
    heat = gamma / (gamma - 1) if gamma > 1 else 0.0
    covered, sums = np.zeros((len(wanted), *lever.shape)), np.zeros((8, 3, *lever.shape))
    steps = np.diff(snapshot.grid.phi_edges[block])

    def work(start: int, stop: int) -> Array:
        left_out: Array = flux_rows(
            fields, there, start, stop, steps, lever, kepler, well, slope, wanted,
            snapshot.mu0, heat, covered, sums,
        )  # fmt: skip
        return left_out

    return covered, sums, by_chunks(len(theta), int(np.prod(snapshot.grid.block_shape)), work)


def _slope_rows(
    snapshot: Snapshot, mesh: MeridionalMesh, block: int, slopes: tuple[Array, Array] | None
) -> Array:
    """Slope of the surface of the side on which each cell lies, (n_theta, n_r)."""
    shape = snapshot.grid.block_shape[1:]
    if slopes is None:
        return np.zeros(shape)
    _, cells, place = mesh.block_cells(block)
    count = np.bincount(cells)
    upper, lower = (np.bincount(cells, np.nan_to_num(s[place[1]])) / count for s in slopes)
    above = snapshot.grid.cell_centres(block)[1] < _MIDPLANE
    return np.where(above[:, None], upper, lower)


def _reason(snapshot: Snapshot, group: str) -> str:
    missing = [name for name in _NEEDS[group] if not snapshot.has(name)]
    if missing:
        return f"no {', '.join(missing)} in the snapshot"
    if group == "heat" and (snapshot.gamma is None or snapshot.gamma <= 1):
        return ABSENT_GAMMA
    return ""
