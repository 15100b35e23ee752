"""A snapshot in physical units: the file's own scales applied to edges, fields and constants."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import MAGNETIC, VELOCITY, Fields
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wedge.units import Unit, UnitScales

__all__ = ["in_physical_units"]


def in_physical_units(snapshot: Snapshot, *, check_only: bool = False) -> Snapshot:
    """The same snapshot in the units its file names.

    Parameters
    ----------
    snapshot : Snapshot
        With scales of length, mass and time.
    check_only : bool
        Return it as it is once the scales are there.

    Returns
    -------
    Snapshot
        mu0 stays as it is, so a field B comes in sqrt(mass/length)/time. Fields of unknown
        dimension stay as they are.

    Raises
    ------
    FieldvizError
        Without all three scales.
    """
    units = snapshot.units
    if units.length is None or units.mass is None or units.time is None:
        missing = [n for n in ("length", "mass", "time") if getattr(units, n) is None]
        raise FieldvizError(
            "Cannot show physical units: expected scales of length, mass and time in the file, "
            f"got none of {', '.join(missing)}; choose code units, or add them in a layout "
            "description."
        )
    if check_only:
        return snapshot
    length, mass, time = units.length.value, units.mass.value, units.time.value
    speed, pressure = length / time, mass / (length * time**2)
    factors = {
        "density": mass / length**3,
        "pressure": pressure,
        **dict.fromkeys(VELOCITY, speed),
        **dict.fromkeys(MAGNETIC, float(np.sqrt(pressure))),
        **dict.fromkeys(("diffusivity_ambipolar", "diffusivity_ohmic"), length * speed),
    }
    grid = snapshot.grid
    return replace(
        snapshot,
        grid=WedgeGrid(grid.r_edges * length, grid.theta_edges, grid.phi_edges, grid.level),
        cells=_Scaled(snapshot.cells, factors),
        faces=_Scaled(snapshot.faces, factors),
        time=snapshot.time * time,
        gm=snapshot.gm * length**3 / time**2,
        units=UnitScales(*(Unit(1.0, u.label) for u in (units.length, units.mass, units.time))),
    )


class _Scaled(Fields):
    """Fields times a factor each, in double precision where single could overflow."""

    def __init__(self, fields: Fields, factors: Mapping[str, float]) -> None:
        self._fields, self._factors = fields, factors

    def _times(self, name: str, read: Callable[[], Array]) -> Array:
        factor = self._factors.get(name)
        return read() if factor is None else np.asarray(read(), dtype=np.float64) * factor

    def __getitem__(self, name: str) -> Array:
        return self._times(name, lambda: self._fields[name])

    def block(self, name: str, block: int) -> Array:
        return self._times(name, lambda: self._fields.block(name, block))

    def __iter__(self) -> Iterator[str]:
        return iter(self._fields)

    def __len__(self) -> int:
        return len(self._fields)

    def __contains__(self, name: object) -> bool:
        return name in self._fields
