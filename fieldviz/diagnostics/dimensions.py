"""What a number is made of: powers of length, mass, time and field; code and physical labels."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.units import UnitScales

__all__ = [
    "DENSITY",
    "FIELD",
    "FLUX",
    "LENGTH",
    "MASS",
    "POWER",
    "PRESSURE",
    "RATE",
    "SURFACE_DENSITY",
    "TORQUE",
    "VELOCITY",
    "Dimension",
    "physical_factor",
]

# centimetres, grams and seconds: au of the IAU 2012 resolution, the Julian year, the nominal solar
# mass of GM (IAU 2015) over G (CODATA 2018); from memory.
_CGS = {
    "length": {"cm": 1.0, "m": 1e2, "km": 1e5, "au": 1.495978707e13},
    "mass": {"g": 1.0, "kg": 1e3, "Msun": 1.98841e33},
    "time": {"s": 1.0, "yr": 3.15576e7, "year": 3.15576e7},
}


@dataclass(frozen=True)
class Dimension:
    """Powers of the base quantities.

    Attributes
    ----------
    length, mass, time : int
    field : int
        Power of the magnetic field, whose square over mu0 is a pressure.
    """

    length: int = 0
    mass: int = 0
    time: int = 0
    field: int = 0

    @property
    def code_label(self) -> str:
        """For example "code mass length^-2"."""
        return " ".join(["code", *_labelled(self._powers())])

    def _powers(self) -> list[tuple[str, int]]:
        names = ("field", "mass", "length", "time")
        return [(name, getattr(self, name)) for name in names if getattr(self, name)]


LENGTH = Dimension(length=1)
MASS = Dimension(mass=1)
DENSITY = Dimension(mass=1, length=-3)
SURFACE_DENSITY = Dimension(mass=1, length=-2)
PRESSURE = Dimension(mass=1, length=-1, time=-2)
VELOCITY = Dimension(length=1, time=-1)
RATE = Dimension(mass=1, time=-1)
POWER = Dimension(mass=1, length=2, time=-3)
TORQUE = Dimension(mass=1, length=2, time=-2)
FIELD = Dimension(field=1)
FLUX = Dimension(field=1, length=2)


def physical_factor(
    dimension: Dimension, units: UnitScales, mu0: float
) -> tuple[float, str] | None:
    """Factor and label that turn a code number into the snapshot's units.

    Parameters
    ----------
    dimension : Dimension
    units : UnitScales
    mu0 : float
        Of the code: 1, or 4 pi for Gaussian fields.

    Returns
    -------
    (float, str) or None
        None where a scale that is needed was not given. Fields come in gauss, and only where the
        labels of all three scales are among cm, m, km, au; g, kg, Msun; s, yr.

    Notes
    -----
    B^2/(2 mu0) in the code is B^2/(8 pi) in gauss.
    """
    base = units.conversion(length=dimension.length, mass=dimension.mass, time=dimension.time)
    if base is None or dimension.field == 0:
        return base
    gauss = _gauss(units, mu0)
    if gauss is None:
        return None
    label = [*_labelled([("G", dimension.field)]), *([base[1]] if base[1] else [])]
    return base[0] * gauss**dimension.field, " ".join(label)


def _gauss(units: UnitScales, mu0: float) -> float | None:
    """Gauss in one code unit of the field."""
    scales = []
    for name, known in _CGS.items():
        unit = getattr(units, name)
        if unit is None or unit.label not in known:
            return None
        scales.append(unit.value * known[unit.label])
    length, mass, time = scales
    return float(np.sqrt(4 * np.pi / mu0 * mass / length) / time)


def _labelled(powers: list[tuple[str, int]]) -> list[str]:
    return [name if power == 1 else f"{name}^{power}" for name, power in powers]
