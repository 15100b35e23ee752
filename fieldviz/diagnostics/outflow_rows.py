"""Rows of the outflow: losses through both sides, budgets, lever arms, and the bins of radius."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from fieldviz.diagnostics.absence import Absent
from fieldviz.diagnostics.dimensions import LENGTH, POWER, RATE, TORQUE, Dimension
from fieldviz.diagnostics.tables import Table, profile_table
from fieldviz.wedge.typing import Array

if TYPE_CHECKING:
    from fieldviz.wind.outflow import Outflow

__all__ = ["outflow_scalars", "outflow_table"]

_LOSSES = (
    ("mass", "mass loss", RATE),
    ("kinetic_torque", "torque of the gas", TORQUE),
    ("magnetic_torque", "torque of the field", TORQUE),
    ("torque", "torque", TORQUE),
    ("energy", "energy loss", POWER),
)
_SIDES = ("upper", "lower")
Row = tuple[str, float | int | str | Absent | None, Dimension | str]


def outflow_scalars(found: Outflow) -> Iterator[Row]:
    """One row for each number; the wedge's, not the full disc's."""
    for name, words, unit in _LOSSES:
        loss = getattr(found, name)
        why = Absent(loss.reason) if loss.reason else None
        for side in _SIDES:
            net = getattr(loss, side).net
            yield f"{words}, {side}", why if why and net != net else net, unit
    low, high = found.spread["mass"]
    yield "least mass loss with the surface moved by one H", low, RATE
    yield "largest mass loss with the surface moved by one H", high, RATE
    yield "full disc over wedge", found.full_disc_factor, ""
    arm = found.lever_arm
    for side in (*_SIDES, "total"):
        value = getattr(arm, side)
        notes = [note for note in arm.notes if f"({side})" in note]
        yield f"lever arm, {side}", Absent(notes[0]) if notes else value, ""
    falling = found.accretion
    why = Absent(falling.reason) if falling.reason else None
    yield "accretion at the innermost sphere", why or float(falling.rate[0]), RATE
    yield "accretion at the outermost sphere", why or float(falling.rate[-1]), RATE
    index = found.ejection
    yield "ejection index", Absent(index.reason) if index.reason else index.value, ""
    for budget in (found.mass_budget, found.angular_momentum_budget):
        why = Absent(budget.reason) if budget.reason else None
        yield f"{budget.name} budget: residual over the largest term", why or budget.share, ""
    if found.inclination is None:
        yield "lean of the field", Absent("it needs density, velocity and the poloidal field"), ""
        return
    for one in (found.inclination.upper, found.inclination.lower):
        why = Absent(one.reason) if one.reason else None
        yield f"mean lean of the field, {one.side}", why or one.mean, "degrees"
        words = f"share of the wind that leaves at more than 30 degrees, {one.side}"
        yield words, why or one.share_steep, ""


def outflow_table(found: Outflow) -> Table:
    """Losses in bins of radius."""
    radii = found.mass.upper.radii
    profiles: dict[str, tuple[Dimension | str, Array | None]] = {
        "r inner": (LENGTH, radii[:-1]),
        "r outer": (LENGTH, radii[1:]),
    }
    for name, words, unit in _LOSSES:
        loss = getattr(found, name)
        for side in _SIDES:
            profiles[f"{words}, {side}"] = unit, getattr(loss, side).bins
    return profile_table("outflow", "What leaves through the launching surfaces", profiles)
